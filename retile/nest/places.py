"""From C designators to cells: which object, which member, which subscripts.

A pointer that is only computed from another one (``double *row = a + i*n``) is followed to it. A pointer read from
memory is told by its text if it is one and the same throughout the nest (``g->depth``), else its targets are the rows
of a table (``rows[]``), with the subscripts of the table first.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..model import CType, StorageKind
from ..source.kinds import ArrayOf, PointerTo, StructType, UnknownType, Void
from ..values import dataclass, replace
from .context import Context
from .polynomial import Poly
from .refusals import Refused, refused
from .scopes import Binding, assigned_target, descendants
from .setting import Setting, c_text


@dataclass(frozen=True)
class Root:
    """An object, or what a pointer leads to."""

    key: str  # ``a``, ``g->depth``, ``rows[]``
    kind: StorageKind
    binding: Binding | None  # the variable at the bottom: the object itself, or where the pointer comes from
    text: str  # C text of the address of its first cell; empty for rows, which have no common first cell
    direct: bool  # the object itself, or the target of the variable itself, not of a pointer in memory
    restrict: bool = False
    cell: Place | None = None  # where a pointer in memory was read from


@dataclass(frozen=True)
class Index:
    """One subscript."""

    poly: Poly | None  # None: any value
    extent: Any = None  # expression of the declared length; None where there is none
    loose: bool = False  # reached by pointer arithmetic: may run past its row

    @property
    def key(self) -> str:
        """Its part of a storage's name."""
        return ""


@dataclass(frozen=True)
class Member:
    """One member of a structure."""

    name: str
    bits: int | None = None

    @property
    def key(self) -> str:
        """Its part of a storage's name."""
        return "." + self.name


@dataclass(frozen=True)
class Place:
    """A cell, or an array or structure of cells."""

    root: Root
    steps: tuple[Index | Member, ...]
    type: Any
    quals: frozenset[str] = frozenset()
    step_type: Any = None  # what the last subscript counts
    union: Any = None  # the union that the cell is part of: all of its members are this one cell
    holder: Any = None  # the structure of the first member

    @property
    def key(self) -> str:
        """The same for all cells that differ only in subscripts."""
        return self.root.key + "".join(step.key for step in self.steps)

    @property
    def indices(self) -> tuple[Index, ...]:
        """The subscripts, outermost first."""
        return tuple(step for step in self.steps if isinstance(step, Index))

    @property
    def members(self) -> tuple[str, ...]:
        """The members on the way."""
        return tuple(step.name for step in self.steps if isinstance(step, Member))

    def same_cell(self, other: Place) -> bool:
        """True if both are surely one cell."""
        return _identity(self) == _identity(other) and all(index.poly is not None for index in self.indices)

    def is_fixed(self, loop_ids: set[str]) -> bool:
        """True if it is one and the same cell throughout the nest."""
        return all(one.poly is not None and not one.poly.names() & loop_ids for one in self.indices)


class Places:
    """Reads designators and pointer expressions in one setting."""

    def __init__(self, setting: Setting) -> None:
        self._setting = setting
        self._keys: dict[str, Binding] = {}
        self._texts: dict[tuple[str, tuple[Poly | None, ...]], str] = {}  # of cells that stay, by key and subscripts

    # ------------------------------------------------------------ designators

    def attempt(self, node: Any, context: Context) -> Place | None:
        """As ``place``, but None instead of a refusal."""
        try:
            return self.place(node, context)
        except Refused:
            return None

    def place(self, node: Any, context: Context) -> Place:
        """The cell that a designator names; Refused if that cannot be told."""
        match node:
            case c_ast.ID():
                return self._variable(node)
            case c_ast.ArrayRef():
                return self._element(node, context)
            case c_ast.UnaryOp(op="*"):
                return self.pointer(node.expr, context)
            case c_ast.StructRef():
                return self._member(node, context)
            case c_ast.Cast():
                return self.place(node.expr, context)
        raise refused(
            node,
            "unsupported",
            f"retile cannot tell which memory `{c_text(node)}` is; name the array or structure directly.",
        )

    def _variable(self, node: Any) -> Place:
        binding = self._setting.names.of(node)
        if binding is None or not binding.is_object:
            raise refused(node, "unsupported", f"`{node.name}` is no variable that retile can see.")
        type_ = self._setting.type_of_binding(binding)
        self._check(node, type_, frozenset())
        kind = StorageKind.ARRAY if isinstance(type_, (ArrayOf, StructType)) else StorageKind.SCALAR
        key = self.key_of(binding)
        quals = self._setting.qualifiers(binding)
        self._check(node, type_, quals)
        text = binding.name if isinstance(type_, ArrayOf) else f"&{binding.name}"
        return Place(Root(key, kind, binding, text, True), (), type_, quals)

    def variable(self, binding: Binding) -> Place:
        """The cell of a scalar or pointer variable itself."""
        type_ = self._setting.type_of_binding(binding)
        return Place(Root(self.key_of(binding), StorageKind.SCALAR, binding, f"&{binding.name}", True), (), type_)

    def declared(self, decl: Any) -> Place:
        """The object of a declaration."""
        binding = self._setting.names.of(decl)
        assert binding is not None
        type_ = self._setting.type_of_binding(binding)
        self._check(decl, type_, self._setting.qualifiers(binding))
        kind = StorageKind.ARRAY if isinstance(type_, (ArrayOf, StructType)) else StorageKind.SCALAR
        text = binding.name if isinstance(type_, ArrayOf) else f"&{binding.name}"
        return Place(Root(self.key_of(binding), kind, binding, text, True), (), type_)

    def cells(self, place: Place, node: Any) -> list[Place]:
        """All cells of a small array with constant extents."""
        found = [place]
        while found and isinstance(found[0].type, ArrayOf):
            extent = self._setting.constant(found[0].type.extent) if found[0].type.extent is not None else None
            if extent is None or extent * len(found) > 256:
                raise refused(
                    node,
                    "unsupported",
                    "an array is initialised inside the nest whose length is not a small "
                    "constant; assign its elements in a loop.",
                )
            found = [
                self._into(one, Index(Poly.of(at), one.type.extent), node) for one in found for at in range(extent)
            ]
        return found

    def key_of(self, binding: Binding) -> str:
        """A name for an object, with its line where another object of the nest has the same name."""
        for key in (binding.name, f"{binding.name}@{_line(binding.decl)}", f"{binding.name}@{id(binding.decl)}"):
            if self._keys.setdefault(key, binding) is binding:
                return key
        return binding.name

    def _element(self, node: Any, context: Context) -> Place:
        base, subscript = node.name, node.subscript
        if isinstance(self._setting.type_of(base), CType):  # 3[a] is a[3]
            base, subscript = subscript, base
        index = self._setting.expressions.subscript(subscript, context)
        if isinstance(self._setting.type_of(base), ArrayOf):
            array = self.place(base, context)
            return self._into(array, Index(index, array.type.extent), node)
        return self._moved(self.pointer(base, context), index, node)

    def _into(self, array: Place, index: Index, node: Any) -> Place:
        self._check(node, array.type.element, array.type.element_quals)
        return replace(
            array,
            steps=(*array.steps, index),
            type=array.type.element,
            quals=array.type.element_quals,
            step_type=array.type.element,
        )

    def _member(self, node: Any, context: Context) -> Place:
        whole = self.pointer(node.name, context) if node.type == "->" else self.place(node.name, context)
        if not isinstance(whole.type, StructType):
            raise refused(node, "unsupported", f"retile cannot read the type of `{c_text(node.name)}`.")
        member = self._setting.types.member(whole.type, node.field.name)
        if member is None:
            raise refused(node, "unsupported", f"the structure with the member `{node.field.name}` is not known here.")
        self._check(node, member.type, member.quals)
        steps, union = self._steps(whole, node.field.name, member)
        if union is not None and not isinstance(member.type, CType):
            raise refused(
                node,
                "union",
                f"`{c_text(node)}` is an array, structure or pointer in a union, whose members share memory; "
                "use a plain variable in the nest.",
            )
        holder = whole.holder or (whole.type if len(steps) > len(whole.steps) else None)
        return Place(whole.root, steps, member.type, member.quals | whole.quals, whole.step_type, union, holder)

    def _steps(self, whole: Place, name: str, member: Any) -> tuple[tuple[Index | Member, ...], Any]:
        """The steps to a member, and the union that it is part of; all members of a union take the steps of one."""
        if whole.type.kind == "union":
            return whole.steps, whole.type
        for one in self._setting.types.members(whole.type) or ():
            inner = one.type
            if one.name is None and isinstance(inner, StructType) and self._setting.types.member(inner, name) is not None:
                if inner.kind == "union":
                    first = next((part.name for part in self._setting.types.members(inner) or () if part.name), name)
                    return (*whole.steps, Member(first)), inner
                return self._steps(replace(whole, type=inner), name, member)
        return (*whole.steps, Member(name, member.bits)), None

    def parts(self, place: Place, node: Any) -> list[Place]:
        """All cells of a structure; Refused where they cannot be told one by one."""
        if isinstance(place.type, ArrayOf):
            return [part for cell in self.cells(place, node) for part in self.parts(cell, node)]
        if not isinstance(place.type, StructType):
            if isinstance(place.type, CType):
                return [place]
            raise refused(
                node,
                "struct-assignment",
                f"the whole structure `{c_text(node)}` is copied with a pointer in it; copy its members one by one.",
            )
        if place.type.kind == "union":
            return [replace(place, union=place.type)]
        found: list[Place] = []
        for one in self._setting.types.members(place.type) or ():
            if one.name is None and isinstance(one.type, StructType):
                first = next((part.name for part in self._setting.types.members(one.type) or () if part.name), None)
                inner = one.type.kind == "union" and first is not None
                steps = (*place.steps, Member(first)) if inner and first is not None else place.steps
                found += self.parts(replace(place, type=one.type, steps=steps), node)
            elif one.bits is not None:
                what = f"the whole structure `{c_text(node)}` is copied with a bit-field in it; copy its members one by one."
                raise refused(node, "struct-assignment", what)
            elif one.name is not None:
                steps = (*place.steps, Member(one.name))
                found += self.parts(replace(place, type=one.type, quals=one.quals | place.quals, steps=steps), node)
        if not found or len(found) > 64:
            what = f"the whole structure `{c_text(node)}` is copied, and has no parts or more than 64; copy what is needed."
            raise refused(node, "struct-assignment", what)
        return found

    def _check(self, node: Any, type_: Any, quals: frozenset[str]) -> None:
        if isinstance(type_, UnknownType):
            raise refused(node, "unsupported", f"retile cannot read the type of `{c_text(node)}`: {type_.reason}.")
        pointer = type_.quals if isinstance(type_, PointerTo) else frozenset()
        for word, code in (("volatile", "volatile"), ("_Atomic", "atomic")):
            if word in quals | pointer:
                raise refused(
                    node,
                    code,
                    f"`{c_text(node)}` is {word}: every access to it must stay where it is; "
                    "copy it to a plain variable before the nest.",
                )

    def text_of(self, place: Place, node: Any) -> str:
        """C text of a cell that stays, to be read ahead of the nest: one per cell, the user's own if possible."""
        if not self._setting.means_the_same_ahead(node):
            return self._texts.setdefault(_identity(place), self._written_out(place))
        return self._texts.setdefault(_identity(place), c_text(node))

    def _written_out(self, place: Place) -> str:
        """``g->n``, ``t[k].of[2]``: a designator from the root's address."""
        text = place.root.text.removeprefix("&") if place.root.kind is not StorageKind.POINTER else place.root.text
        pointer = place.root.kind is StorageKind.POINTER
        for at, step in enumerate(place.steps):
            following = place.steps[at + 1] if at + 1 < len(place.steps) else None
            if isinstance(step, Member):
                text, pointer = f"{text}{'->' if pointer else '.'}{step.name}", False
            elif not (pointer and step.poly == Poly() and isinstance(following, Member)):
                assert step.poly is not None
                text, pointer = f"{text}[{self._setting.poly_text(step.poly)}]", False
        return text

    # ------------------------------------------------------------ pointers

    def pointer(self, node: Any, context: Context) -> Place:
        """The cell that a pointer expression points to; Refused if that cannot be told."""
        type_ = self._setting.type_of(node)
        if isinstance(type_, ArrayOf):
            array = self.place(node, context)
            return self._into(array, Index(Poly(), array.type.extent), node)
        match node:
            case c_ast.ID():
                return self._pointer_variable(node, context)
            case c_ast.BinaryOp(op="+") | c_ast.BinaryOp(op="-"):
                return self._sum(node, context)
            case c_ast.UnaryOp(op="&"):
                return self.place(node.expr, context)
            case c_ast.Cast():
                return self._cast(node, context)
            case c_ast.ArrayRef() | c_ast.StructRef() | c_ast.UnaryOp(op="*"):
                return self._loaded(node, context)
            case c_ast.UnaryOp() | c_ast.Assignment() if assigned_target(node) is not None:
                raise refused(
                    node,
                    "pointer-assigned",
                    f"`{c_text(node)}` moves a pointer inside the nest; use subscripts from a pointer that stays.",
                )
        raise self._unknown(node)

    def _unknown(self, node: Any) -> Refused:
        return refused(
            node, "pointer", f"retile cannot tell where `{c_text(node)}` points; name the array that is meant."
        )

    def _sum(self, node: Any, context: Context) -> Place:
        base, offset = node.left, node.right
        if isinstance(self._setting.type_of(base), CType) and node.op == "+":
            base, offset = offset, base
        index = self._setting.expressions.subscript(offset, context)
        return self._moved(self.pointer(base, context), -index if index is not None and node.op == "-" else index, node)

    def _moved(self, place: Place, by: Poly | None, node: Any) -> Place:
        """The cell ``by`` elements further on."""
        if by is not None and by.constant == 0:
            return place
        last = place.steps[-1] if place.steps else None
        if not isinstance(last, Index) or (place.union is not None and place.type is not place.union):
            raise refused(node, "pointer", f"`{c_text(node)}` moves a pointer to a single object; name an array.")
        poly = None if by is None or last.poly is None else last.poly + by
        moved = Index(poly, last.extent, last.loose or len(place.indices) > 1)
        return replace(place, steps=(*place.steps[:-1], moved))

    def _cast(self, node: Any, context: Context) -> Place:
        to, inner = self._setting.written_type(node.to_type), self._setting.type_of(node.expr)
        place = self.pointer(node.expr, context) if isinstance(inner, (PointerTo, ArrayOf)) else None
        if place is None or not isinstance(to, PointerTo) or _bare(to.target) != _bare(place.type):
            raise self._unknown(node)
        return place

    def _pointer_variable(self, node: Any, context: Context) -> Place:
        setting, binding = self._setting, self._setting.names.of(node)
        if binding is None or not binding.is_object:
            raise self._unknown(node)
        type_ = setting.type_of_binding(binding)
        if not isinstance(type_, PointerTo):
            raise self._unknown(node)
        self._check(node, type_, frozenset())
        definition = setting.definition(binding, context)
        if definition is not None:
            with setting.at(definition):
                return self.pointer(definition.expression, definition.context)
        if not setting.is_frozen(binding):
            raise refused(
                node,
                "pointer-assigned",
                f"the pointer `{binding.name}` gets another value inside the nest; "
                "use subscripts from a pointer that stays.",
            )
        origin = self._origin(binding)
        if origin is not None:
            return origin
        if setting.reachable(binding):
            setting.held_variables[binding] = None
        root = Root(self.key_of(binding), StorageKind.POINTER, binding, binding.name, True, type_.restrict)
        return self._target(root, (Index(Poly()),), type_, node)

    def _origin(self, binding: Binding) -> Place | None:
        """Where a local pointer comes from that got its only value before the nest, from pointers that stay too."""
        nodes = self._setting.names.assignments.get(binding, [])
        if binding.kind != "local" or len(nodes) != 1 or not isinstance(nodes[0], c_ast.Decl):
            return None
        if (
            self._setting.names.has_jumps
            or self._setting.names.address_taken(binding)
            or not self._constant_since(nodes[0].init, nodes[0])
        ):
            return None
        try:
            return self.pointer(nodes[0].init, Context())
        except Refused:
            return None

    def _constant_since(self, node: Any, decl: Any) -> bool:
        """True for sums of variables that keep their values from a declaration before the nest to its end."""
        match node:
            case c_ast.Constant():
                return True
            case c_ast.ID():
                return self._variable_since(node, decl)
            case c_ast.BinaryOp() if node.op in "+-*":
                return self._constant_since(node.left, decl) and self._constant_since(node.right, decl)
            case c_ast.ArrayRef() if isinstance(self._setting.type_of(node), ArrayOf):
                return self._constant_since(node.name, decl) and self._constant_since(node.subscript, decl)
            case c_ast.UnaryOp(op="&") if isinstance(node.expr, c_ast.ArrayRef):
                return self._constant_since(node.expr.name, decl) and self._constant_since(node.expr.subscript, decl)
            case c_ast.Cast():
                return self._constant_since(node.expr, decl)
        return False

    def _variable_since(self, node: Any, decl: Any) -> bool:
        """One value in the whole call, or the iterator of a loop around declaration and nest."""
        names, binding = self._setting.names, self._setting.names.of(node)
        if binding is None or not binding.is_object:
            return binding is not None and binding.kind == "enumerator"
        if isinstance(self._setting.type_of(node), ArrayOf):
            return True
        if self._setting.reachable(binding):
            return False
        nodes = names.assignments.get(binding, [])
        if binding.kind == "argument" and not nodes:
            return True
        loop = self._setting.outer_iterators.get(binding)
        if loop is not None:
            body = {id(one) for one in descendants(loop.stmt)}
            return id(decl) in body and not any(id(one) in body for one in nodes)
        return binding.kind == "local" and len(nodes) == 1 and isinstance(nodes[0], c_ast.Decl)

    def _target(self, root: Root, steps: tuple[Index | Member, ...], pointer: PointerTo, node: Any) -> Place:
        if isinstance(pointer.target, Void):
            raise self._unknown(node)
        self._check(node, pointer.target, pointer.target_quals)
        return Place(root, steps, pointer.target, pointer.target_quals, pointer.target)

    def _loaded(self, node: Any, context: Context) -> Place:
        """What a pointer in memory leads to."""
        cell = self.place(node, context)
        if not isinstance(cell.type, PointerTo):
            raise self._unknown(node)
        if cell.is_fixed(self._setting.loop_ids) and all(one.poly == Poly() for one in cell.indices):
            text = self.text_of(cell, node)
            if not self._setting.strict:
                self._setting.held[text] = cell
            root = Root(text, StorageKind.POINTER, cell.root.binding, text, False, cell=cell)
            return self._target(root, (Index(Poly()),), cell.type, node)
        return self._target(rows_of(cell), (*cell.indices, Index(Poly())), cell.type, node)


def rows_of(table: Place) -> Root:
    """What the pointers of a table lead to, as one object whose first subscripts are those of the table."""
    return Root(table.key + "[]", StorageKind.POINTER, table.root.binding, "", False, cell=table)


def as_rows(place: Place) -> Place:
    """The same cell as one of a table's rows, if pointers in memory lead to it."""
    if place.root.cell is None:
        return place
    table = as_rows(place.root.cell)
    behind = place.steps if place.root.text else place.steps[len(place.root.cell.indices) :]
    return replace(place, root=rows_of(table), steps=(*table.indices, *behind))


def _identity(place: Place) -> tuple[str, tuple[Poly | None, ...]]:
    return place.key, tuple(index.poly for index in place.indices)


def _bare(type_: Any) -> Any:
    """A type for comparison: arithmetic ones by width and kind, others as they are."""
    return (type_.bits, type_.signed, type_.floating) if isinstance(type_, CType) else type_


def _line(node: Any) -> int:
    return getattr(getattr(node, "coord", None), "line", 0)
