"""Sizes at which an iteration space is small enough to be looked at and large enough to show something."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from ..affine import Affine, at_most, formula_names
from ..model import LoopText, Nest, RetileError, Statement
from ..sets import Region

_HUGE = 10_000  # how bad a size is at which a loop does not run
_ROUNDS = 2


def choose_sizes(nest: Nest, statement: Statement, domain: Region, given: Mapping[str, int],
                 wish: int) -> dict[str, int]:
    """A value for every parameter, by symbol, that satisfies facts and assumptions.

    The loops around ``statement``, whose instances ``domain`` holds, get about ``wish`` iterations each.  Raises
    RetileError if the nest is not defined, or the statement not executed, at the ``given`` ones.
    """
    left = domain.at(given).without(statement.loops)
    if left.is_empty():
        raise RetileError(_nothing(nest, statement, given))
    bounding = [p.symbol for p in nest.parameters
                if p.symbol in formula_names(statement.domain) and p.symbol not in given]
    sizes = {**given, **_fitted(left, dict.fromkeys(bounding, wish))}
    chooser = _Chooser(statement, domain, nest, wish)
    for _ in range(_ROUNDS):
        for name in bounding:
            sizes = _improved(chooser, left, bounding, name, sizes)
    rest = [p.symbol for p in nest.parameters if p.symbol not in sizes]
    return {**sizes, **_fitted(left.at(sizes), dict.fromkeys(rest, wish))}


def _improved(chooser: _Chooser, left: Region, bounding: list[str], name: str, sizes: dict[str, int]) -> dict[str, int]:
    """The sizes with a better value for one name, if there is one."""
    best, badness = sizes, chooser.badness(sizes)
    for value in (*range(chooser.wish, chooser.wish + 6), *range(chooser.wish)):
        if not badness:
            break
        wishes = {name: value, **{other: sizes[other] for other in bounding if other != name}}
        trial = {**sizes, **_fitted(left, wishes)}
        if (bad := chooser.badness(trial)) < badness:
            best, badness = trial, bad
    return best


class _Chooser:
    def __init__(self, statement: Statement, domain: Region, nest: Nest, wish: int) -> None:
        self._domain = domain
        self._loops = [nest.loop(id) for id in statement.loops]
        self.wish = wish

    def badness(self, sizes: Mapping[str, int]) -> int:
        """How far the loops are from the wished number of iterations, all together."""
        inside = self._domain.at(sizes)
        if inside.is_empty():
            return _HUGE * len(self._loops)
        return sum(min(_HUGE, abs(len(loop_values(loop, inside)) - self.wish)) for loop in self._loops)


def loop_values(loop: LoopText, inside: Region) -> range:
    """From the first to the last value of a loop in a bounded region that is not empty, in the loop's own order.

    They lie a step apart if all that occur do; else, as for ``j = i; j < n; j += 2``, one.
    """
    value, stride = Affine.of(loop.id), abs(loop.step)
    low, high = inside.extreme(value, largest=False), inside.extreme(value, largest=True)
    if low is None or high is None:
        raise ValueError(f"loop {loop.id} has no bound at fixed sizes")
    if stride > 1 and not (inside & Region.where(at_most(1, (value - low).mod(stride)))).is_empty():
        stride = 1
    return range(low, high + 1, stride) if loop.step > 0 else range(high, low - 1, -stride)


def _fitted(region: Region, wishes: Mapping[str, int]) -> dict[str, int]:
    """Values in the region, each as near to its wish as those before it allow."""
    sizes: dict[str, int] = {}
    for name, wish in wishes.items():
        sizes[name] = _nearest(region, name, wish)
        region = region.at({name: sizes[name]})
    return sizes


def _nearest(region: Region, name: str, wish: int) -> int:
    low = region.extreme(Affine.of(name), largest=False)
    high = region.extreme(Affine.of(name), largest=True)
    wish = max(wish if high is None else min(wish, high), wish if low is None else low)
    for value in _around(wish):
        if not region.at({name: value}).is_empty():
            return value
    point = region.sample([name])
    if point is None:
        raise ValueError(f"no value for {name} in an empty region")
    return point[name]


def _around(wish: int) -> Iterable[int]:
    yield wish
    for away in range(1, 9):
        yield wish + away
        yield wish - away


def _nothing(nest: Nest, statement: Statement, given: Mapping[str, int]) -> str:
    sizes = ", ".join(f"{p.text} = {given[p.symbol]}" for p in nest.parameters if p.symbol in given)
    where = f" at {sizes}" if sizes else ""
    return f"{nest.address}: line {statement.id} is not executed{where}, or the nest is not defined there; " \
           f"there is nothing to draw." + (" Choose other values with --set." if sizes else "")
