"""What a C type can be.  Arithmetic types are ``model.CType``; the others are here."""

from __future__ import annotations

from typing import Any, TypeAlias, Union

from ..model import CType
from ..values import dataclass

NONE: frozenset[str] = frozenset()


@dataclass(frozen=True)
class Void:
    """``void``."""


@dataclass(frozen=True)
class PointerTo:
    """A pointer; an array parameter is one too."""

    target: Type
    target_quals: frozenset[str] = NONE  # ``const``, ``volatile``, ``_Atomic`` of what it points to
    quals: frozenset[str] = NONE  # ``const``, ``restrict``, ``volatile``, ``_Atomic`` of the pointer itself

    @property
    def restrict(self) -> bool:
        """True for a restrict-qualified pointer."""
        return "restrict" in self.quals


@dataclass(frozen=True)
class ArrayOf:
    """An array object."""

    element: Type
    extent: Any = None  # the expression of its length as a tree node; None for ``[]`` and ``[*]``
    element_quals: frozenset[str] = NONE


@dataclass(frozen=True)
class StructType:
    """A structure or union; ``types.members`` gives what is in it."""

    kind: str  # ``struct`` or ``union``
    tag: str | None
    node: Any  # the tree node of its definition; None if it is incomplete


@dataclass(frozen=True)
class FunctionType:
    """A function."""

    result: Type
    parameters: tuple[Type, ...] | None  # None for ``()``
    variadic: bool = False


@dataclass(frozen=True)
class UnknownType:
    """A type that retile does not read."""

    reason: str


Type: TypeAlias = Union[CType, Void, PointerTo, ArrayOf, StructType, FunctionType, UnknownType]


@dataclass(frozen=True)
class Member:
    """A member of a structure or union."""

    name: str | None  # None for an anonymous structure or an unnamed bit-field
    type: Type
    quals: frozenset[str]
    bits: int | None  # width of a bit-field
    offset: int | None  # bytes from the start; None if unknown, and for bit-fields


@dataclass(frozen=True)
class Declared:
    """What a name stands for at a place."""

    name: str
    kind: str  # ``object``, ``function``, ``typedef``, ``constant`` (of an enumeration)
    where: str  # ``file``, ``parameter``, ``block``
    node: Any  # Decl, Typedef, Enumerator or FuncDef; None for a parameter that an old-style definition leaves int
    block: Any = None  # the Compound, For or FuncDef whose scope it belongs to; None at file scope
    value: int | None = None  # of an enumeration constant

    @property
    def storage(self) -> tuple[str, ...]:
        """``static``, ``extern``, ``register`` ... as written."""
        return tuple(getattr(self.node, "storage", None) or ())


class Scope:
    """The names that hold at a place; made by adding one name to those that held before."""

    __slots__ = ("outer", "key", "declared", "table")

    def __init__(self, outer: Scope | None, key: str = "", declared: Any = None) -> None:
        self.outer, self.key, self.declared = outer, key, declared
        self.table: dict[str, Any] | None = None  # only at file scope

    def with_name(self, key: str, declared: Any) -> Scope:
        """A scope with one more name."""
        return Scope(self, key, declared)

    def find(self, key: str) -> Any:
        """What a key stands for: a name, or ``struct tag``; None if it is not declared."""
        scope: Scope | None = self
        while scope is not None:
            if scope.table is not None:
                return scope.table.get(key)
            if scope.key == key:
                return scope.declared
            scope = scope.outer
        return None

    def lookup(self, name: str) -> Declared | None:
        """What a name stands for here."""
        found = self.find(name)
        return found if isinstance(found, Declared) else None

    def local_names(self) -> tuple[str, ...]:
        """All parameters and block names that hold here, innermost first."""
        names: dict[str, None] = {}
        scope: Scope | None = self
        while scope is not None and scope.table is None:
            if isinstance(scope.declared, Declared):
                names.setdefault(scope.key)
            scope = scope.outer
        return tuple(names)
