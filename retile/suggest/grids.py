"""Grids that are swept again and again, and recurrences over a table.

A sweep depends on the neighbours' values of the sweep before, so blocks over time and place have to be skewed: by the
smallest factor that is legal (Wolf & Lam, "A data locality optimizing algorithm", 1991).  Within a sweep in place every
cell waits for its neighbour; cells of several time steps, each a row behind the one before, do not wait for each other
(the hyperplane method: Lamport, "The parallel execution of DO loops", 1974).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from math import prod

from .idea import Idea, amount, order_text
from .view import View

_SKEWS = (1, 2, 3)
_STEPS = (8, 16, 32)  # time steps of a block
_JAMMED = (8, 4)
_SHORTEST = 256  # iterations of the innermost loop: starting it costs

Legal = Callable[[str], bool]


def sweeps(view: View) -> str | None:
    """The loop over time steps if the nest sweeps over a grid; None if it does not."""
    nest = view.nest
    time = nest.loops[0].id
    if len(view.loops) < 2 or view.loops[0] != time or any(time not in s.loops for s in nest.statements):
        return None
    carried = [e for e in view.dependences.edges if e.carried_by == time and e.kind == "flow" and not e.update]
    written = {r.storage for r in view.references if r.write and r.subscripts}
    if not carried or not written:
        return None
    waiting = view.loops[-1] in view.serial
    for storage in written:
        if waiting and any(s.coefficient(time) and all(isinstance(symbol, str) for symbol, _ in s.terms)
                           for r in view.references if r.storage == storage for s in r.subscripts):
            return None  # a table with a row per step: see ``wavefronts``
        steps = {tuple(r.stride(loop) for loop in view.loops[1:]) for r in view.references if r.storage == storage}
        if len(steps) > 1 or not any(next(iter(steps))):
            return None
    return time


def skewed(view: View, legal: Legal) -> Iterator[Idea]:
    """Blocks of several time steps over strips of the grid, as small skews as are legal."""
    time = sweeps(view)
    if time is None:
        return
    bare = [loop.id for loop in view.nest.loops]
    place = bare[1]
    if legal(order_text([f"{time}:8", f"{place}:32", *bare])):
        return  # nothing to skew: plain chunks do
    skew = next((f for f in _SKEWS if legal(order_text([f"{time}:8", _sum(f, time, place, 32), *bare]))), None)
    if skew is not None:
        yield from _strips(view, time, place, bare, skew)
        yield from _squares(view, time, place, bare, skew, legal)
    yield from _jammed(view, time, place, legal)


def _sum(factor: int, time: str, place: str, chunk: int | None = None) -> str:
    return f"({'' if factor == 1 else f'{factor}*'}{time}+{place})" + ("" if chunk is None else f":{chunk}")


def _row(view: View) -> int:
    """Bytes that one iteration of the outermost loop over places touches."""
    inside = view.loops[2:]
    arrays = {r.storage: r.element for r in view.references}
    copies = 2 if len(arrays) == 1 and not any(r.write and r.read for r in view.references) else 1
    return sum(arrays.values()) * copies * prod(view.trips[loop] for loop in inside)


def _strips(view: View, time: str, place: str, bare: list[str], skew: int) -> Iterator[Idea]:
    row, grid = _row(view), _row(view) * view.trips[place]
    if grid < view.machine.first or view.trips[time] < 4:
        return
    waiting = view.loops[-1] in view.serial
    for steps in (steps for steps in _STEPS if steps <= 2 * view.trips[time]):
        for number, strip in enumerate(_lengths(view, place, row, skew * steps)):
            size = (strip + skew * steps) * row
            why = (f"{steps} steps of {time} are done over a strip of {strip} {place} before the next one: it takes "
                   f"{amount(size)}, where the whole grid takes {amount(grid)} and is fetched anew in every step")
            beyond = 0.2 * (size > view.machine.second) + 0.4 * (size > view.machine.last // 2)
            yield Idea("time skewing", order_text([f"{time}:{steps}", _sum(skew, time, place, strip), *bare]), why,
                       (1.5 if waiting else 3.0) * (1 - beyond) - 0.01 * steps - 0.05 * number, f"{steps} steps")


def _lengths(view: View, place: str, row: int, lean: int) -> list[int]:
    """Lengths of a strip that leans over by so much: as a cache holds it, and a small multiple of that."""
    least = _SHORTEST if place == view.loops[-1] else 4
    fits = [_near(room // 2 // row - lean) for room in (view.machine.first, view.machine.second)]
    several = [*([fits[0]] if fits[0] >= 2 * lean else []), fits[1], 2 * lean, 4 * lean]
    return [length for length in dict.fromkeys(several) if least <= length < view.trips[place]]


def _squares(view: View, time: str, place: str, bare: list[str], skew: int, legal: Legal) -> Iterator[Idea]:
    """Blocks that are cut in two directions of the grid, for rows that are long or grids with three dimensions."""
    if len(view.loops) < 3 or _row(view) * 16 < view.machine.second:
        return
    second = view.loops[2]
    deep = len(view.loops) > 3
    for steps, strip, across in ((8, 16, 32 if deep else 512), (8, 32, 64 if deep else 1024)):
        for other in (skew, *_SKEWS):
            cuts = _sum(skew, time, place, strip), _sum(other, time, second, across)
            text = order_text([f"{time}:{steps}", *cuts, *bare])
            if legal(text):
                why = f"{steps} steps of {time} are done over blocks of {strip} {place} by {across} {second}"
                yield Idea("time skewing", text, why, 2.4 if deep else 1.9, "skewed blocks")
                break


def _jammed(view: View, time: str, place: str, legal: Legal) -> Iterator[Idea]:
    """Rows of several time steps side by side, where each cell of a row waits for the one before."""
    if len(view.loops) > 3 or len(view.nest.loops) != len(view.loops) or view.loops[-1] not in view.serial:
        return
    inside = list(view.loops[2:])
    least = next((f for f in _SKEWS if legal(order_text([f"{time}:8", _sum(f, time, place), *inside, time]))), 0)
    for skew in (least + 1, least) if least else ():  # one more: then no step waits for the one before
        for steps in _JAMMED:
            terms = [f"{time}:{steps}", _sum(skew, time, place), *inside, time]
            why = (f"{steps} steps of {time} run side by side, each {skew} {place} behind the one before: their cells "
                   "wait less for each other than those of one row")
            yield Idea("time skewing", order_text(terms, f"unroll {time}"), why,
                       3.0 + 0.01 * steps + 0.1 * (skew - least), f"{skew} behind")


def wavefronts(view: View) -> Iterator[Idea]:
    """Strips of a recurrence over a table, in which both loops wait."""
    if len(view.loops) != 2 or sweeps(view) is not None and len(view.nest.loops) > 2 or \
            not set(view.loops) <= view.serial or not any(len(r.loops) > 1 for r in view.references):
        return
    outer, inner = view.loops
    for count in (4, 8):
        yield Idea("wavefront", order_text([f"{outer}:{count}", inner, outer], f"unroll {outer}"),
                   f"{count} rows at a time: a step of {inner} does {count} cells whose values are at hand",
                   1.3 - 0.02 * count, "row strips")
    yield Idea("wavefront", order_text([f"{outer}:8", f"({outer}+{inner})", outer], f"unroll {outer}"),
               f"along a diagonal of {outer}+{inner} no cell waits for another", 1.05, "diagonals")


def _near(number: int) -> int:
    """A whole number of fours near a number, at least 4."""
    return max(4, number // 4 * 4)
