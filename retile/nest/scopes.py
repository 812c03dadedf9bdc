"""Which object each identifier of a function means, and what the function does with it.

Two objects of one name in different blocks are two bindings; everything else in this room speaks of bindings, never of
bare names.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator
from functools import cached_property
from typing import Any

from pycparser import c_ast

from ..source.kinds import ArrayOf, Declared, StructType


class Binding:
    """One declared name: an object, a function or an enumerator.  Compared by identity."""

    def __init__(self, name: str, kind: str, declared: Declared, file_static: bool = False) -> None:
        self.name = name
        self.kind = kind  # ``argument``, ``local``, ``static``, ``global``, ``function``, ``enumerator``
        self.declared = declared
        self.file_static = file_static  # a ``static`` at file scope: no other file can name it
        self.uses: list[Any] = []  # ID nodes of the function, in text order

    @property
    def is_object(self) -> bool:
        """True for variables and parameters."""
        return self.kind in ("argument", "local", "static", "global")

    @property
    def automatic(self) -> bool:
        """True if it lives and dies with one call."""
        return self.kind in ("argument", "local")

    @property
    def decl(self) -> Any:
        """The tree node of its declaration."""
        return self.declared.node


def children(node: Any) -> Iterator[Any]:
    """The nodes right below a node, in text order; also the expressions inside types, but no member names."""
    for _, child in node.children():
        if isinstance(node, c_ast.StructRef) and child is node.field:
            continue
        if isinstance(node, c_ast.NamedInitializer) and child is not node.expr and isinstance(child, c_ast.ID):
            continue
        yield child


def descendants(node: Any) -> Iterator[Any]:
    """The node and all below it, in text order."""
    stack = [node]
    while stack:
        node = stack.pop()
        yield node
        stack.extend(reversed(list(children(node))))


def assigned_target(node: Any) -> Any:
    """The left side of an assignment, or the operand of ++ or --; None for any other node."""
    if isinstance(node, c_ast.Assignment):
        return node.lvalue
    if isinstance(node, c_ast.UnaryOp) and node.op in ("++", "--", "p++", "p--"):
        return node.expr
    return None


def sole_assignment(node: Any) -> Any:
    """The assignment ``x = e;`` that a statement is, or a block of just one; None for any other."""
    while isinstance(node, c_ast.Compound) and len(node.block_items or ()) == 1:
        node = node.block_items[0]
    plain = isinstance(node, c_ast.Assignment) and node.op == "=" and isinstance(node.lvalue, c_ast.ID)
    return node if plain else None


class FunctionNames:
    """Bindings, parents and uses of everything in one function definition."""

    def __init__(self, types: Any, function: Any) -> None:
        self.function = function
        self._types = types
        self._binding_of: dict[int, Binding] = {}  # by id() of an ID node
        self._bindings: dict[tuple[str, int], Binding] = {}  # by name and id() of the declaration
        self._parent: dict[int, Any] = {}
        self.nodes: list[Any] = []  # of the body, in text order
        for name, node in types.parameters_of(function):
            self._bind(types.declaration(name, types.scope(function)))
        declarator = function.decl.type
        while not isinstance(declarator, c_ast.FuncDecl):
            declarator = declarator.type
        extents = [] if declarator.args is None else [declarator.args]
        for root in (*extents, function.body):
            self._enter(root)

    def _enter(self, root: Any) -> None:
        for node in descendants(root):
            if root is self.function.body:
                self.nodes.append(node)
            if isinstance(node, c_ast.ID):
                self._use(node)
            elif isinstance(node, c_ast.Decl) and node.name and root is self.function.body:
                self._bind_decl(node)
            for child in children(node):
                self._parent.setdefault(id(child), node)

    def _use(self, node: Any) -> None:
        declared = self._types.declaration(node.name, self._types.scope(self.function, node))
        if declared is not None and declared.kind != "typedef":
            binding = self._bind(declared)
            self._binding_of[id(node)] = binding
            binding.uses.append(node)

    def _bind_decl(self, decl: Any) -> None:
        scope = self._types.scope(self.function, decl)
        declared = scope.lookup(decl.name)
        if declared is not None and declared.node is decl:
            self._binding_of[id(decl)] = self._bind(declared)

    def _bind(self, declared: Declared) -> Binding:
        if declared.where == "block" and "extern" in declared.storage:
            declared = self._types.declaration(declared.name) or declared
        key = (declared.name, id(declared.node))
        if key not in self._bindings:
            self._bindings[key] = _binding(declared)
        return self._bindings[key]

    # ------------------------------------------------------------ looking things up

    def of(self, node: Any) -> Binding | None:
        """The binding of an ID node or a Decl; None for an undeclared name."""
        return self._binding_of.get(id(node))

    def means(self, name: str, node: Any) -> Binding | None:
        """What a name stands for at a node; None if nothing that the function declares or uses."""
        declared = self._types.declaration(name, self._types.scope(self.function, node))
        return None if declared is None else self._bindings.get((name, id(declared.node)))

    @property
    def bindings(self) -> tuple[Binding, ...]:
        """All bindings that the function declares or uses."""
        return tuple(self._bindings.values())

    def parent(self, node: Any) -> Any:
        """The node above; None for the body."""
        return self._parent.get(id(node))

    def ancestors(self, node: Any) -> Iterator[Any]:
        """The nodes above a node, innermost first, up to the function's body."""
        while (node := self._parent.get(id(node))) is not None:
            yield node

    def type_of_binding(self, binding: Binding) -> Any:
        """The C type of an object; arrays that are parameters are pointers."""
        where = binding.decl if binding.decl is not None else self.function.body
        return self._types.of_declared(binding.declared, self._types.scope(self.function, where))

    def type_of(self, node: Any) -> Any:
        """The C type of an expression of the body."""
        return self._types.of_expression(node, self._types.scope(self.function, node))

    @cached_property
    def has_jumps(self) -> bool:
        """True if the function has a label, so that its text does not run in order."""
        return any(isinstance(node, (c_ast.Goto, c_ast.Label)) for node in self.nodes)

    @cached_property
    def may_skip_declarations(self) -> bool:
        """True if control may jump over a declaration, so that its variable has no value."""
        return self.has_jumps or any(isinstance(node, c_ast.Switch) for node in self.nodes)

    @cached_property
    def assignments(self) -> dict[Binding, list[Any]]:
        """Per binding: the nodes that give it a value: Decl with initialiser, Assignment, ++ and --."""
        found: dict[Binding, list[Any]] = defaultdict(list)
        for node in self.nodes:
            if isinstance(node, c_ast.Decl) and node.init is not None and (bound := self.of(node)) is not None:
                found[bound].append(node)
            target = assigned_target(node)
            if isinstance(target, c_ast.ID) and (bound := self.of(target)) is not None:
                found[bound].append(node)
        return found

    @cached_property
    def _escaping(self) -> set[Binding]:
        found = set()
        for binding in self.bindings:
            if binding.is_object and any(self._address_used(use) for use in binding.uses):
                found.add(binding)
        return found

    def address_taken(self, binding: Binding) -> bool:
        """True if this function makes a pointer to the object, or lets an array of it decay to one."""
        return binding in self._escaping

    def _address_used(self, node: Any) -> bool:
        """Climb from a name to the whole designator: is its address taken, or does it stay an array?"""
        parent = self.parent(node)
        while (isinstance(parent, c_ast.ArrayRef) and parent.name is node and self._is(node, ArrayOf)) or (
            isinstance(parent, c_ast.StructRef) and parent.type == "."
        ):
            node, parent = parent, self.parent(parent)
        if isinstance(parent, c_ast.UnaryOp) and parent.op == "&":
            return True
        if isinstance(parent, c_ast.UnaryOp) and parent.op in ("sizeof", "_Alignof"):
            return False
        return self._is(node, ArrayOf)

    def _is(self, node: Any, kind: type) -> bool:
        type_ = self.type_of(node)
        return (
            isinstance(type_, kind)
            or not isinstance(type_, (ArrayOf, StructType))
            and type(type_).__name__ == "UnknownType"
        )


def _binding(declared: Declared) -> Binding:
    kinds = {"function": "function", "constant": "enumerator"}
    static = "static" in declared.storage
    if declared.kind in kinds:
        kind = kinds[declared.kind]
    elif declared.where == "parameter":
        kind = "argument"
    elif declared.where == "file":
        kind = "global"
    else:
        kind = "static" if static else "global" if "extern" in declared.storage else "local"
    return Binding(declared.name, kind, declared, declared.where == "file" and static)
