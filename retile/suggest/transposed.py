"""Transpositions: one array runs along one loop, another along the other, so that no order walks along both.

Blocks let every cache line that is fetched be used as a whole (Lam, Rothberg & Wolf, "The cache performance and
optimizations of blocked algorithms", 1991).  Rows whose distance is a power of two share the few lines of a cache set:
the block should reach over no more rows of the array that is walked across than a set has lines.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from ..values import dataclass
from .idea import Idea, listed, order_text
from .orders import ways
from .view import Reference, View

_MOST_WRITTEN_OUT = 16
_LEAST = 16  # iterations of both loops


@dataclass(frozen=True)
class _Crossing:
    """Two arrays that cross."""

    outer: tuple[str, ...]  # the loops around
    along: str  # the loop in which the first array lies cell by cell: the written one, if one is written
    across: str  # the loop in which the other does
    first: Reference
    other: Reference


def transposed(view: View) -> Iterator[Idea]:
    """Blocks for two arrays that cross: over few rows of one, square, and turned in an array of their own."""
    found = _crossing(view)
    if found is None:
        return
    line = max(8, view.machine.line // found.first.element)  # elements
    yield from _narrow(found, line)
    yield from _square(found, line)
    for chunk, worth in ((2 * line, 3.2), (4 * line, 3.0)):
        why = (f"squares of {chunk} by {chunk} are turned in a small array of their own, so that rows whose distance "
               "is a power of two do not push each other out of the cache")
        terms = [*found.outer, f"{found.across}:{chunk}", f"{found.along}:{chunk}", found.along, found.across]
        packed = f"pack {found.first.storage} at {found.along}:{chunk}"
        yield Idea("transposition", order_text(terms, packed), why, worth, "turned apart")


def _narrow(found: _Crossing, line: int) -> Iterator[Idea]:
    for tall, wide, worth in ((8 * line, line // 2, 4.3), (8 * line, line, 4.2), (64 * line, 2 * line, 4.1),
                              (8 * line, 2 * line, 4.0)):
        why = (f"{tall} {found.across} for {wide} {found.along} at a time: so few rows of {found.other.storage} that "
               "the cache keeps a line of each until all of it is used")
        terms = [*found.outer, f"{found.across}:{tall}", f"{found.along}:{wide}", found.across, found.along]
        written_out = f"unroll {found.along}" if wide <= _MOST_WRITTEN_OUT else ""
        yield Idea("transposition", order_text(terms, written_out), why, worth, "few rows")


def _square(found: _Crossing, line: int) -> Iterator[Idea]:
    names = listed((found.first.storage, found.other.storage))
    for chunk, worth in ((4 * line, 3.8), (8 * line, 3.4), (2 * line, 3.3)):
        why = f"in a square of {chunk} by {chunk} every cache line of {names} that is fetched is used as a whole"
        terms = [*found.outer, f"{found.across}:{chunk}", f"{found.along}:{chunk}", found.across, found.along]
        yield Idea("transposition", order_text(terms), why, worth)


def _crossing(view: View) -> _Crossing | None:
    """The first two arrays that cross, if they are large enough; None if there are none."""
    ones = [(r, along) for r in ways(view) if len(r.loops) > 1 for along in r.loops if 0 < r.stride(along) <= r.element]
    for (a, x), (b, y) in combinations(ones, 2):
        crossing = x != y and {x, y} <= a.loops & b.loops and a.stride(y) >= view.machine.line <= b.stride(x)
        if crossing and min(view.trips[x], view.trips[y]) >= _LEAST:
            outer = tuple(loop for loop in view.loops if loop not in (x, y))
            return _Crossing(outer, x, y, a, b) if a.write or not b.write else _Crossing(outer, y, x, b, a)
    return None
