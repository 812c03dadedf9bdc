"""From touches to storages and accesses: shapes, strides, roles of variables."""

from __future__ import annotations

from collections import defaultdict
from typing import Any

from ..affine import Affine, AllOf, at_most, less
from ..model import Access, Assumption, AssumptionCode, CType, Refusal, ScalarClass, Span, Storage, StorageKind, Syntax
from ..source.kinds import ArrayOf, PointerTo, StructType
from ..values import replace
from .effects import Touch
from .knowledge import Obligation
from .liveness import live_after
from .places import Index, Member, Place, Root, as_rows
from .polynomial import Poly
from .refusals import refusal
from .scalars import Numbered, Web, webs
from .setting import Setting, c_text
from .shapes import Grid, Subscript, grid_of, needs_grid, stride_texts
from .walk import RawStatement, Walk


class Stored:
    """The storages of a nest, and which access each touch became."""

    def __init__(self) -> None:
        self.storages: list[Storage] = []
        self.roots: dict[str, Root] = {}  # by storage name
        self.keys: dict[str, str] = {}  # by storage name: the same for all cells that it stands for
        self.accesses: dict[tuple[int, int], Access] = {}  # by statement and touch number
        self.refusals: list[Refusal] = []
        self.obligations: list[Obligation] = []
        self.assumptions: list[Assumption] = []
        self.held_in: dict[str, str] = {}  # by C text of an address, that of a bit-field held there


def store(setting: Setting, walk: Walk, nest: Any) -> Stored:
    """Give every touch of the nest its storage and subscripts."""
    return _Builder(setting, walk, nest).stored


class _Builder:
    def __init__(self, setting: Setting, walk: Walk, nest: Any) -> None:
        self._setting, self._walk, self._nest = setting, walk, nest
        self.stored = Stored()
        groups: dict[str, list[Numbered]] = defaultdict(list)
        for order, touch in _one_name_each(walk):
            groups[touch.place.key].append((order, touch))
        for key, touches in groups.items():
            if touches[0][1].place.root.kind is StorageKind.SCALAR:
                self._variable(key, touches)
            else:
                self._array(key, touches)

    def _span(self, order: tuple[int, int]) -> Any:
        return self._walk.statements[order[0]].span

    def _statement(self, order: tuple[int, int]) -> RawStatement:
        return self._walk.statements[order[0]]

    # ------------------------------------------------------------ variables

    def _variable(self, key: str, touches: list[Numbered]) -> None:
        binding = touches[0][1].place.root.binding
        assert binding is not None
        declared = self._walk.block_declared.get(binding)
        lives = webs(touches, self._walk.branches)
        written = any(touch.write for _, touch in touches)
        if declared is not None and written and any(web.role is not ScalarClass.PRIVATE for web in lives):
            lives = (Web(tuple(touches), ScalarClass.PRIVATE, declared),)
        live = declared is None and live_after(binding, self._nest, self._setting.names)
        for number, web in enumerate(lives):
            name = key if number == 0 else f"{key}@{self._span(web.touches[0][0]).line}"
            if any(one.name == name for one in self.stored.storages):
                name = f"{name}:{self._span(web.touches[0][0]).column}"
            self._add_variable(name, web, live)

    def _add_variable(self, name: str, web: Web, live: bool) -> None:
        place = web.touches[0][1].place
        binding = place.root.binding
        assert binding is not None
        scope = "block" if binding in self._walk.block_declared else binding.kind
        self.stored.storages.append(
            Storage(
                name,
                place.root.key,
                StorageKind.SCALAR,
                self._element(place.type),
                self._bytes(place),
                (),
                (),
                False,
                scope,
                web.role,
                web.private_to,
                live,
                place.root.text,
                "const" in place.quals,
            )
        )
        self.stored.roots[name] = place.root
        self.stored.keys[name] = place.key
        for order, touch in web.touches:
            self.stored.accesses[order] = _access(touch, name, (), self._statement(order))

    def _element(self, type_: Any) -> CType | str:
        if isinstance(type_, CType):
            return type_
        return f"{self._spelling(type_.target)} *" if isinstance(type_, PointerTo) else self._spelling(type_)

    def _spelling(self, type_: Any) -> str:
        if isinstance(type_, CType):
            return type_.spelling
        if isinstance(type_, PointerTo):
            return f"{self._spelling(type_.target)} *"
        if isinstance(type_, ArrayOf):
            return f"{self._spelling(type_.element)} []"
        tag = getattr(type_, "tag", None)
        return f"{type_.kind} {tag}" if tag else type(type_).__name__.lower()

    def _bytes(self, place: Place) -> int | None:
        counted = place.step_type or place.union or place.type
        return self._setting.size_of(counted)

    # ------------------------------------------------------------ arrays

    def _array(self, key: str, touches: list[Numbered]) -> None:
        if any(self._leaves_row(touch) for _, touch in touches):
            touches = self._flattened(touches) or touches
        place = touches[0][1].place
        columns: list[list[tuple[Affine, ...] | None]] = [[] for _ in touches]
        shape: list[Affine | None] = []
        strides: tuple[str, ...] = ()
        for dimension, index in enumerate(place.indices):
            grid = self._dimension(key, touches, dimension)
            for column, subscripts in zip(columns, grid.subscripts, strict=True):
                column.append(subscripts)
            width = len(grid.strides)
            shape += [self._extent(place, dimension, index)] if width == 1 else [None] * width
            if width > 1 and len(place.indices) == 1:
                strides = stride_texts(self._setting, grid.strides)
            self.stored.obligations += grid.obligations
        self._loose(key, touches)
        self._add_array(key, touches, shape, strides, columns)

    def _add_array(
        self,
        key: str,
        touches: list[Numbered],
        shape: list[Affine | None],
        strides: tuple[str, ...],
        columns: list[list[tuple[Affine, ...] | None]],
    ) -> None:
        place, root = touches[0][1].place, touches[0][1].place.root
        name = _shown(key, [touch.place for _, touch in touches])
        binding = root.binding
        block = binding in self._walk.block_declared and root.direct and root.kind is StorageKind.ARRAY
        scope = "block" if block else binding.kind if binding is not None else "argument"
        private = self._walk.block_declared[binding] if block and binding is not None else ()
        live = not block and (
            root.kind is StorageKind.POINTER or binding is None or live_after(binding, self._nest, self._setting.names)
        )
        self.stored.storages.append(
            Storage(
                name,
                root.key,
                root.kind,
                self._element(place.type if place.union is None else place.union),
                self._bytes(place),
                tuple(shape),
                strides,
                root.restrict,
                scope,
                None,
                private,
                live,
                self._address(place),
                "const" in place.quals,
                self._whole(name, place, tuple(shape), strides),
            )
        )
        self.stored.roots[name] = root
        self.stored.keys[name] = key
        for (order, touch), column in zip(touches, columns, strict=True):
            known = [part for part in column if part is not None]
            subscripts = tuple(form for part in known for form in part) if len(known) == len(column) else None
            self.stored.accesses[order] = _access(touch, name, subscripts, self._statement(order))

    def _whole(self, name: str, place: Place, shape: tuple[Affine | None, ...], strides: tuple[str, ...]) -> Storage | None:
        """The array of structures that a member lies in; None for one structure, or where a length is not known."""
        ahead = next((at for at, step in enumerate(place.steps) if isinstance(step, Member)), 0)
        indices, struct = place.steps[:ahead], place.holder
        if not indices or not isinstance(struct, StructType) or not place.root.text or \
                all(isinstance(one, Index) and one.poly == Poly() for one in indices):
            return None
        dimensions = len(shape) - (len(place.indices) - len(indices))
        if None in shape[dimensions:] or (size := self._setting.size_of(struct)) is None:
            return None
        spelling = f"{struct.kind} {struct.tag or ''}".strip()
        root = place.root
        return Storage(name, root.key, root.kind, spelling, size, shape[:dimensions], strides, pointer_text=root.text)

    def _walks(self, touch: Touch) -> None:
        what = f"`{c_text(touch.node)}` walks through an array of arrays by a pointer; use its subscripts."
        self.stored.refusals.append(refusal(touch.node, "pointer", what))

    def _address(self, place: Place) -> str:
        """C text of the address of the first cell."""
        if not place.members:
            return place.root.text
        if not place.root.text:
            return ""
        text, pointer = place.root.text, True
        if place.root.kind is not StorageKind.POINTER:
            text, pointer = place.root.text.removeprefix("&"), not place.root.text.startswith("&")
        for step in place.steps:
            if isinstance(step, Member):
                text, pointer = f"{text}{'->' if pointer else '.'}{step.name}", False
            elif not pointer:
                text, pointer = text, True
        return text if pointer else f"&{text}"

    def _extent(self, place: Place, dimension: int, index: Index) -> Affine | None:
        """A declared extent; None where the code states none or cannot be held to it."""
        if index.extent is None:
            return None
        constant = self._setting.constant(index.extent)
        last = dimension == len(place.indices) - 1
        if constant is not None:  # a last member of one element may stand for more of them, in a single structure
            single = all(one.poly == Poly() for one in place.indices[:-1])
            return None if constant <= 1 and last and place.members and single else Affine.of(constant)
        return self._setting.stable_form(index.extent)

    # ------------------------------------------------------------ one dimension

    def _dimension(self, key: str, touches: list[Numbered], dimension: int) -> Grid:
        """The subscripts of one dimension: as they stand, or as a grid."""
        polys = [touch.place.indices[dimension].poly for _, touch in touches]
        known = [(at, poly) for at, poly in enumerate(polys) if poly is not None]
        if not any(needs_grid(self._setting, poly) for _, poly in known):
            forms = [None if poly is None else self._setting.affine(poly) for poly in polys]
            return Grid(((1, ()),), tuple(None if form is None else (form,) for form in forms), ())
        accesses = [Subscript(poly, touches[at][1].context, touches[at][1].node) for at, poly in known]
        grid = grid_of(self._setting, accesses, _shown(key, [touch.place for _, touch in touches]))
        if grid is None:
            return Grid(((1, ()),), tuple(None for _ in polys), ())
        found: list[tuple[Affine, ...] | None] = [None] * len(polys)
        for (at, _), subscripts in zip(known, grid.subscripts, strict=True):
            found[at] = subscripts
        return Grid(grid.strides, tuple(found), grid.obligations)

    def _leaves_row(self, touch: Touch) -> bool:
        """True if a pointer may run from one row of an array of arrays into the next."""
        for dimension, index in enumerate(touch.place.indices):
            if dimension and index.loose and index.extent is not None and index.poly is not None:
                form, extent = self._setting.affine(index.poly), self._extent(touch.place, dimension, index)
                if (
                    form is None
                    or extent is None
                    or not self._setting.knowledge.proves(
                        touch.context.formula, AllOf((at_most(0, form), less(form, extent)))
                    )
                ):
                    return True
        return False

    def _flattened(self, touches: list[Numbered]) -> list[Numbered] | None:
        """The touches with one subscript that counts elements through all rows; None if a length is not known."""
        found: list[Numbered] = []
        for order, touch in touches:
            total: Poly | None = Poly()
            for dimension, index in enumerate(touch.place.indices):
                extent = self._extent(touch.place, dimension, index) if dimension else Affine.of(1)
                if touch.place.members or extent is None or index.poly is None or total is None:
                    return None
                total = self._setting.product(total, Poly.of(extent)) + index.poly
            found.append((order, replace(touch, place=replace(touch.place, steps=(Index(total),)))))
        return found

    def _loose(self, key: str, touches: list[Numbered]) -> None:
        """Subscripts reached by pointer arithmetic must stay in the rows of the array that they point into."""
        key = _shown(key, [touch.place for _, touch in touches])
        for _, touch in touches:
            for dimension, index in enumerate(touch.place.indices):
                if not index.loose or index.extent is None or dimension == 0:
                    continue
                if index.poly is None:  # any cell of the array is meant; it must not be part of a structure
                    if touch.place.members:
                        self._walks(touch)
                    continue
                extent = self._extent(touch.place, dimension, index)
                form = self._setting.affine(index.poly)
                if extent is None or form is None:
                    self._walks(touch)
                    continue
                inside = AllOf((at_most(0, form), less(form, extent)))
                self.stored.obligations.append(
                    Obligation(
                        AssumptionCode.ROW_BOUND, inside, touch.context.formula, touch.context.loops, touch.node, (key,)
                    )
                )


def _one_name_each(walk: Walk) -> list[Numbered]:
    """All touches; a pointer of a table that is followed by itself (``t[0][j]``) and as one of many (``t[i][j]``) is
    always taken as one of many."""
    touches = [
        ((number, at), touch)
        for number, statement in enumerate(walk.statements)
        for at, touch in enumerate(statement.touches)
    ]
    names: dict[str, set[str]] = defaultdict(set)
    for _, touch in touches:
        names[as_rows(touch.place).root.key].add(touch.place.root.key)
    return [
        (order, replace(touch, place=as_rows(touch.place)))
        if len(names[as_rows(touch.place).root.key]) > 1
        else (order, touch)
        for order, touch in touches
    ]


def _shown(key: str, places: list[Place]) -> str:
    """``g->total`` for a member of the one structure that a pointer leads to, ``g.total`` for one of many."""
    first = places[0]
    if (
        first.root.kind is StorageKind.POINTER
        and first.members
        and isinstance(first.steps[0], Index)
        and all(isinstance(place.steps[0], Index) and place.steps[0].poly == Poly() for place in places)
    ):
        return first.root.key + "->" + key[len(first.root.key) + 1 :]
    return key


def _access(touch: Touch, name: str, subscripts: tuple[Affine, ...] | None, statement: RawStatement) -> Access:
    family, exact = (touch.update.family, touch.update.exact) if touch.update else ("", False)
    own, around = touch.context.constraints, statement.context.constraints
    inside = own[: len(around)] == around
    where = AllOf(own[len(around) :]) if inside else AllOf()
    return Access(
        name, touch.write, subscripts, touch.context.certain and inside, statement.span, family, exact, Syntax(touch.node), where
    )
