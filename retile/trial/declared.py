"""What the names that a nest uses were declared as: enough of C's types to give each of them memory.

Works on the syntax tree of the preprocessed file.  Widths and offsets stay the compiler's business: types are kept as
text, so that the kernel's own ``sizeof`` and ``offsetof`` answer.
"""

from __future__ import annotations

import copy
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

from pycparser import c_ast, c_generator

from ..model import RetileError


@dataclass(frozen=True)
class Arithmetic:
    """An integer, floating or enumerated type."""

    text: str  # a type name of C without qualifiers


@dataclass(frozen=True)
class Pointer:
    """A pointer to an object."""

    target: Type
    text: str = "void *"  # all pointers to objects have one size here; the true type may use names of the function


@dataclass(frozen=True)
class Array:
    """A declared array; the extent is an expression node, or None for ``[]``."""

    element: Type
    extent: Any


@dataclass(frozen=True)
class Record:
    """A struct or union and its members; members without a name (bit fields too) are left out."""

    text: str
    members: tuple[tuple[str, Any], ...]  # (name, type node)
    union: bool


@dataclass(frozen=True)
class Opaque:
    """A type whose objects are left zero: functions, ``void``, incomplete structs."""

    text: str


Type = Arithmetic | Pointer | Array | Record | Opaque


@dataclass(frozen=True)
class Variable:
    """An object that the nest can name."""

    name: str
    node: Any  # its type node
    place: str  # ``argument``, ``local``, ``global``
    constant: bool  # the object itself is const
    init: Any  # its initializer, if it has one
    defined: bool = True  # False for ``extern`` without a definition in the file


@dataclass
class Scope:
    """All names that are visible where the nest stands, inner declarations hiding outer ones."""

    variables: dict[str, Variable] = field(default_factory=dict)
    typedefs: dict[str, Any] = field(default_factory=dict)
    records: dict[str, Any] = field(default_factory=dict)
    constants: dict[str, Any] = field(default_factory=dict)  # enumerators, as expression nodes
    local_types: list[str] = field(default_factory=list)  # declarations of types inside the function, as text

    def type_of(self, node: Any) -> Type:
        """The type that a type node means; RetileError for one that cannot be given memory."""
        if isinstance(node, c_ast.TypeDecl | c_ast.Typename):
            return self.type_of(node.type)
        if isinstance(node, c_ast.PtrDecl):
            if isinstance(node.type, c_ast.FuncDecl):
                return Opaque(type_text(node))
            return Pointer(self.type_of(node.type))
        if isinstance(node, c_ast.ArrayDecl):
            return Array(self.type_of(node.type), node.dim)
        if isinstance(node, c_ast.Enum):
            return Arithmetic(type_text(node) if node.name else "int")
        if isinstance(node, c_ast.Struct | c_ast.Union):
            return self._record(node)
        if isinstance(node, c_ast.IdentifierType):
            return self._named(node)
        return Opaque(type_text(node))

    def _named(self, node: Any) -> Type:
        name = " ".join(node.names)
        if name not in self.typedefs:
            return Opaque(name) if name == "void" else Arithmetic(name)
        meant = self.type_of(self.typedefs[name])
        if isinstance(meant, Record):
            return Record(name, meant.members, meant.union)
        return Arithmetic(name) if isinstance(meant, Arithmetic) else meant

    def _record(self, node: Any) -> Type:
        union = isinstance(node, c_ast.Union)
        key = f"{'union' if union else 'struct'} {node.name}"
        decls = node.decls if node.decls is not None else self.records.get(key)
        if decls is None:
            return Opaque(key)
        members = tuple(
            (decl.name, decl.type)
            for decl in decls
            if isinstance(decl, c_ast.Decl) and decl.name and decl.bitsize is None
        )
        return Record(key if node.name else "", members, union)


def type_text(node: Any, name: str | None = None, qualifiers: bool = False) -> str:
    """The C of a type, or of a declaration of ``name``; without ``qualifiers`` those of the object itself are left out.

    >>> # ``double *restrict const a`` gives ``double *``; with a name and qualifiers ``double * restrict const a``
    """
    node = copy.deepcopy(node)
    inner = node
    while not isinstance(inner, c_ast.TypeDecl):
        if isinstance(inner, c_ast.IdentifierType | c_ast.Struct | c_ast.Union | c_ast.Enum):
            inner = c_ast.TypeDecl(None, [], None, inner)
            node = inner
            break
        inner = inner.type
    inner.declname = name
    if not qualifiers:
        if isinstance(node, c_ast.PtrDecl | c_ast.TypeDecl):
            node.quals = []
    _without_bodies(node)
    if name is None:
        return str(c_generator.CGenerator().visit(c_ast.Typename(None, [], None, node)))
    return str(c_generator.CGenerator().visit(c_ast.Decl(name, [], [], [], [], node, None, None)))


def _without_bodies(node: Any) -> None:
    """Leave only the tags of structs, unions and enums: their definitions stand elsewhere."""
    while node is not None:
        if isinstance(node, c_ast.Struct | c_ast.Union):
            node.decls = None if node.name else node.decls
            return
        if isinstance(node, c_ast.Enum):
            node.values = None if node.name else node.values
            return
        node = getattr(node, "type", None)


def scope_at(file: Any, function: Any, nest: Any) -> Scope:
    """The names visible at a nest: those of the file, of the function's arguments and of the blocks around the nest.

    ``file``, ``function`` and ``nest`` are the FileAST, FuncDef and For nodes.
    """
    scope = Scope()
    for item in file.ext:
        if item is function:
            break
        _enter(scope, item, "global")
    for item in file.ext:  # a later definition of what was only announced before, and of ``extern`` objects
        if (
            isinstance(item, c_ast.Decl)
            and item.name in scope.variables
            and "extern" not in item.storage
            and not isinstance(item.type, c_ast.FuncDecl)
        ):
            _enter(scope, item, "global")
    arguments = function.decl.type.args
    old_style = {decl.name: decl for decl in function.param_decls or ()}
    for argument in arguments.params if arguments is not None else ():
        decl = old_style.get(argument.name, argument)
        if isinstance(decl, c_ast.Decl) and decl.name:
            _enter(scope, decl, "argument")
    for item in _before(function.body, nest) or ():
        _enter(scope, item, "local")
    return scope


def _before(block: Any, nest: Any) -> list[Any] | None:
    """The declarations that are in force at ``nest`` inside ``block``, outer ones first; None if it is not in there."""
    found: list[Any] = []
    if block is nest:
        return found
    for _, child in block.children():
        deeper = _before(child, nest)
        if deeper is not None:
            return found + deeper
        if isinstance(child, c_ast.Decl | c_ast.Typedef):
            found.append(child)
        elif isinstance(child, c_ast.DeclList):
            found.extend(child.decls)
    return None


def _enter(scope: Scope, item: Any, place: str) -> None:
    if isinstance(item, c_ast.DeclList):
        for decl in item.decls:
            _enter(scope, decl, place)
        return
    if not isinstance(item, c_ast.Decl | c_ast.Typedef):
        return
    new_type = _enter_tags(scope, item.type)
    if isinstance(item, c_ast.Typedef):
        scope.typedefs[item.name] = item.type
        scope.variables.pop(item.name, None)
        if place == "local":
            scope.local_types.append(c_generator.CGenerator().visit(item) + ";")
        return
    if new_type and place == "local":
        scope.local_types.append(c_generator.CGenerator().visit(new_type) + ";")
    if item.name is None or isinstance(item.type, c_ast.FuncDecl):
        return
    old = scope.variables.get(item.name)
    extern = "extern" in item.storage
    if old is not None and old.place == "global" and place == "global" and extern:
        return
    held = "global" if place == "local" and extern else place
    if extern and isinstance(item.type, c_ast.ArrayDecl) and item.type.dim is None:
        held = "argument"  # nobody here knows how long it is: as good as a pointer
    scope.typedefs.pop(item.name, None)
    node, init = item.type, item.init
    if isinstance(node, c_ast.ArrayDecl) and node.dim is None and isinstance(item.init, c_ast.InitList):
        node = copy.copy(node)
        node.dim = c_ast.Constant("int", str(len(item.init.exprs)))
    if old is not None and place == "global":
        init = init if init is not None else old.init
    scope.variables[item.name] = Variable(item.name, node, held, _is_const(node), init, not extern)


def _enter_tags(scope: Scope, node: Any) -> Any:
    """Note struct and enum definitions in a type; the node of the outermost one with a tag, if any."""
    while node is not None and not isinstance(node, c_ast.Struct | c_ast.Union | c_ast.Enum):
        node = getattr(node, "type", None)
    if isinstance(node, c_ast.Enum) and node.values is not None:
        previous: Any = None
        for enumerator in node.values.enumerators:
            value = enumerator.value
            if value is None:
                one = c_ast.Constant("int", "1")
                value = c_ast.Constant("int", "0") if previous is None else c_ast.BinaryOp("+", previous, one)
            scope.constants[enumerator.name] = previous = value
        return node
    if isinstance(node, c_ast.Struct | c_ast.Union) and node.decls is not None:
        if node.name:
            scope.records[f"{'union' if isinstance(node, c_ast.Union) else 'struct'} {node.name}"] = node.decls
        for decl in node.decls:
            _enter_tags(scope, getattr(decl, "type", None))
        return node if node.name else None
    return None


def _is_const(node: Any) -> bool:
    while isinstance(node, c_ast.ArrayDecl):
        node = node.type
    return "const" in (getattr(node, "quals", None) or ())


def walk(node: Any) -> Iterator[Any]:
    """A node and all below it, in text order."""
    yield node
    for _, child in node.children():
        yield from walk(child)


def names_in(node: Any) -> set[str]:
    """Every identifier used in an expression or statement, names of members left out."""
    if isinstance(node, c_ast.ID):
        return {node.name}
    if isinstance(node, c_ast.StructRef):
        return names_in(node.name)
    found: set[str] = set()
    for _, child in node.children():
        found |= names_in(child)
    return found


def require(condition: object, message: str) -> None:
    """Raise RetileError with this message unless the condition holds."""
    if not condition:
        raise RetileError(message)
