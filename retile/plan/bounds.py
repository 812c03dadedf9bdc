"""Bounds of the loops of a tree: read off regions, moved to the loop's grid, freed of what others already say."""

from __future__ import annotations

from collections.abc import Iterable

from ..affine import Affine, Bound, Constraint, Extremum, at_least_bound, at_most_bound, map_bound
from ..sets import Region
from ..tree import Loop
from ..values import replace


def tightest(kind: str, bounds: tuple[Bound, ...]) -> Bound:
    """One bound for several: their ``max`` or ``min``, without repetitions."""
    distinct: list[Bound] = []
    for bound in bounds:
        distinct += [part for part in parts_of(kind, bound) if part not in distinct]
    return distinct[0] if len(distinct) == 1 else Extremum(kind, tuple(distinct))


def bounds_on(values: Region, symbol: str) -> tuple[tuple[Bound, ...], tuple[Bound, ...]]:
    """The lower and the upper bounds that the constraints of a convex region put on a symbol."""
    lowers: list[Bound] = []
    uppers: list[Bound] = []
    for constraint in _constraints_on(values, symbol):
        factor = constraint.form.coefficient(symbol)
        rest = constraint.form - Affine.of(symbol) * factor
        if symbol in rest.names():
            continue
        if factor > 0 or constraint.equality:
            lowers.append((-rest * (1 if factor > 0 else -1) + abs(factor) - 1).floor_div(abs(factor)))
        if factor < 0 or constraint.equality:
            uppers.append((rest * (1 if factor < 0 else -1)).floor_div(abs(factor)))
    return tuple(lowers), tuple(uppers)


def bounds_of_pieces(values: Region, symbol: str) -> tuple[tuple[Bound, ...], tuple[Bound, ...]]:
    """As above for a region whose pieces have no bound in common: the smallest lower and the largest upper one of all."""
    found = [bounds_on(Region.where(*piece), symbol) for piece in values.pieces()]
    lowers = [tightest("max", lower) for lower, _ in found if lower]
    uppers = [tightest("min", upper) for _, upper in found if upper]
    return ((tightest("min", tuple(lowers)),) if len(lowers) == len(found) else (),
            (tightest("max", tuple(uppers)),) if len(uppers) == len(found) else ())


def on_grid(loop: Loop) -> Loop:
    """The same loop with a constant bound moved to the first value of the grid that it lets in."""
    step = abs(loop.step)
    if step == 1 or not loop.origin.is_constant:
        return loop
    origin = loop.origin.constant

    def up(bound: Affine) -> Affine:
        return Affine((), origin - (origin - bound.constant) // step * step) if bound.is_constant else bound

    def down(bound: Affine) -> Affine:
        return Affine((), origin + (bound.constant - origin) // step * step) if bound.is_constant else bound

    if loop.step > 0:
        return replace(loop, lower=map_bound(loop.lower, up))
    return replace(loop, upper=map_bound(loop.upper, down))


def without_idle_bounds(loop: Loop, known: Region) -> Loop:
    """The same loop without the bounds that the others, with what is known outside, already say."""
    value = Affine.of(loop.symbol)
    for kind, limit in (("max", at_least_bound), ("min", at_most_bound)):
        parts = parts_of(kind, loop.lower if kind == "max" else loop.upper)
        for part in parts:
            rest = tuple(p for p in parts if p != part)
            if not rest:
                break
            slim = replace(loop, lower=tightest(kind, rest)) if kind == "max" else replace(loop, upper=tightest(kind, rest))
            if (known & Region.where(slim.constraints())).implies(limit(value, part)):
                loop, parts = slim, rest
    return loop


def parts_of(kind: str, bound: Bound) -> tuple[Bound, ...]:
    """The bounds that a ``max`` or ``min`` of this kind is made of; the bound itself if it is none."""
    return bound.bounds if isinstance(bound, Extremum) and bound.kind == kind else (bound,)


def _constraints_on(values: Region, symbol: str) -> Iterable[Constraint]:
    for piece in values.pieces():
        for constraint in piece:
            if constraint.form.coefficient(symbol):
                yield constraint


