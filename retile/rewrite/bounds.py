"""Bounds of tree loops as lists of forms: on the loop's grid, without the ones that say nothing.

A loop that counts up starts at the largest of its near bounds and stops before the smallest of its half-open ends; one
that counts down the other way round.  For ``i-- > b`` the C variable is one ahead of the value used, so everything is
said of the value plus one (``shift``).
"""

from __future__ import annotations


from ..affine import (
    Affine,
    AllOf,
    AnyOf,
    Bound,
    Constraint,
    Floor,
    Formula,
    at_most,
    equal,
)
from ..model import CType
from ..tree import Loop
from ..values import dataclass
from .expression import Expression, Scope


@dataclass(frozen=True)
class Limit:
    """A local constant: the smallest (loops upwards) or largest (downwards) of several half-open ends."""

    symbol: str
    upward: bool
    ends: frozenset[Affine]

    def named_in(self, scope: Scope, name: str, type: CType) -> Scope:
        """The scope behind the declaration of the local."""
        return with_extremum(scope, self.symbol, Expression(name, type), "min" if self.upward else "max",
                             tuple(self.ends))


def extremum_of(symbol: str, kind: str, forms: tuple[Affine, ...]) -> Formula:
    """The symbol is the min or max of the forms."""
    value = Affine.of(symbol)
    sides = tuple(at_most(value, form) if kind == "min" else at_most(form, value) for form in forms)
    return AllOf((*sides, AnyOf(tuple(equal(value, form) for form in forms))))


def with_extremum(scope: Scope, symbol: str, variable: Expression, kind: str, forms: tuple[Affine, ...]) -> Scope:
    """The scope with a variable for the min or max of forms.

    Only what costs nothing later is remembered of its value: that it lies on one side of all forms, and its range.
    """
    value = Affine.of(symbol)
    sides = tuple(at_most(value, form) if kind == "min" else at_most(form, value) for form in forms)
    whole = scope.naming(symbol, variable, extremum_of(symbol, kind, forms))
    interval = whole.range(value)
    limits = (*(at_most(low, value) for low in interval[:1] if low is not None),
              *(at_most(value, high) for high in interval[1:] if high is not None))
    return scope.naming(symbol, variable, *sides, *limits, interval=interval)


def members(bound: Bound, kind: str) -> tuple[Bound, ...]:
    """The bounds of which a min or max is made; the bound itself if it is none of that kind."""
    if isinstance(bound, Affine) or bound.kind != kind:
        return (bound,)
    return tuple(inner for part in bound.bounds for inner in members(part, kind))


def near_bound(loop: Loop) -> Bound:
    """Where the loop begins."""
    return loop.lower if loop.step > 0 else loop.upper


def far_bound(loop: Loop) -> Bound:
    """Where the loop stops."""
    return loop.upper if loop.step > 0 else loop.lower


def half_open(form: Affine, upward: bool, shift: int) -> Affine:
    """The half-open end, in terms of the C variable, for the last value."""
    return form + 1 if upward else form - 1 + shift


def on_grid(form: Affine, loop: Loop, scope: Scope) -> Affine:
    """The first value of the loop's grid at or beyond a near bound, in the loop's direction."""
    stride = abs(loop.step)
    if stride == 1:
        return form
    distance = form - loop.origin
    low, high = scope.range(distance.mod(stride).substitute(scope.meanings))
    if low is not None and low == high:
        return form - low + (stride if low and loop.step > 0 else 0)
    if loop.step > 0:
        return loop.origin + (distance + stride - 1).floor_div(stride) * stride
    return loop.origin + distance.floor_div(stride) * stride


def needed(forms: tuple[Affine, ...], kind: str, scope: Scope) -> tuple[Affine, ...]:
    """The forms without those that another one makes idle, whatever the values."""
    kept = list(dict.fromkeys(forms))
    for form in tuple(kept):
        others = [other for other in kept if other != form]
        if any(scope.implies(Constraint(form - other if kind == "min" else other - form)) for other in others):
            kept.remove(form)
    return tuple(kept)


def named(forms: tuple[Affine, ...], limits: tuple[Limit, ...], upward: bool) -> tuple[Affine, ...]:
    """The forms with those together replaced that a local constant, scaled and moved, already stands for."""
    for limit in reversed(limits):
        found = _scaled_to(forms, limit) if limit.upward is upward else None
        if found is not None:
            replacement, used = found
            return named((replacement, *(form for form in forms if form not in used)), limits, upward)
    return forms


def _scaled_to(forms: tuple[Affine, ...], limit: Limit) -> tuple[Affine, frozenset[Affine]] | None:
    base = next((form for form in sorted(limit.ends, key=str) if form.terms), None)
    if base is None:
        return None
    symbol, factor = base.terms[0]
    for form in forms:
        scale, rest = divmod(form.coefficient(symbol), factor)
        if rest or scale <= 0:
            continue
        moved = form - base * scale
        used = frozenset(end * scale + moved for end in limit.ends)
        if used <= set(forms):
            return Affine.of(limit.symbol) * scale + moved, used
    return None


def without_alignment(a: Affine, b: Affine, sign: str) -> tuple[Affine, Affine]:
    """Two forms that compare by ``sign`` as ``a`` and ``b`` do, as far as a choice between them goes.

    With ``a = s*floor(e/s)`` and ``b`` a multiple of ``s``, ``e`` may be asked instead: ``e < b`` gives ``a < b``, and
    ``e > b`` gives ``a >= b``.  With ``a = floor(e/s) + k``: ``a < b`` if ``e < s*(b - k)``, and ``a > b`` if
    ``e > s*(b - k + 1) - 1``.
    """
    floor, factor = a.terms[0] if len(a.terms) == 1 else ("", 0)
    if isinstance(floor, Floor):
        aligned = b.constant % floor.divisor == 0 and all(c % floor.divisor == 0 for _, c in b.terms)
        if factor == floor.divisor and aligned and not a.constant:
            return floor.numerator, b
        if factor == 1:
            least = (b - a.constant) * floor.divisor
            return floor.numerator, least if sign == "<" else least + floor.divisor - 1
    return a, b


def interval_of(loop: Loop, scope: Scope) -> tuple[int | None, int | None]:
    """A range of the loop's values, from the ranges of its bounds alone."""
    lows = [scope.rough_range(bound)[0] for bound in members(loop.lower, "max") if isinstance(bound, Affine)]
    highs = [scope.rough_range(bound)[1] for bound in members(loop.upper, "min") if isinstance(bound, Affine)]
    return (max((low for low in lows if low is not None), default=None),
            min((high for high in highs if high is not None), default=None))
