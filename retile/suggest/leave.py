"""Nests that are best left as they are, and the reason."""

from __future__ import annotations

from collections.abc import Callable

from .idea import amount, listed
from .orders import cost, ranked, ways
from .view import View

Legal = Callable[[str], bool]


def before(view: View) -> str | None:
    """Why no plan can pay, from how the nest walks through memory alone; None if one may."""
    if len(view.nest.loops) == 1:
        if view.main.loops and view.loops[-1] in view.serial:
            return "a single loop whose iterations wait for each other: no order of its iterations is another one"
        return "a single loop: it reads and writes every cell in order, and there is nothing to use again"
    return _stream(view) or _neighbours(view)


def _stream(view: View) -> str | None:
    """Every cell is touched once, in the order in which it lies in memory."""
    inner = view.loops[-1]
    large = [r for r in ways(view) if view.bytes_of(r) > view.machine.first // 2]
    once = all(r.loops == frozenset(view.loops) for r in large)
    in_order = all(r.stride(inner) <= r.element for r in ways(view))
    if large and once and in_order and not set(view.loops) & view.serial:
        several = [r.storage for r in ways(view) if sum(o.storage == r.storage for o in view.references) > 1]
        if several:
            return (f"neighbours in {listed(several)} are used again while their rows are still in a cache, and all "
                    "rows are walked through in order")
        return (f"every cell of {listed(r.storage for r in large)} is used once, in the order in which it lies in "
                "memory: the speed of memory is the limit")
    return None


def _neighbours(view: View) -> str | None:
    """A filter: short constant loops over neighbours inside, whose rows stay in a cache."""
    long = [loop for loop in view.loops if view.trips[loop] > 16]
    short = [loop for loop in view.loops if view.trips[loop] <= 16]
    if len(long) < 2 or any(loop in view.loops[:len(long)] for loop in short) or set(long) & view.serial:
        return None
    moving = [r for r in ways(view) if set(long) <= r.loops]
    others = [r for r in ways(view) if r not in moving]
    if not moving or any(0 < r.stride(long[-1]) > r.element for r in moving) or \
            any(set(long) & r.loops for r in others):
        return None
    rows = 1
    for loop in short[:1]:
        rows = view.trips[loop]
    need = sum(rows * r.element * view.trips[long[-1]] for r in moving)
    if need > view.machine.second:
        return None
    what = f"the {rows} rows that a step needs take {amount(need)} and stay in the cache"
    return f"neighbours of a grid that are used again soon: {what}, and {long[-1]} runs along them"


def after(view: View) -> str:
    """Why nothing was found."""
    if set(view.loops) <= view.serial:
        return "every loop waits for the iteration before it, and no other order that helps is legal"
    best = ranked(view)[0]
    if cost(view, best)[0] >= 0.9 * cost(view, view.loops)[0]:
        return (f"the loops are in the best order already: {view.loops[-1]} innermost walks along the rows, and what "
                "is used again stays in the caches")
    return "orders that would walk through memory better are not legal"
