"""Full chunks apart from partial ones: ``--remainder peel``.

In the region between a chunk loop and the next one inside, every loop that a chunk cuts gets a copy that runs over the
whole chunk, a constant number of times, taken where all of the region's chunks are full:

    for (k_from ...)                        for (k_from ...)
        for (i ...)                             if (k_from + 64 <= n)
            for (k = k_from; k < k_to; k++)         for (i ...)
                S                                       for (k = k_from; k < k_from + 64; k++)
                                                            S
                                                else
                                                    for (i ...)
                                                        for (k = k_from; k < k_to; k++)
                                                            S

The order of the iterations stays exactly the same, at both ends of the loops, and each region costs one more copy of
the body, however many loops are cut in it.  The condition asks for the whole box of the chunks to lie inside the
bounds; where bounds depend on other loops of the region it is taken at the box's worst corner.
"""

from __future__ import annotations

from collections.abc import Mapping

from ..affine import Affine, AllOf, Constraint, Floor, Formula, at_most, negate
from ..sets import Region
from ..tree import Guard, Held, Kept, Loop, Node, Role, loops_of
from ..values import dataclass, replace
from .bounds import members


def peeled(tree: tuple[Node, ...], context: Region, most: int | None = None) -> tuple[Node, ...]:
    """The tree with full chunks apart; ``context``: what holds of the parameters; ``most``: how many iterations a chunk may
    have for that, any number if left out."""
    constants = frozenset(loop.named for loop in loops_of(tree) if loop.named is not None)
    return tuple(_peeled(node, context, constants, most) for node in tree)


def _peeled(node: Node, known: Region, constants: frozenset[str], most: int | None) -> Node:
    if isinstance(node, Guard):
        inner = known if node.condition is None else known & Region.where(node.condition)
        return replace(node, body=tuple(_peeled(part, inner, constants, most) for part in node.body))
    if isinstance(node, Kept | Held):
        return replace(node, body=tuple(_peeled(part, known, constants, most) for part in node.body))
    if not isinstance(node, Loop):
        return node
    inside = known & Region.where(node.constraints())
    body = tuple(_peeled(part, inside, constants, most) for part in node.body)
    if node.role is Role.CHUNK and not (len(body) == 1 and isinstance(body[0], Loop) and body[0].role is Role.CHUNK):
        body = _apart(body, inside, constants, most)
    return replace(node, body=body)


def _apart(body: tuple[Node, ...], known: Region, constants: frozenset[str], most: int | None) -> tuple[Node, ...]:
    """A region with its full chunks in front, under a condition, and as it was where the condition fails."""
    full = _Full(constants, most)
    copy = tuple(full.node(node, {}) for node in body)
    conditions = _needed(tuple(dict.fromkeys(full.conditions)), known)
    inner = {loop.symbol for loop in loops_of(body)}
    if copy == body or any(c.form.names() & inner for c in conditions):
        return body
    condition: Formula = conditions[0] if len(conditions) == 1 else AllOf(conditions)
    if not conditions:
        return copy
    if (known & Region.where(condition)).is_empty():
        return body
    return Guard(condition, copy), Guard(negate(condition), body)


def _needed(conditions: tuple[Constraint, ...], known: Region) -> tuple[Constraint, ...]:
    """The conditions without those that the others and what is known imply."""
    for condition in conditions:
        others = tuple(other for other in conditions if other != condition)
        if (known & Region.where(*others)).implies(condition):
            conditions = others
    return conditions


@dataclass(frozen=True)
class _Range:
    low: Affine
    high: Affine


class _Full:
    """Makes the copy of a region in which chunks are full, and collects what has to hold for that."""

    def __init__(self, constants: frozenset[str], most: int | None) -> None:
        self._constants = constants
        self._most = most
        self.conditions: list[Constraint] = []

    def node(self, node: Node, box: Mapping[str, _Range]) -> Node:
        """The node with the loops in it over full chunks; ``box``: the range of the loops of the region around."""
        if isinstance(node, Guard | Kept | Held):
            return replace(node, body=tuple(self.node(part, box) for part in node.body))
        if not isinstance(node, Loop) or node.role is Role.CHUNK:
            return node
        full = self._full(node, box)
        range = _range_of(full)
        inner = box if range is None else {**box, node.symbol: range}
        return replace(full, body=tuple(self.node(part, inner) for part in node.body))

    def _full(self, loop: Loop, box: Mapping[str, _Range]) -> Loop:
        """The loop over all of a chunk, if one of its bounds on either side are a fixed distance apart."""
        lowers, uppers = members(loop.lower, "max"), members(loop.upper, "min")
        if len(lowers) + len(uppers) == 2 or not all(isinstance(bound, Affine) for bound in (*lowers, *uppers)):
            return loop
        for low in lowers:
            for high in uppers:
                assert isinstance(low, Affine) and isinstance(high, Affine)
                if low.terms and (high - low).names() <= self._constants and self._short(high - low):
                    needs = [*(_least(high_ - high, box) for high_ in uppers if isinstance(high_, Affine)),
                             *(_least(low - low_, box) for low_ in lowers if isinstance(low_, Affine))]
                    if all(need is not None and (need.terms or need.constant >= 0) for need in needs):
                        self.conditions += [_undivided(need) for need in needs if need is not None and need.terms]
                        return replace(loop, lower=low, upper=high)
        return loop


    def _short(self, distance: Affine) -> bool:
        return self._most is None or distance.is_constant and abs(distance.constant) < self._most


def _undivided(form: Affine) -> Constraint:
    """``0 <= form`` without its quotient: ``0 <= a - floor(e / d)`` says ``e <= d*a + d - 1``."""
    quotients = [(term, factor) for term, factor in form.terms if isinstance(term, Floor)]
    if len(quotients) != 1 or abs(quotients[0][1]) != 1:
        return at_most(0, form)
    quotient, factor = quotients[0]
    rest = (form - Affine.of(quotient) * factor) * quotient.divisor
    return at_most(quotient.numerator, rest + quotient.divisor - 1) if factor < 0 else at_most(-rest, quotient.numerator)


def _range_of(loop: Loop) -> _Range | None:
    lowers, uppers = members(loop.lower, "max"), members(loop.upper, "min")
    if lowers and uppers and isinstance(lowers[0], Affine) and isinstance(uppers[0], Affine):
        return _Range(lowers[0], uppers[0])
    return None


def _least(form: Affine, box: Mapping[str, _Range]) -> Affine | None:
    """A form without the box's symbols that is nowhere in the box larger than this one; None if there is none."""
    for symbol in reversed(list(box)):
        if any(isinstance(term, Floor) and symbol in term.numerator.names() for term, _ in form.terms):
            return None
        factor = form.coefficient(symbol)
        if factor:
            form = form.substitute({symbol: box[symbol].low if factor > 0 else box[symbol].high})
    return form

