"""What the names and declarations of a translation unit mean on the user's compiler."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterator
from functools import cached_property
from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from ..model import CType
from ..values import replace
from .basic import Arithmetic
from .dialect import EXTRA_TYPES, LAYOUT_WORDS, TYPE_WORDS
from .expressions import Expressions, string_size
from .kinds import ArrayOf, Declared, FunctionType, Member, PointerTo, Scope, StructType, Type, UnknownType, Void
from .layout import Layout
from .parse import parse_expression

if TYPE_CHECKING:
    from .reading import Reading

_DEPTH = 100  # of typedef and declarator chains; deeper ones are unknown


class Types:
    """Types, scopes, sizes and constants of one translation unit.

    Every ``scope`` may be left out: then file scope holds.
    """

    def __init__(self, reading: Reading) -> None:
        self._reading = reading
        self.arithmetic = Arithmetic(reading.macros)
        self._expressions = Expressions(self)
        self._layout = Layout(self)
        self._scopes: dict[int, dict[int, Scope]] = {}  # id of a FuncDef -> id of a node in it -> scope
        self._structure_scopes: dict[int, Scope] = {}  # id of a structure -> scope of its definition
        # Id of a declaration in a function -> scope of its type, which its own name is no part of: ``T *T``.
        self._declaration_scopes: dict[int, Scope] = {}
        self._made: dict[int, Any] = {}  # keeps the FuncDefs of _scopes alive
        # Ids of a declaration and of the scope that it is read in -> the two, which keeps them alive, and the type.
        self._declared: dict[tuple[int, int], tuple[Any, Scope, Type]] = {}
        self._depth = 0

    # ---------------------------------------------------------------- scopes

    @cached_property
    def file_scope(self) -> Scope:
        """All names at file scope, wherever they are declared."""
        scope = Scope(None)
        scope.table = {}
        for node in self._reading.parsed.ast.ext:
            if isinstance(node, c_ast.FuncDef):
                entries = {**dict(self._tags(node.decl, scope, "file", None))}
                entries[node.decl.name] = Declared(node.decl.name, "function", "file", node)
            else:
                entries = dict(self._entries(node, scope, "file", None))
            for key, entry in entries.items():
                before = scope.table.get(key)
                if not _says_less(entry, before):
                    scope.table[key] = entry
        return scope

    def scope(self, function: c_ast.FuncDef, node: Any = None) -> Scope:
        """The names that hold at a node of a function's body; without a node, those at the start of the body."""
        if id(function) not in self._scopes:
            self._made[id(function)] = function
            self._scopes[id(function)] = self._function_scopes(function)
        table = self._scopes[id(function)]
        return table.get(id(function.body if node is None else node), table[id(function.body)])

    def structure_scope(self, node: Any) -> Scope:
        """The names that hold where a structure is defined."""
        return self._structure_scopes.get(id(node), self.file_scope)

    def declaration(self, name: str, scope: Scope | None = None) -> Declared | None:
        """What a name stands for; None if it is not declared."""
        return (scope or self.file_scope).lookup(name)

    def _function_scopes(self, function: c_ast.FuncDef) -> dict[int, Scope]:
        table: dict[int, Scope] = {}
        scope = self.file_scope
        for name, node in self.parameters_of(function):
            if node is not None:
                for key, entry in self._tags(node, scope, "parameter", function):
                    scope = scope.with_name(key, entry)
                self._declaration_scopes[id(node)] = scope
            scope = scope.with_name(name, Declared(name, "object", "parameter", node, function))
        self._walk(function.body, scope, function.body, table)
        return table

    def parameters_of(self, function: c_ast.FuncDef) -> tuple[tuple[str, Any], ...]:
        """Names and declarations of a function's parameters; an old-style one without a declaration has None (int)."""
        declarator = function.decl.type
        while not isinstance(declarator, c_ast.FuncDecl):
            declarator = declarator.type
        old_style = {decl.name: decl for decl in function.param_decls or ()}
        found = []
        for node in declarator.args.params if declarator.args else ():
            name = getattr(node, "name", None)
            if isinstance(node, c_ast.ID):
                found.append((node.name, old_style.get(node.name)))
            elif name:
                found.append((name, node))
        return tuple(found)

    def _walk(self, node: Any, scope: Scope, block: Any, table: dict[int, Scope]) -> None:
        """Note the scope of every node below."""
        stack = [(node, scope, block)]
        while stack:
            node, scope, block = stack.pop()
            table[id(node)] = scope
            if isinstance(node, (c_ast.Compound, c_ast.For)):
                inner = scope
                for item in _in_order(node):
                    if isinstance(item, (c_ast.Decl, c_ast.Typedef)):
                        for key, entry in self._entries(item, inner, "block", node):
                            self._declaration_scopes[id(item)] = inner  # at last, tags inside it known, not its name
                            inner = inner.with_name(key, entry)
                    if isinstance(item, _TRANSPARENT):
                        table[id(item)] = inner
                    else:
                        stack.append((item, inner, node))
            else:
                stack.extend((child, scope, block) for _, child in node.children())

    def _entries(self, node: Any, scope: Scope, where: str, block: Any) -> Iterator[tuple[str, Any]]:
        """The names that a declaration adds, tags and enumeration constants first."""
        yield from self._tags(node, scope, where, block)
        if getattr(node, "name", None) and isinstance(node, (c_ast.Decl, c_ast.Typedef)):
            kind = "typedef" if isinstance(node, c_ast.Typedef) else "object"
            if isinstance(node.type, c_ast.FuncDecl) and kind == "object":
                kind = "function"
            yield node.name, Declared(node.name, kind, where, node, block)

    def _tags(self, node: Any, scope: Scope, where: str, block: Any) -> Iterator[tuple[str, Any]]:
        """Structures, unions and enumerations that a declaration defines, also inside others."""
        stack = [getattr(node, "type", node)]
        while stack:
            part = stack.pop()
            if isinstance(part, (c_ast.Struct, c_ast.Union)):
                if part.decls is not None:
                    self._structure_scopes[id(part)] = scope
                    if part.name:
                        yield f"{_kind(part)} {part.name}", part
                    stack.extend(reversed(part.decls))
            elif isinstance(part, c_ast.Enum):
                if part.values is not None:
                    if part.name:
                        yield f"enum {part.name}", part
                    yield from self._enumerators(part, scope, where, block)
            elif isinstance(part, c_ast.FuncDecl):
                stack.append(part.type)
            elif getattr(part, "type", None) is not None and not isinstance(part.type, str):
                stack.append(part.type)

    def _enumerators(self, enum: c_ast.Enum, scope: Scope, where: str, block: Any) -> Iterator[tuple[str, Declared]]:
        value: int | None = -1
        for item in enum.values.enumerators:
            if not isinstance(item, c_ast.Enumerator):
                continue
            if item.value is not None:
                value = self.constant(item.value, scope)
            else:
                value = None if value is None else value + 1
            entry = Declared(item.name, "constant", where, item, block, value)
            scope = scope.with_name(item.name, entry)
            yield item.name, entry

    # ---------------------------------------------------------------- types

    def of(self, node: Any, scope: Scope | None = None) -> Type:
        """The type that a declaration, type name or declarator node gives.

        A parameter's array or function type is what it says; ``of_parameter`` gives what it is adjusted to.
        """
        self._depth += 1
        try:
            if self._depth > _DEPTH:
                return UnknownType("this type is nested too deep")
            return self._of(node, scope or self.file_scope)
        finally:
            self._depth -= 1

    def of_parameter(self, node: Any, scope: Scope | None = None) -> Type:
        """The type of a parameter: arrays and functions are pointers (6.7.6.3)."""
        if node is None:
            return self.arithmetic.int
        type = self.of(node, scope)
        if isinstance(type, ArrayOf):
            array = node.type if isinstance(node.type, c_ast.ArrayDecl) else None
            quals = frozenset(q for q in (array.dim_quals if array else ()) or () if isinstance(q, str)) - {"static"}
            return PointerTo(type.element, type.element_quals, quals)
        return PointerTo(type) if isinstance(type, FunctionType) else type

    def of_declared(self, declared: Declared, scope: Scope | None = None) -> Type:
        """The type of what a name stands for, parameters adjusted; ``scope`` for what is declared without a place."""
        scope = self._scope_of(declared, scope or self.file_scope)
        key = (id(declared.node), id(scope))
        if key in self._declared:
            return self._declared[key][2]
        type = self._of_declared(declared, scope)
        # Not where the limit on depth may have a say, nor before all names at file scope are known.
        settled = self._depth == 0 and "file_scope" in self.__dict__
        if settled and declared.node is not None and declared.kind != "constant":
            self._declared[key] = (declared.node, scope, type)
        return type

    def _scope_of(self, declared: Declared, scope: Scope) -> Scope:
        """The scope in which a declaration is read: its own, not that of a use of its name."""
        own = self.file_scope if declared.where == "file" and "file_scope" in self.__dict__ else scope
        return self._declaration_scopes.get(id(declared.node), own)

    def _of_declared(self, declared: Declared, scope: Scope) -> Type:
        if declared.kind == "constant":
            return self.arithmetic.int
        if declared.where == "parameter":
            return self.of_parameter(declared.node, scope)
        node = declared.node.decl if isinstance(declared.node, c_ast.FuncDef) else declared.node
        type = self.of(node, scope)
        if isinstance(type, ArrayOf) and type.extent is None and getattr(node, "init", None) is not None:
            return self._completed(type, node.init)
        return type

    @staticmethod
    def _completed(type: ArrayOf, init: Any) -> ArrayOf:
        """``int a[] = {1, 2, 3}`` has three elements, ``char a[] = "abc"`` four."""
        if isinstance(init, c_ast.Constant) and (size := string_size(init)) is not None:
            return replace(type, extent=c_ast.Constant("int", str(size), init.coord))
        if not isinstance(init, c_ast.InitList) or any(isinstance(e, c_ast.NamedInitializer) for e in init.exprs):
            return type
        return replace(type, extent=c_ast.Constant("int", str(len(init.exprs)), init.coord))

    def qualifiers(self, node: Any, scope: Scope | None = None) -> frozenset[str]:
        """``const``, ``volatile``, ``_Atomic``, ``restrict`` of what a node declares, typedefs looked through.

        Those of an array are those of its elements.
        """
        return self._qualified(node, scope or self.file_scope)[1]

    def _of(self, node: Any, scope: Scope) -> Type:
        return self._qualified(node, scope)[0]

    def _qualified(self, node: Any, scope: Scope) -> tuple[Type, frozenset[str]]:
        """The type of a node and its own qualifiers."""
        self._depth += 1
        try:
            if self._depth > _DEPTH:
                return UnknownType("this type is nested too deep"), frozenset()
            return self._read(node, scope)
        finally:
            self._depth -= 1

    def _read(self, node: Any, scope: Scope) -> tuple[Type, frozenset[str]]:
        none: frozenset[str] = frozenset()
        if isinstance(node, (c_ast.Decl, c_ast.Typedef, c_ast.Typename)):
            if self._dropped_near(node, TYPE_WORDS):
                return UnknownType("an attribute gives this declaration a type that retile does not read"), none
            return self._qualified(node.type, scope)
        if isinstance(node, c_ast.TypeDecl):
            type, quals = self._qualified(node.type, scope)
            return type, quals | frozenset(node.quals or ())
        if isinstance(node, c_ast.PtrDecl):
            target, quals = self._qualified(node.type, scope)
            return PointerTo(target, quals, frozenset(node.quals or ())), frozenset(node.quals or ())
        if isinstance(node, c_ast.ArrayDecl):
            element, quals = self._qualified(node.type, scope)
            extent = None if isinstance(node.dim, c_ast.ID) and node.dim.name == "*" else node.dim
            return ArrayOf(element, extent, quals), quals
        if isinstance(node, c_ast.FuncDecl):
            return self._function(node, scope), none
        if isinstance(node, (c_ast.Struct, c_ast.Union)):
            return self._struct(node, scope), none
        if isinstance(node, c_ast.Enum):
            return self._enum(node, scope), none
        if isinstance(node, c_ast.IdentifierType):
            return self._named(node.names, scope)
        return UnknownType("retile does not read this type"), none

    def _function(self, node: c_ast.FuncDecl, scope: Scope) -> FunctionType:
        result = self.of(node.type, scope)
        if node.args is None:
            return FunctionType(result, None)
        parameters = [p for p in node.args.params if not isinstance(p, (c_ast.EllipsisParam, c_ast.ID))]
        variadic = any(isinstance(p, c_ast.EllipsisParam) for p in node.args.params)
        types = tuple(self.of_parameter(p, scope) for p in parameters)
        return FunctionType(result, () if types == (Void(),) else types, variadic)

    def _struct(self, node: Any, scope: Scope) -> StructType:
        kind = _kind(node)
        if node.decls is not None:
            return StructType(kind, node.name, node)
        found = scope.find(f"{kind} {node.name}")
        return StructType(kind, node.name, found)

    def _enum(self, node: c_ast.Enum, scope: Scope) -> Type:
        """GCC and Clang take ``unsigned int``, ``int`` if a value is negative, or a wider type if one does not fit."""
        definition = node if node.values is not None else scope.find(f"enum {node.name}")
        if definition is None or self._dropped_near(definition, LAYOUT_WORDS | TYPE_WORDS):
            return UnknownType("this enumeration is incomplete or has attributes that change its type")
        values = [entry.value for _, entry in self._enumerators(definition, scope, "file", None)]
        if any(value is None for value in values):
            return UnknownType("an enumeration constant cannot be evaluated")
        int_ = self.arithmetic.int
        least, most = min(values, default=0), max(values, default=0)  # type: ignore[type-var]
        signed = least < 0  # type: ignore[operator]
        bits = next((b for b in (int_.bits, 64) if _fits(least, most, b, signed)), 128)  # type: ignore[arg-type]
        spelling = f"enum {node.name}" if node.name else ("int" if signed else "unsigned int")
        return CType(spelling, bits, signed)

    def _named(self, names: list[str], scope: Scope) -> tuple[Type, frozenset[str]]:
        none: frozenset[str] = frozenset()
        if names == ["void"]:
            return Void(), none
        if len(names) == 1:
            declared = scope.lookup(names[0])
            if declared is not None and declared.kind == "typedef":
                type, quals = self._qualified(declared.node, self._scope_of(declared, scope))
                return replace(type, spelling=names[0]) if isinstance(type, CType) else type, quals
            if names[0] in self._reading.text.typeof:
                return self._typeof(names[0], scope)
        arithmetic = self.arithmetic.named(names)
        if arithmetic is not None:
            return arithmetic, none
        if names[0] in EXTRA_TYPES:
            return UnknownType(f"{names[0]} is a type of the compiler's own"), none
        return UnknownType(f"the type {' '.join(names)} is not declared"), none

    def _typeof(self, name: str, scope: Scope) -> tuple[Type, frozenset[str]]:
        tokens = self._reading.text.typeof[name]
        typedefs = sorted(set(tokens) & self._reading.typedef_names)
        tree = parse_expression(tokens, typedefs) if tokens else None
        if isinstance(tree, c_ast.Typename):
            return self._qualified(tree, scope)
        if tree is None:
            return UnknownType("the operand of typeof cannot be read"), frozenset()
        return self.of_expression(tree, scope), frozenset()

    # ---------------------------------------------------------------- expressions, sizes

    def of_expression(self, node: Any, scope: Scope | None = None) -> Type:
        """The type of an expression, before arrays decay and small integers are promoted."""
        return self._expressions.type(node, scope or self.file_scope)

    def constant(self, node: Any, scope: Scope | None = None) -> int | None:
        """The value of an integer constant expression (6.6), ``sizeof`` included; None if it is none."""
        found = self._expressions.constant(node, scope or self.file_scope)
        return None if found is None else found[0]

    def members(self, type: StructType) -> tuple[Member, ...] | None:
        """The members of a structure or union, with offsets; None if it is incomplete."""
        return self._layout.members(type)

    def member(self, type: StructType, name: str) -> Member | None:
        """One member, also of an anonymous structure inside; None if there is none of that name."""
        return self._layout.member(type, name)

    def size_of(self, type: Type, scope: Scope | None = None) -> int | None:
        """Bytes of an object of a type; None if it is not known here."""
        return self._layout.size(type, scope or self.file_scope)

    def promoted(self, type: CType) -> CType:
        """The integer promotions (6.3.1.1)."""
        return self.arithmetic.promoted(type)

    def common(self, left: CType, right: CType) -> CType:
        """The usual arithmetic conversions (6.3.1.8)."""
        return self.arithmetic.common(left, right)

    def layout_is_plain(self, node: Any) -> bool:
        """False if an attribute or pragma near the definition of a structure may change its layout."""
        return not self._packs and not self._dropped_near(node, LAYOUT_WORDS | TYPE_WORDS)

    @cached_property
    def _packs(self) -> bool:
        return self._reading.unit.packs

    def _dropped_near(self, node: Any, words: frozenset[str]) -> bool:
        """True if one of these attributes fell away in the same declaration (or function) at file scope."""
        if not self._reading.text.dropped or node.coord is None:
            return False
        parts = self._reading.parsed.parts
        part = parts[max(0, bisect_right(parts, node.coord.number, key=lambda part: part.start) - 1)]
        dropped = self._reading.text.dropped
        return any(part.start <= place <= part.end and word in words for place, word in dropped)


_TRANSPARENT = (c_ast.DeclList, c_ast.Case, c_ast.Default)


def _in_order(block: Any) -> Iterator[Any]:
    """The parts of a block in text order; what the parser groups without making a scope comes before its own parts."""
    for _, child in block.children():
        yield child
        if isinstance(child, _TRANSPARENT):
            yield from _in_order(child)


def _kind(node: Any) -> str:
    return "struct" if isinstance(node, c_ast.Struct) else "union"


def _fits(least: int, most: int, bits: int, signed: bool) -> bool:
    low, high = (-(1 << bits - 1), (1 << bits - 1) - 1) if signed else (0, (1 << bits) - 1)
    return low <= least and most <= high


def _says_less(entry: Any, before: Any) -> bool:
    """True if a declaration tells less than one before: a prototype after the definition, ``a[]`` after ``a[9]``."""
    if not isinstance(entry, Declared) or not isinstance(before, Declared):
        return False
    if isinstance(before.node, c_ast.FuncDef):
        return not isinstance(entry.node, c_ast.FuncDef)
    now, earlier = getattr(entry.node, "type", None), getattr(before.node, "type", None)
    if isinstance(now, c_ast.ArrayDecl) and isinstance(earlier, c_ast.ArrayDecl):
        return now.dim is None and getattr(entry.node, "init", None) is None
    return False
