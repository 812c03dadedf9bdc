"""Which storages may share bytes, and the assumptions that they do not.

Two declared objects never overlap. What a pointer leads to may be any object whose address is known outside, unless
the pointer is ``restrict`` and the other is not derived from it (ISO/IEC 9899:2018, 6.7.3.1). Types say nothing here:
strict aliasing is not relied on, since many programs are built without it.
"""

from __future__ import annotations

import re
from typing import Any

from pycparser import c_ast

from ..model import Assumption, AssumptionCode, ScalarClass, Storage, StorageKind
from ..source.kinds import ArrayOf, PointerTo
from ..values import dataclass
from .calls import called_name
from .places import Member, Place, Root
from .polynomial import Poly
from .refusals import refusal
from .scopes import Binding
from .setting import Setting
from .storages import Stored


_ALLOCATORS = ("malloc", "calloc", "aligned_alloc")


def overlap_assumptions(setting: Setting, stored: Stored, nodes: dict[str, Any]) -> None:
    """Add the assumptions, and storages for what bounds and pointers are read from, to what is stored.

    ``nodes`` has the syntax node of a store to each written storage.
    """
    _Overlaps(setting, stored, nodes).add()


@dataclass(frozen=True)
class _Held:
    """Memory that must keep its value while the nest runs: a bound or a pointer."""

    text: str  # of the bound or pointer
    root: Root
    storage: Storage
    cell: str = ""  # the key of the cell, to recognise a direct store


class _Overlaps:
    def __init__(self, setting: Setting, stored: Stored, nodes: dict[str, Any]) -> None:
        self._setting, self._stored, self._nodes = setting, stored, nodes
        self._written = {access.storage for access in stored.accesses.values() if access.write}

    def add(self) -> None:
        stored = self._stored
        names = [storage for storage in stored.storages]
        for at, one in enumerate(names):
            for other in names[at + 1 :]:
                if {one.name, other.name} & self._written and self._may_overlap(one, other):
                    self._assume(
                        AssumptionCode.NO_OVERLAP, one.name, other.name, f"{one.name} and {other.name} do not overlap"
                    )
            if one.name in self._written and self._are_rows(one.name):
                table = stored.roots[one.name].key.removesuffix("[]")
                stored.assumptions.append(
                    Assumption(
                        AssumptionCode.OTHER,
                        f"the rows that {table} points to do not overlap each other or {table} itself",
                        None,
                        (one.name,),
                    )
                )
        self._hold(self._held())

    def _are_rows(self, name: str) -> bool:
        """True for what a table of pointers leads to: it has no first cell to compare addresses with."""
        return name in self._stored.roots and not self._stored.roots[name].text

    def _assume(self, code: AssumptionCode, one: str, other: str, text: str) -> None:
        if self._are_rows(one) or self._are_rows(other):
            code = AssumptionCode.OTHER
        self._stored.assumptions.append(Assumption(code, text, None, (one, other)))

    # ------------------------------------------------------------ bounds and pointers in memory

    def _held(self) -> list[_Held]:
        found = []
        for text, place in self._setting.held.items():
            found.append(_Held(text, place.root, self._storage_of(text, place), place.key))
        for binding in self._setting.held_variables:
            type_ = self._setting.type_of_binding(binding)
            pointer = isinstance(type_, PointerTo)
            name = f"&{binding.name}" if pointer else binding.name
            root = Root(binding.name, StorageKind.SCALAR, binding, f"&{binding.name}", True)
            storage = Storage(
                name,
                name,
                StorageKind.SCALAR,
                "void *" if pointer else type_,
                self._setting.types.size_of(type_),
                (),
                (),
                False,
                binding.kind,
                ScalarClass.PARAMETER,
                (),
                True,
                f"&{binding.name}",
            )
            found.append(_Held(binding.name, root, storage, name))
        return found

    def _storage_of(self, text: str, place: Place) -> Storage:
        """The structure, or the single cell, that a bound or pointer is read from."""
        root, types = place.root, self._setting.types
        scope = root.binding.kind if root.binding is not None else "argument"
        whole = len(place.indices) == 1 and place.indices[0].poly == Poly()  # not of t[k].n, nor of t->of[k].n
        if place.members and whole and root.kind is StorageKind.POINTER and root.text:
            size = types.size_of(place.step_type)
            kind = getattr(place.step_type, "kind", "struct")
            spelling = f"{kind} {getattr(place.step_type, 'tag', None) or ''}".strip()
            return Storage(
                f"*{root.key}",
                root.key,
                StorageKind.POINTER,
                spelling,
                size,
                (),
                (),
                root.restrict,
                scope,
                None,
                (),
                True,
                root.text,
            )
        last = place.steps[-1] if place.steps else None
        if isinstance(last, Member) and last.bits is not None:
            return self._around_bits(text, place, scope)
        pointer = isinstance(place.type, PointerTo)  # the text alone names what it leads to
        element = "void *" if pointer else place.type
        return Storage(
            f"&{text}" if pointer else text,
            root.key,
            StorageKind.POINTER,
            element,
            types.size_of(place.type),
            (),
            (),
            root.restrict,
            scope,
            None,
            (),
            True,
            text[1:] if re.fullmatch(r"\*\w+", text) else f"&{text}",
        )

    def _around_bits(self, text: str, place: Place, scope: str) -> Storage:
        """The structure that a bit-field lies in, which has no address of its own (6.5.3.2 p1)."""
        types, struct = self._setting.types, place.holder
        for name in place.members[:-1]:
            member = types.member(struct, name)
            struct = struct if member is None else member.type
            while isinstance(struct, ArrayOf):
                struct = struct.element
        inner = re.sub(r"(?:\.|->)\w+\Z", "", text)
        address = inner if text[len(inner):].startswith("->") else f"&{inner}"
        self._stored.held_in[address] = text
        return Storage(
            f"*{inner}" if address == inner else inner,
            place.root.key,
            StorageKind.POINTER,
            f"{struct.kind} {struct.tag or ''}".strip(),
            types.size_of(struct),
            (),
            (),
            place.root.restrict,
            scope,
            pointer_text=address,
        )

    def _hold(self, held: list[_Held]) -> None:
        """No store of the nest may change what must keep its value."""
        known = {storage.name for storage in self._stored.storages}
        for one in held:
            for name in [s.name for s in self._stored.storages if s.name in self._written]:
                root = self._stored.roots.get(name)
                if (
                    root is None
                    or name == one.storage.name
                    and one.storage.name in known
                    and root.direct
                    and root.kind is StorageKind.SCALAR
                ):
                    continue
                if not root.text and root.cell is not None and root.cell.key == one.cell:
                    continue  # a pointer of a table, which has an assumption with its rows
                if root.key == one.root.key and root.kind is one.root.kind:
                    self._direct(one, name)
                elif self._roots_meet(root, one.root):
                    self._need(one, name, known)

    def _need(self, one: _Held, name: str, known: set[str]) -> None:
        if one.storage.name not in known:
            known.add(one.storage.name)
            self._stored.storages.append(one.storage)
            self._stored.roots[one.storage.name] = one.root
        text = f"the stores to {name} do not change {one.text}"
        if not any(a.storages == (one.storage.name, name) for a in self._stored.assumptions):
            self._assume(AssumptionCode.UNCHANGED, one.storage.name, name, text)

    def _direct(self, one: _Held, name: str) -> None:
        """A store to the same object: harmless if it is another member, which other indices do not change."""
        if self._stored.keys.get(name) != one.cell:
            return
        node = self._nodes.get(name)
        self._stored.refusals.append(
            refusal(
                node,
                "bound-changed",
                f"the nest stores to {name}, from which it also reads `{one.text}` as a bound or pointer; "
                "copy that to a variable of its own before the nest.",
            )
        )

    # ------------------------------------------------------------ may two overlap?

    def _may_overlap(self, one: Storage, other: Storage) -> bool:
        if one.object == other.object:
            return False  # members of one structure
        first, second = self._stored.roots[one.name], self._stored.roots[other.name]
        if self._is_table(one.name, second) or self._is_table(other.name, first):
            return False  # they have an assumption of their own
        return self._roots_meet(first, second)

    def _is_table(self, name: str, root: Root) -> bool:
        """True if the root stands for the rows that the pointers of the storage lead to."""
        return not root.text and root.cell is not None and root.cell.key == self._stored.keys[name]

    def _roots_meet(self, one: Root, other: Root) -> bool:
        a, b = one.kind is StorageKind.POINTER, other.kind is StorageKind.POINTER
        if not a and not b:
            return False
        if a and b:
            return not (self._excludes(one, other) or self._excludes(other, one))
        pointer, declared = (one, other) if a else (other, one)
        if declared.binding is None or not self._setting.reachable(declared.binding) or self._is_fresh(pointer):
            return False
        if declared.binding.automatic and self._is_untouched_argument(pointer):
            return False
        return not self._excludes(pointer, declared)

    def _is_untouched_argument(self, root: Root) -> bool:
        """A pointer parameter as the caller gave it: it leads to no local of this call and derives from no other."""
        binding = root.binding
        return (
            root.direct
            and binding is not None
            and binding.kind == "argument"
            and not self._setting.names.assignments.get(binding)
            and not self._setting.names.address_taken(binding)
        )

    def _excludes(self, restricted: Root, other: Root) -> bool:
        """True if one is restrict, or leads to memory of its own, and the other is surely not derived from it."""
        fresh = self._is_fresh(restricted)
        if not (restricted.restrict or fresh) or restricted.binding is None:
            return False
        if self._is_untouched_argument(other) or other.kind is not StorageKind.POINTER:
            return True
        if fresh and self._is_fresh(other) and restricted.binding is not other.binding:
            return True
        return not self._leaks(restricted.binding)

    def _is_fresh(self, root: Root) -> bool:
        """A local pointer whose only value comes from an allocation, which nothing else leads to (7.22.3 p1)."""
        binding = root.binding
        if binding is None or not root.direct or root.kind is not StorageKind.POINTER or binding.kind != "local":
            return False
        nodes = self._setting.names.assignments.get(binding, [])
        if len(nodes) != 1 or self._setting.names.address_taken(binding):
            return False
        value = nodes[0].init if isinstance(nodes[0], c_ast.Decl) else getattr(nodes[0], "rvalue", None)
        while isinstance(value, c_ast.Cast):
            value = value.expr
        name = called_name(value) if isinstance(value, c_ast.FuncCall) else None
        return name in _ALLOCATORS and self._setting.unit.function_named(name) is None

    def _leaks(self, binding: Binding) -> bool:
        """True if the pointer is used for more than reaching elements, so that others may derive from it."""
        return any(not self._only_reached_through(use) for use in binding.uses)

    def _only_reached_through(self, node: Any) -> bool:
        names = self._setting.names
        parent = names.parent(node)
        if self._only_looked_at(node, parent):
            return True
        while isinstance(parent, c_ast.BinaryOp) and parent.op in "+-":
            node, parent = parent, names.parent(parent)
        if not self._designates(parent, node):
            return False
        while self._designates(parent, node):
            node, parent = parent, names.parent(parent)
        address = isinstance(parent, c_ast.UnaryOp) and parent.op == "&"
        return not address and not isinstance(self._setting.type_of(node), ArrayOf)

    def _only_looked_at(self, node: Any, parent: Any) -> bool:
        """True where a pointer gets its value, is tested, freed or returned."""
        match parent:
            case c_ast.Assignment():
                return parent.op == "=" and parent.lvalue is node
            case c_ast.If():
                return parent.cond is node
            case c_ast.UnaryOp(op="!") | c_ast.BinaryOp(op="==" | "!=" | "&&" | "||") | c_ast.Return():
                return True
            case c_ast.ExprList():
                call = self._setting.names.parent(parent)
                return isinstance(call, c_ast.FuncCall) and call.args is parent and called_name(call) == "free"
        return False

    @staticmethod
    def _designates(above: Any, node: Any) -> bool:
        """True for an element, member or target of what a node names."""
        match above:
            case c_ast.ArrayRef() | c_ast.StructRef():
                return above.name is node
            case c_ast.UnaryOp(op="*"):
                return True
        return False
