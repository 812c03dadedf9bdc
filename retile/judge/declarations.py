"""The judge's reading of declarations: scopes, types, sizes, constants.

Names at file scope are read when somebody uses them: a unit with the system's own headers has thousands.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

from .arithmetic import exact
from .kinds import (DOUBLE, FLOAT, INT, LDOUBLE, LLONG, LONG, NAMED, UINT, ULLONG, ULONG, VOID, Array, Function, Kind,
                    Length, Number, Pointer, Struct, Unsupported, basic_type, cells_of, constant_size)
from .writer import identifier


@dataclass(eq=False)
class Variable:
    """A variable, and how the generated code holds it."""

    name: str
    python: str  # its name there
    kind: Kind
    held: str  # "number": a Python variable; "pointer": two, object and offset; "object": one, an Object
    where: str  # "caller", "global", "local", or "block" if declared inside the nest
    declared: Any = None  # the same for all executions of a declaration
    data: bool = False  # an integer with a history, not one that stands for itself
    iterator: bool = False
    exposed: bool = False  # an array of the function whose address goes into a pointer


@dataclass(frozen=True)
class Constant:
    """An enumeration constant."""

    value: int


@dataclass(frozen=True)
class Alias:
    """A typedef name."""

    kind: Kind


class Unit:
    """What stands at file scope of a translation unit."""

    def __init__(self, tree: c_ast.FileAST) -> None:
        self.functions: dict[str, c_ast.FuncDef] = {}
        self.globals: dict[str, Variable] = {}  # those that somebody used
        self.global_nodes: dict[str, c_ast.Decl] = {}
        self.scope: dict[str, Any] = {}
        self.waiting: dict[str, Any] = {}  # declarations that nobody used yet
        self.tags: dict[str, c_ast.Struct] = {}
        self.structs: dict[Any, Struct] = {}
        self.enums: set[int] = set()
        reader = Declarations(self)
        for node in tree.ext:
            self._declare(node, reader)

    def _declare(self, node: Any, reader: Declarations) -> None:
        if isinstance(node, c_ast.FuncDef):
            self.functions[node.decl.name] = node
            return
        for tag in _tags_in(node):
            if isinstance(tag, c_ast.Struct) and tag.decls is not None and tag.name:
                self.tags[tag.name] = tag
            if isinstance(tag, c_ast.Enum):
                reader.enumerate(tag)
        if isinstance(node, c_ast.Typedef):
            self.waiting[node.name] = node
        elif isinstance(node, c_ast.Decl) and node.name and not isinstance(node.type, c_ast.FuncDecl):
            before = self.waiting.get(node.name)
            if before is None or node.init is not None or "extern" in before.storage:
                self.waiting[node.name] = node


class Declarations:
    """Reads declarations in the scopes of one function."""

    def __init__(self, unit: Unit) -> None:
        self.unit = unit
        self.scopes: list[dict[str, Any]] = [unit.scope]

    # ------------------------------------------------------------ names

    def find(self, name: str) -> Any:
        """What a name means here: a Variable, a Constant or an Alias."""
        for scope in reversed(self.scopes):
            if name in scope:
                return scope[name]
        node = self.unit.waiting.get(name)
        if node is None:
            raise Unsupported(f"the name {name}")
        saved, self.scopes = self.scopes, self.scopes[:1]
        try:
            found = self._at_file_scope(name, node)
        finally:
            self.scopes = saved
        self.unit.scope[name] = found
        return found

    def _at_file_scope(self, name: str, node: Any) -> Any:
        if isinstance(node, c_ast.Typedef):
            return Alias(NAMED[name] if name in NAMED else self.type(node.type))
        kind = completed(self.type(node.type), node.init)
        self.unit.global_nodes[name] = node
        found = Variable(name, f"g_{identifier(name)}", kind, "object", "global", declared=name)
        self.unit.globals[name] = found
        return found

    # ------------------------------------------------------------ types

    def type(self, node: Any) -> Kind:
        """The type of a declaration, declarator or type name."""
        match node:
            case c_ast.TypeDecl() | c_ast.Typename() | c_ast.Decl():
                return self.type(node.type)
            case c_ast.IdentifierType():
                return self._named(node.names)
            case c_ast.PtrDecl():
                return Pointer(self.type(node.type))
            case c_ast.ArrayDecl():
                return Array(self.type(node.type), self.length(node.dim))
            case c_ast.Struct():
                return self._struct(node)
            case c_ast.Enum():
                self.enumerate(node)
                return INT
            case c_ast.FuncDecl():
                return Function(VOID)
        raise Unsupported(f"a type of the kind {type(node).__name__.lower()}")

    def _named(self, names: list[str]) -> Kind:
        if len(names) > 1:
            return basic_type(names)
        try:
            found = self.find(names[0])
        except Unsupported:
            return NAMED[names[0]] if names[0] in NAMED else basic_type(names)
        if not isinstance(found, Alias):
            raise Unsupported(f"the type {names[0]}")
        return found.kind

    def length(self, dim: Any) -> int | Length | None:
        """The length of an array; one that is no constant is computed where it is declared."""
        if dim is None or (isinstance(dim, c_ast.ID) and dim.name == "*"):
            return None
        try:
            return self.constant(dim)
        except Unsupported:
            return self.computed_length(dim)

    def computed_length(self, dim: Any) -> Length:
        """Supplied by what generates code."""
        raise Unsupported("an array of variable length here")

    def _struct(self, node: c_ast.Struct) -> Struct:
        definition = node if node.decls is not None else self.unit.tags.get(node.name)
        key = node.name or id(node)
        kind = self.unit.structs.setdefault(key, Struct(node.name or "anonymous"))
        if definition is not None and not kind.complete:
            kind.complete = True
            offset, alignment = 0, 1
            for member in definition.decls:
                if not isinstance(member, c_ast.Decl) or member.bitsize is not None:
                    raise Unsupported("a bit-field")
                inner = self.type(member.type)
                align = _alignment(inner)
                offset = -(-offset // align) * align
                kind.members[member.name] = (offset, inner)
                offset += constant_size(inner)
                alignment = max(alignment, align)
            kind.size = -(-offset // alignment) * alignment
        return kind

    def enumerate(self, node: c_ast.Enum) -> None:
        """Add the constants of an enumeration to the scope."""
        if id(node) in self.unit.enums or node.values is None:
            return
        self.unit.enums.add(id(node))
        value = -1
        for item in node.values.enumerators:
            if not isinstance(item, c_ast.Enumerator):
                continue
            value = self.constant(item.value) if item.value is not None else value + 1
            self.scopes[-1][item.name] = Constant(value)

    # ------------------------------------------------------------ constants

    def constant(self, node: Any) -> int:
        """The value of an integer constant expression; Unsupported if it is not one."""
        match node:
            case c_ast.Constant():
                kind, value = literal(node)
                if isinstance(value, int):
                    return value
            case c_ast.ID():
                found = self.find(node.name)
                if isinstance(found, Constant):
                    return found.value
            case c_ast.UnaryOp(op="-" | "+"):
                value = self.constant(node.expr)
                return -value if node.op == "-" else value
            case c_ast.BinaryOp(op="+" | "-" | "*" | "/" | "%" | "<<" | ">>" | "&" | "|" | "^"):
                return exact(node.op, self.constant(node.left), self.constant(node.right), LONG)
            case c_ast.UnaryOp(op="sizeof") if isinstance(node.expr, c_ast.Typename):
                return constant_size(self.type(node.expr))
            case c_ast.Cast():
                target = self.type(node.to_type)
                if isinstance(target, Number) and not target.floating:
                    return self.constant(node.expr)
        raise Unsupported("something that is not a constant")


def completed(kind: Kind, init: Any) -> Kind:
    """``int a[] = {1, 2, 3}`` has three elements."""
    if isinstance(kind, Array) and kind.length is None and isinstance(init, c_ast.InitList):
        return Array(kind.of, len(init.exprs))
    return kind


def initial_parts(kind: Kind, init: Any, offset: int = 0) -> Iterator[tuple[int, Kind, Any]]:
    """(offset, type, expression) for every cell that an initialiser sets; no expression stands for zero."""
    items = list(init.exprs) if isinstance(init, c_ast.InitList) else []
    if any(isinstance(item, c_ast.NamedInitializer) for item in items):
        raise Unsupported("an initialiser with names or subscripts")
    if isinstance(kind, Array):
        if not isinstance(kind.length, int):
            raise Unsupported("an initialiser of an array of variable length")
        if items and isinstance(kind.of, Array) and not isinstance(items[0], c_ast.InitList):
            raise Unsupported("an initialiser without inner braces")
        size = constant_size(kind.of)
        for k in range(kind.length):
            yield from initial_parts(kind.of, items[k] if k < len(items) else None, offset + k * size)
    elif isinstance(kind, Struct):
        for k, (shift, inner) in enumerate(kind.members.values()):
            yield from initial_parts(inner, items[k] if k < len(items) else None, offset + shift)
    else:
        yield offset, kind, items[0] if items else init


def _alignment(kind: Kind) -> int:
    return max((leaf.size for _, leaf in cells_of(kind).values()), default=1)


def _tags_in(node: Any) -> Iterator[Any]:
    """The structures and enumerations that a declaration mentions, outermost first."""
    node = getattr(node, "type", node)
    while node is not None:
        if isinstance(node, (c_ast.Struct, c_ast.Enum)):
            yield node
            for member in getattr(node, "decls", None) or ():
                yield from _tags_in(member)
            return
        node = getattr(node, "type", None)
        if isinstance(node, str):
            return


_SUFFIXES = {"f": FLOAT, "l": LDOUBLE}


def literal(node: c_ast.Constant) -> tuple[Number, int | float]:
    """Type and value of a literal."""
    text = node.value.lower()
    if node.type in ("float", "double", "long double"):
        kind = _SUFFIXES.get(text[-1], DOUBLE) if not text.startswith("0x") or "p" in text else DOUBLE
        digits = text.rstrip("fl") if kind is not DOUBLE else text
        return kind, float.fromhex(digits) if text.startswith("0x") else float(digits)
    if node.type == "char":
        value = ast.literal_eval(node.value)  # a plain C character literal reads as one of Python
        if not isinstance(value, str) or len(value) != 1:
            raise Unsupported(f"the character {node.value}")
        return INT, ord(value)
    if node.type == "string":
        raise Unsupported("a string")
    digits = text.rstrip("ul")
    octal = digits.startswith("0") and digits.isdigit()
    value = int(digits, 8) if octal else int(digits, 0)
    suffix, decimal = text[len(digits):], not digits.startswith("0")
    kinds = [INT, UINT, LONG, ULONG, LLONG, ULLONG]
    if "u" in suffix:
        kinds = [kind for kind in kinds if not kind.signed]
    elif decimal:
        kinds = [kind for kind in kinds if kind.signed]
    if "l" in suffix:
        kinds = [kind for kind in kinds if kind.size == 8]
    return next((kind for kind in kinds if value <= kind.high), ULLONG), value
