"""Register blocks for contractions: sums over a loop that several other loops are free of.

    for (i) for (j) for (k) c[i][j] += a[i][k] * b[k][j]

A block of rows of the result stays in vector registers while ``k`` runs; each step multiplies a vector of one operand
by numbers of the other.  Packed parts of both operands are read from the caches in the order of use: of one as much as
the last cache holds, of the other half of the second, and the panel that is used again at once lies in the first (Goto
& van de Geijn, "Anatomy of high-performance matrix multiplication", 2008).  The order of every sum stays.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import permutations

from ..affine import Affine
from ..model import ScalarClass, Storage
from ..values import dataclass
from .idea import Idea, amount, listed, order_text
from .view import Reference, View

_DEPTHS = (256, 128, 384)  # of the sum, in one go: what neighbours in the search vary too
_WAITING = 1024  # columns of scalars that wait in an array, each row for itself
_WIDE = 4096  # elements of a packed row at most


@dataclass(frozen=True)
class Contraction:
    """Which loop does what."""

    outer: tuple[str, ...]  # stay outermost, in their order
    inner: tuple[str, ...]  # constant loops of the sum, taken as a whole with ``depth``
    rows: str  # its iterations are written out
    columns: str  # a vector runs along it
    depth: str  # the loop of the sum
    by_row: Reference  # the operand that depends on the rows, not on the columns
    by_column: Reference
    target: Reference  # what is summed into: an array, or a scalar without subscripts

    @property
    def waiting(self) -> bool:
        """True if a scalar is summed into, whose values wait in an array."""
        return not self.target.subscripts


@dataclass(frozen=True)
class Shape:
    """A register block."""

    rows: int
    columns: int  # elements of a row: some vectors
    vectors: int  # per row


def shapes(vector: int, registers: int, element: int) -> list[Shape]:
    """Blocks that fit into the vector registers, the most promising first.

    All sums stay in registers: rows times vectors of a row.  Where few registers are there, the numbers that are spread
    over vectors take one per row; with 32 and more of them they come from memory with the multiplication.
    """
    wide = max(1, vector // element)
    found = []
    for vectors in range(1, 5):
        spread = 1 if registers < 32 else 0
        rows = (registers - 1 - (0 if spread else vectors)) // (vectors + spread)
        rows = min(rows, 14 if registers >= 32 else 12)
        if rows >= 2:
            found.append(Shape(rows, vectors * wide, vectors))
            if rows > 4 and vectors == 1:
                found.append(Shape(rows - 2, wide, 1))
    if registers >= 32:
        return found
    # short rows are written out too early by some compilers, and their sums then move through memory
    return sorted(found, key=lambda shape: (shape.columns < 3 * wide, -shape.rows * shape.vectors, -shape.vectors))


def contraction(view: View) -> Contraction | None:
    """How the nest is a contraction; None if it is none."""
    summed = _summed(view)
    if summed is None:
        return None
    free, target = summed
    sums = [loop for loop in view.loops if loop not in free]
    operands = [r for r in view.references if r is not target and not r.write and r.loops & set(sums)]
    if not sums or len(free) < 2 or len(operands) < 2:
        return None
    # the deepest loop of the sum that is long enough; shorter ones inside it are taken as a whole
    long = [loop for loop in sums if not _constant(view, loop) and view.trips[loop] >= 8]
    if not long:
        return None
    depth = long[-1]
    inside = tuple(loop for loop in sums[sums.index(depth) + 1:])
    if any(not _constant(view, loop) for loop in inside):
        return None
    pairs = [one for pair in permutations(free, 2) if (one := _pair(view, pair, operands, target, depth)) is not None]
    if not pairs:
        return None
    best = max(pairs, key=lambda one: one.value)
    outer = tuple(loop for loop in view.loops if loop not in (best.rows, best.columns, depth, *inside))
    return Contraction(outer, inside, best.rows, best.columns, depth, best.by_row, best.by_column, target)


def _summed(view: View) -> tuple[list[str], Reference] | None:
    """The loops that the sum does not run over, and what is summed into."""
    updates = [a for a in view.main.accesses if a.write and a.update]
    if len(updates) != 1 or len(view.body) != 1:
        return None
    storage = view.nest.storage(updates[0].storage)
    if updates[0].subscripts:
        target = next(r for r in view.references if (r.storage, r.subscripts) == (storage.name, updates[0].subscripts))
        return [loop for loop in view.loops if loop in target.loops], target
    return _private(view, storage)


def _private(view: View, storage: Storage) -> tuple[list[str], Reference] | None:
    if storage.scalar is not ScalarClass.PRIVATE or storage.live_after:
        return None
    target = next(reference for reference in view.sums if reference.storage == storage.name)
    return [loop for loop in view.loops if loop in storage.private_to], target


def _constant(view: View, loop: str) -> bool:
    """True if a loop runs a constant, small number of times."""
    text = view.nest.loop(loop)
    return isinstance(text.first, Affine) and isinstance(text.last, Affine) and (text.last - text.first).is_constant \
        and view.trips[loop] <= 16


@dataclass(frozen=True)
class _Pair:
    rows: str
    columns: str
    by_row: Reference
    by_column: Reference
    value: float  # how well they serve


def _pair(view: View, pair: tuple[str, str], operands: list[Reference], target: Reference,
          depth: str) -> _Pair | None:
    """A pair of loops for rows and columns with the operands that go with each; None if they do not serve."""
    rows, columns = pair
    by_row = [r for r in operands if r.stride(rows) and not r.stride(columns) and r.stride(depth)]
    by_column = [r for r in operands if r.stride(columns) and not r.stride(rows) and r.stride(depth)]
    shared = [r for r in operands if r.stride(columns) and r.stride(rows)]
    if not by_row or not by_column or shared or min(view.trips[loop] for loop in pair) < 8:
        return None
    along = target if target.subscripts else _written_after(view, pair)
    unit = along is not None and 0 < along.stride(columns) <= along.element
    vector = 0 < by_column[0].stride(columns) <= by_column[0].element
    value = 4.0 * unit + 2.0 * vector + min(view.trips[columns], 64) / 64 - by_row[0].stride(rows).bit_length() / 64
    return _Pair(rows, columns, by_row[0], by_column[0], value)


def _written_after(view: View, pair: tuple[str, str]) -> Reference | None:
    """Where another statement puts the finished sum."""
    from .view import references_of

    for statement in view.nest.statements:
        if set(pair) <= set(statement.loops) and statement not in view.body:
            for reference in references_of(view, statement):
                if reference.write:
                    return reference
    return None


# ---------------------------------------------------------------- plans

def blocks(view: View) -> Iterator[Idea]:
    """Register blocks with held sums and packed operands, for the shapes that the registers allow."""
    found = contraction(view)
    if found is None:
        return
    element = max(found.by_row.element, found.by_column.element)
    several = shapes(view.machine.vector, view.machine.registers, element)
    several.sort(key=lambda shape: round(4 * _partial(view, found, shape)))
    for number, shape in enumerate(several[:4]):
        for later, depth in enumerate(_DEPTHS if number == 0 else _DEPTHS[:1]):
            yield _packed(view, found, shape, depth, 30 - number - 0.6 * later)
    yield from _plain(view, found, several[0])


def _partial(view: View, found: Contraction, shape: Shape) -> float:
    """The part of the result that no full block covers, at sizes that are given."""
    if view.assumed is not None:
        return 0.0
    rows, columns = view.trips[found.rows], view.trips[found.columns]
    return 1 - (rows - rows % shape.rows) * (columns - columns % shape.columns) / (rows * columns)


@dataclass(frozen=True)
class _Sizes:
    depth: int
    wide: int
    tall: int


def _sizes(view: View, found: Contraction, shape: Shape, depth: int) -> _Sizes:
    element = max(found.by_row.element, found.by_column.element)
    depth = min(depth, _up(view.trips[found.depth], 8)) if view.assumed is None else depth
    inside = 1
    for loop in found.inner:
        inside *= view.trips[loop]
    if inside > 1:
        depth = max(8, depth // inside)
    volume = depth * inside * element
    tall = max(1, view.machine.second // 2 // volume // shape.rows) * shape.rows
    wide = max(1, min(_WIDE, view.machine.last // 8 // volume) // shape.columns) * shape.columns
    if view.assumed is None:
        wide = min(wide, _up(view.trips[found.columns], shape.columns))
        tall = min(tall, _up(view.trips[found.rows], shape.rows))
    if found.waiting:
        wide = min(wide, _up(_WAITING, shape.columns))
    return _Sizes(depth, wide, tall)


def _packed(view: View, found: Contraction, shape: Shape, depth: int, worth: float) -> Idea:
    sizes = _sizes(view, found, shape, depth)
    volume = sizes.depth * found.by_column.element
    rows, columns, sums = f"{found.rows}:{sizes.tall}", f"{found.columns}:{sizes.wide}", f"{found.depth}:{sizes.depth}"
    whole = [f"{loop}:{view.trips[loop]}" for loop in found.inner]
    # what bounds how many sums wait stands outside the chunks of the sum
    bound = [f"{found.rows}:{max(2 * sizes.tall, _up(view.trips[found.rows], sizes.tall))}"] if found.waiting else []
    terms = [*found.outer, *bound, columns, sums, *whole, rows, f"{found.columns}:{shape.columns}",
             f"{found.rows}:{shape.rows}", found.depth, *found.inner, found.columns, found.rows]
    last = (whole or [sums])[-1]
    packs = [f"pack {_named(view, found.by_column)} at {last}" if _packable(found, found.by_column) else "",
             f"pack {_named(view, found.by_row)} at {rows}" if _packable(found, found.by_row) else ""]
    count, names = shape.rows * shape.vectors, listed((found.by_row.storage, found.by_column.storage))
    why = (f"{shape.rows} rows of {shape.columns} sums stay in {count} of {view.machine.registers} vector registers "
           f"while {found.depth} runs; packed parts of {names} are read in the order of use: "
           f"{amount(volume * shape.columns)} again and again from the nearest cache, {amount(volume * sizes.tall)} "
           "from the second")
    return Idea("register block", order_text(terms, *packs, _held(view, found), f"unroll {found.rows}"), why, worth)


def _packable(found: Contraction, reference: Reference) -> bool:
    """True if a part is as large as the chunks say, each subscript depending on one loop, and nobody writes to it."""
    return found.target.storage != reference.storage and all(len(subscript.names() & reference.loops) <= 1
                                                             for subscript in reference.subscripts)


def _held(view: View, found: Contraction) -> str:
    """What keeps the sums in locals; nothing where the operands are read from the same array."""
    if found.target.storage in (found.by_row.storage, found.by_column.storage):
        return ""
    name = found.target.storage if found.waiting else _named(view, found.target)
    return f"hold {name} across {found.depth}"


def _plain(view: View, found: Contraction, shape: Shape) -> Iterator[Idea]:
    """The block alone: nothing is copied, which pays for small and for flat operands."""
    depth = _sizes(view, found, shape, _DEPTHS[0]).depth
    sums = f"{found.depth}:{depth}"
    whole = [f"{loop}:{view.trips[loop]}" for loop in found.inner]
    small = [f"{found.columns}:{shape.columns}", f"{found.rows}:{shape.rows}"]
    terms = [*found.outer, *(small[::-1] if found.waiting else [*([sums] if not whole else []), *small]), found.depth,
             *found.inner, found.columns, found.rows]
    why = (f"{shape.rows} rows of {shape.columns} sums stay in vector registers while {found.depth} runs; nothing is "
           "copied")
    yield Idea("register block", order_text(terms, _held(view, found), f"unroll {found.rows}"), why, 12.0,
               "block alone")


def _named(view: View, reference: Reference) -> str:
    """An array as a plan names it: with its subscripts where the nest reaches it in several ways."""
    from ..plan.buffers import references
    from ..plan.options import shown

    several = references(view.nest, reference.storage)
    return reference.storage if len(several) == 1 else shown(reference.storage, reference.subscripts)


def _up(number: int, step: int) -> int:
    return -(-number // step) * step
