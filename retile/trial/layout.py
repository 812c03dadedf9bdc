"""How large every block is at given sizes, and what its cells are filled with: the job that the harness reads."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from math import prod
from typing import Any

from pycparser import c_ast, c_parser

from ..affine import Affine
from ..model import Access, Nest, Parameter, RetileError, Statement, Storage
from ..sets import Region
from .declared import Pointer, Scope, walk
from .kernel import Kernel
from .memory import Block, Cell, path_of, plain, value_of
from .ranges import Range, Ranges

_INDEX_VALUES = (16, 8, 4, 2, 1)  # how many different values a table of indices may hold, the most first
_WHOLE = (-9, 9)  # integers that are only data


@dataclass(frozen=True)
class Extent:
    """Elements of each space of a block: ``before`` with negative subscripts, ``count`` in all, ``row`` in a row."""

    before: int
    count: int
    row: int


@dataclass(frozen=True)
class Layout:
    """What the harness must know about one set of sizes."""

    values: dict[str, int]  # integers that have one value, by plain name of their cell
    extents: dict[int, Extent]  # by number of the block
    ranges: dict[str, tuple[int, int]]  # of integers that are used as subscripts
    alias: tuple[int, int, int] | None = None  # this block lies in that one, so many elements from its begin


@dataclass
class Bench:
    """A kernel together with the questions that its sizes raise."""

    kernel: Kernel
    nodes: dict[str, Any] = field(init=False)  # expression node of each parameter, by symbol

    def __post_init__(self) -> None:
        self.nodes = {
            parameter.symbol: expression(parameter.text, self.scope) for parameter in self.nest.parameters
        }

    @property
    def nest(self) -> Nest:
        """The nest of the kernel."""
        return self.kernel.nest

    @property
    def scope(self) -> Scope:
        """The names that the nest can see."""
        return self.kernel.scope

    @cached_property
    def bases(self) -> dict[str, tuple[str, ...]]:
        """For each symbol the plain names of the integers that it is computed from; itself for a plain one."""
        return {symbol: tuple(sorted(objects_in(node, self.scope))) for symbol, node in self.nodes.items()}

    @cached_property
    def direct(self) -> tuple[Parameter, ...]:
        """The parameters that are one object each and take any value."""
        return tuple(p for p in self.nest.parameters if self.bases[p.symbol] == (plain(p.text),))

    @cached_property
    def lengths(self) -> frozenset[str]:
        """The symbols of the parameters, and the hidden integers, that declared extents are computed from."""
        dims = [dim for block in self.kernel.memory.blocks for dim in block.dims if dim is not None]
        used = set().union(*(objects_in(dim, self.scope) for dim in dims))
        symbols = {parameter.symbol for parameter in self.direct if plain(parameter.text) in used}
        return frozenset(symbols | used & set(self.hidden))

    @cached_property
    def hidden(self) -> tuple[str, ...]:
        """Integers that are no parameters themselves but that parameters and extents are computed from."""
        shown = {plain(parameter.text) for parameter in self.direct}
        wanted = {name for names in self.bases.values() for name in names}
        for block in self.kernel.memory.blocks:
            for dim in block.dims:
                wanted |= objects_in(dim, self.scope) if dim is not None and block.count == "0" else set()
        for storage in self.nest.storages:
            for stride in storage.strides:
                wanted |= objects_in(expression(stride, self.scope), self.scope)
        return tuple(sorted(wanted - shown))

    def constant(self, name: str) -> int | None:
        """The value of a named constant: an enumerator, or a macro of the file or of the flags; None if not found."""
        if name in self.scope.constants:
            return value_of(self.scope.constants[name], self.scope, {})
        given = next(
            (
                flag[len(name) + 3 :]
                for flag in reversed(self.kernel.source.call.flags)
                if flag.startswith(f"-D{name}=")
            ),
            None,
        )
        defined = re.compile(rf"#\s*define\s+{re.escape(name)}\s+(.+)")
        texts = [
            match.group(1)
            for token in self.kernel.source.tokens
            if token.kind == "directive" and (match := defined.match(token.text))
        ]
        try:
            return value_of(expression((given and [given] or texts)[0], self.scope), self.scope, {})
        except (IndexError, RetileError):
            return None

    def shown(self, name: str) -> str:
        """The name of a cell or block as the nest's storages show it: ``g->depth`` for ``g.depth``."""
        return next((storage.name for storage in self.nest.storages if plain(storage.name) == name), name)

    def values(self, sizes: Mapping[str, int]) -> tuple[dict[str, int], dict[str, int]]:
        """Values by plain name of the cells, and by symbol of the parameters, for sizes by symbol or name."""
        cells = {plain(name): value for name, value in sizes.items()}
        for parameter in self.direct:
            if parameter.symbol in sizes:
                cells[plain(parameter.text)] = sizes[parameter.symbol]
        return cells, {symbol: value_of(node, self.scope, cells) for symbol, node in self.nodes.items()}

    def layout(self, sizes: Mapping[str, int]) -> Layout:
        """The layout at these sizes; RetileError if a block's extent cannot be found."""
        cells, symbols = self.values(sizes)
        return _Sizing(self, cells, symbols).layout()

    def work(self, sizes: Mapping[str, int]) -> int:
        """At most how many times statements run at these sizes."""
        _, symbols = self.values(sizes)
        total = 0
        for statement in self.nest.statements:
            domain = Region.where(statement.domain).at(symbols)
            if not domain.is_empty():
                spans = [_spread(domain, Affine.of(loop)) for loop in statement.loops]
                total += prod(high - low + 1 for low, high in spans)
        return total


def expression(text: str, scope: Scope) -> Any:
    """The node of an expression that may use the scope's type names; RetileError if it cannot be read."""
    types = "".join(f"typedef int {name};" for name in scope.typedefs)
    try:
        return c_parser.CParser().parse(f"{types}int expression_ = {text};").ext[-1].init
    except Exception as problem:  # the parser raises several kinds
        raise RetileError(f"a trial cannot compute {text}: {problem}") from None


def objects_in(node: Any, scope: Scope) -> set[str]:
    """The plain names of the objects that an expression reads."""
    found = path_of(scope, node)
    if found is not None and not isinstance(found[1], Pointer):
        return {found[0].replace("*", "")}
    objects: set[str] = set()
    for _, child in node.children():
        objects |= objects_in(child, scope)
    return objects


def _spread(region: Region, form: Affine) -> tuple[int, int]:
    low, high = region.extreme(form, largest=False), region.extreme(form, largest=True)
    if low is None or high is None:
        raise RetileError(f"{form} has no bounds at these sizes")
    return low, high


class _Sizing:
    """Works out the layout for one set of sizes."""

    def __init__(self, bench: Bench, cells: dict[str, int], symbols: dict[str, int]) -> None:
        self.bench, self.cells, self.symbols = bench, cells, symbols
        self.memory = bench.kernel.memory
        self.holder = {link.target: link.holder for link in self.memory.links}
        self.spread: dict[int, tuple[int, int]] = {}  # block -> smallest and largest element used
        self.indices: set[str] = set()
        self.index_values = _INDEX_VALUES[0]
        self.domains = {s.id: Region.where(s.domain).at(symbols) for s in bench.nest.statements}

    def layout(self) -> Layout:
        problem: RetileError | None = None
        for count in _INDEX_VALUES:
            self.index_values = count
            self.spread.clear()
            try:
                for statement in self.bench.nest.statements:
                    for access in statement.accesses:
                        self._access(statement, access)
                extents = {block.number: self._extent(block) for block in self.memory.blocks if block.count == "0"}
                self._check_homes()
            except _TooFar as found:
                problem = RetileError(str(found))
                if not self.indices:
                    break
                continue
            return Layout(self.cells, extents, {name: (0, self.index_values - 1) for name in self.indices})
        assert problem is not None
        raise problem

    def _access(self, statement: Statement, access: Access) -> None:
        if self.domains[statement.id].is_empty():
            return
        storage = self.bench.nest.storage(access.storage)
        cells = self.memory.cells_of(storage.name)
        if not cells:
            return
        if access.subscripts == (Affine(),) and not self._subscripted(cells[0]):
            return  # ``*p`` alone: the one element that there is
        if access.subscripts is None or not self._fits(storage, cells[0], access.subscripts):
            for subscripts in self._looked_up(cells[0]):
                self._reach(cells[0], [self._range(node, statement) for node in subscripts])
        elif access.subscripts:
            self._affine(statement, storage, cells[0], access.subscripts)

    def _fits(self, storage: Storage, cell: Cell, subscripts: tuple[Affine, ...]) -> bool:
        """True if the subscripts are those of the blocks on the way, one by one; else the C text has to tell."""
        total = self._subscripted(cell)
        if storage.strides:
            return len(subscripts) == total - 1 + len(storage.strides)
        return len(subscripts) <= total or cell.repeat != "1"

    def _subscripted(self, cell: Cell) -> int:
        """How many subscripts the blocks on the way to a cell take."""
        return sum(block.skip + (block.levels[-1] if block.levels else 0) for block in self._chain(cell))

    def _chain(self, cell: Cell) -> list[Block]:
        chain = [self.memory.blocks[cell.block]]
        while chain[0].number in self.holder:
            chain.insert(0, self.memory.blocks[self.holder[chain[0].number]])
        return chain

    def _affine(self, statement: Statement, storage: Storage, cell: Cell, subscripts: tuple[Affine, ...]) -> None:
        domain = self.domains[statement.id]
        forms = [self._known(form) for form in subscripts]
        chain = [block for block in self._chain(cell) if block.levels and block.levels[-1]]
        for block in chain:
            forms, last = forms[block.skip :], block is chain[-1]
            if storage.strides and last:
                strides = [
                    value_of(expression(text, self.bench.scope), self.bench.scope, self.cells)
                    for text in storage.strides
                ]
            else:
                strides = self._strides(block)
            taken, forms = forms[: len(strides)], forms[len(strides) :]
            if not taken:  # the access ends here: it reads a pointer to a row
                break
            whole = sum((form * stride for form, stride in zip(taken, strides)), Affine())
            self._note(block, *_spread(domain, whole))

    def _known(self, form: Affine) -> Affine:
        return form.substitute({name: Affine.of(value) for name, value in self.symbols.items()})

    def _strides(self, block: Block) -> list[int]:
        """Elements between two values of each subscript that the block takes."""
        inner = [self._value(dim, block) for dim in block.dims[1:]]
        return [prod(inner[at:]) for at in range(len(inner) + 1)]

    def _value(self, dim: Any, block: Block) -> int:
        if dim is None:
            raise RetileError(f"an inner extent of {block.name} is not declared")
        return value_of(dim, self.bench.scope, self.cells)

    def _note(self, block: Block, low: int, high: int) -> None:
        old = self.spread.get(block.number)
        self.spread[block.number] = (low, high) if old is None else (min(low, old[0]), max(high, old[1]))

    def _extent(self, block: Block) -> Extent:
        low, high = self.spread.get(block.number, (0, -1))
        row = self._strides(block)[0] if len(block.dims) > 1 else self._row(block)
        if block.dims and block.dims[0] is not None:
            declared = max(0, prod(self._value(dim, block) for dim in block.dims))
            self._within(block, low, high, declared)
            return Extent(0, declared, row)
        before = max(0, -low) if high >= low else 0
        return Extent(before, max(0, high + 1) + before, row)

    def _row(self, block: Block) -> int:
        """The distance of rows that the nest computes itself, or the length of rows that lie apart."""
        for storage in self.bench.nest.storages:
            cells = self.memory.cells_of(storage.name)
            if cells and cells[0].block == block.number and len(storage.strides) > 1:
                return value_of(expression(storage.strides[0], self.bench.scope), self.bench.scope, self.cells)
        if len([level for level in block.levels if level]) > 1:
            return max(0, self.spread.get(block.number, (0, -1))[1] + 1)
        return 0

    def _check_homes(self) -> None:
        """Objects of the file have the extents that they were declared with."""
        for block in self.memory.blocks:
            if block.home != "0" and block.dims and block.number in self.spread and None not in block.dims:
                self._within(block, *self.spread[block.number], prod(self._value(dim, block) for dim in block.dims))

    def _within(self, block: Block, low: int, high: int, declared: int) -> None:
        if low <= high and (low < 0 or high >= declared):
            raise _TooFar(
                f"at these sizes the nest uses {block.name} outside its declared extent ({declared} elements)"
            )

    # ------------------------------------------------------------ subscripts that are looked up

    def _looked_up(self, cell: Cell) -> list[list[Any]]:
        """The subscript nodes of every use of a cell in the nest, outermost subscript first."""
        found = []
        inner: set[int] = set()
        for node in walk(self.bench.kernel.node):
            if not isinstance(node, c_ast.ArrayRef | c_ast.StructRef) or id(node) in inner:
                continue
            path = path_of(self.bench.scope, node)
            if path is None or path[0].replace("*", "") != cell.name:
                continue
            subscripts: list[Any] = []
            at = node
            while isinstance(at, c_ast.ArrayRef | c_ast.StructRef):
                inner.add(id(at))
                if isinstance(at, c_ast.ArrayRef):
                    subscripts.insert(0, at.subscript)
                at = at.name
            found.append(subscripts)
        if not found:
            raise RetileError(f"a trial cannot find the subscripts of {cell.name}")
        return found

    def _range(self, node: Any, statement: Statement) -> Range:
        known: dict[str, Range] = {name: (value, value) for name, value in self.cells.items()}
        for other in self.bench.nest.statements:
            domain = self.domains[other.id]
            for loop in other.loops if not domain.is_empty() else ():
                name = self.bench.nest.loop(loop).iterator
                low, high = _spread(domain, Affine.of(loop))
                old = known.get(name, (low, high))
                known[name] = (min(low, old[0]), max(high, old[1]))
        reads: set[str] = set()
        answer = Ranges(
            self.bench.scope, self.bench.kernel.node, known, lambda _: (0, self.index_values - 1), reads
        )
        found = answer.of(node)
        self.indices |= reads
        return found

    def _reach(self, cell: Cell, subscripts: list[Range]) -> None:
        for block in self._chain(cell):
            if not block.levels or not block.levels[-1]:
                continue
            strides, subscripts = self._strides(block), subscripts[block.skip :]
            taken, subscripts = subscripts[: len(strides)], subscripts[len(strides) :]
            self._note(
                block,
                sum(int(low) * stride for (low, _), stride in zip(taken, strides)),
                sum(int(high) * stride for (_, high), stride in zip(taken, strides)),
            )


class _TooFar(RetileError):
    """A subscript leaves its declared extent."""


def job(layout: Layout, bench: Bench, fills: Mapping[str, str], default: str) -> str:
    """The harness's lines for one layout; ``fills`` gives the way of filling by plain name, ``default`` for the rest.

    Ways of filling: ``random``, ``zero``, ``diagonal-dominant``, ``positive``.
    """
    lines = [
        f"block {number} {extent.before} {extent.count} {extent.row}" for number, extent in layout.extents.items()
    ]
    lines.append("alias {} {} {}".format(*(layout.alias or (-1, -1, 0))))
    memory = bench.kernel.memory
    outs = {variable.name for variable in bench.kernel.outs}
    for cell in memory.cells:
        block = memory.blocks[cell.block]
        own_variable = block.argument >= 0 and not block.dims
        seen = int(not own_variable or block.name in outs)
        low, high = layout.ranges.get(cell.name, _WHOLE)
        mode = fills.get(cell.name, fills.get(cell.name.split(".")[0], default))[0]
        if cell.name in layout.ranges and mode != "z":
            mode = "r"  # any other way could leave the range
        if cell.name in layout.values:
            mode, low = "v", layout.values[cell.name]
        elif block.constant:
            mode = "k"
        lines.append(f"cell {cell.number} {mode} {low} {high} {seen}")
    return "\n".join(lines) + "\n"


def overlapping(layout: Layout, bench: Bench, first: str, second: str, shift: int) -> Layout | None:
    """The layout with the memory of one storage laid into that of another, ``shift`` elements from its begin.

    None if they are of different types, or more than plain pointers to elements.
    """
    memory = bench.kernel.memory
    blocks = [memory.blocks[cell.block] for name in (first, second) for cell in memory.cells_of(name)[:1]]
    if len(blocks) != 2 or blocks[0].number == blocks[1].number or blocks[0].type != blocks[1].type:
        return None
    holder, inside = sorted(blocks, key=lambda block: block.number)
    targets = {link.target for link in memory.links}
    if any(
        block.number not in targets
        or block.number in {link.holder for link in memory.links}
        or len(block.levels) > 3
        or block.count != "0"
        or sum(block.levels[:-1])
        for block in blocks
    ):
        return None
    room, needed = layout.extents[holder.number], layout.extents[inside.number]
    before = max(room.before, needed.before)
    after = max(room.count - room.before, needed.count - needed.before + shift)
    extents = {**layout.extents, holder.number: Extent(before, before + after, room.row)}
    return replace(layout, extents=extents, alias=(inside.number, holder.number, shift))


def unknown_fills(bench: Bench, fills: Mapping[str, str]) -> list[str]:
    """The names among ``fills`` that no array of the nest has."""
    names = {cell.name for cell in bench.kernel.memory.cells}
    return [
        name
        for name in fills
        if plain(name) not in names and not any(other.startswith(plain(name) + ".") for other in names)
    ]


def names_needed(bench: Bench) -> tuple[str, ...]:
    """The names of all integers that must be given a size, as the user writes them, in the order of declaration."""
    order = list(bench.scope.variables)
    names = (*(parameter.symbol for parameter in bench.direct), *bench.hidden)

    def place(name: str) -> int:
        root = re.match(r"\w*", plain(name))
        return order.index(root.group()) if root and root.group() in order else len(order)

    return tuple(sorted(names, key=place))
