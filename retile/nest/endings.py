"""What must hold of the sizes for a loop to end as it is read, and whether C already grants it.

A signed iterator of at least the width of int may not overflow, and a loop that steps by one and can only wrap never
ends: what that takes is a fact. Where wrapping is defined and the loop might end all the same, it is an obligation.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from ..affine import (
    Affine,
    AllOf,
    AnyOf,
    Bound,
    Constraint,
    Formula,
    at_least_bound,
    at_most,
    at_most_bound,
    negate,
)
from ..model import AssumptionCode, CType
from .context import Context
from .knowledge import Obligation
from .refusals import refused
from .setting import Setting

if TYPE_CHECKING:
    from .loops import Header


class Endings:
    """Adds to a setting what the ends of loops need."""

    def __init__(self, setting: Setting) -> None:
        self._setting = setting

    def must_meet(self, first: Bound, last: Bound, step: int, type_: CType, context: Context, loop: Any) -> None:
        """``i != n`` ends only if the steps from the first value meet n."""
        if not isinstance(first, Affine) or not isinstance(last, Affine):
            raise refused(loop, "bound", "`!=` with a conditional bound is not read; use `<` or `>`.")
        sign = 1 if step > 0 else -1
        distance = (last + sign - first) * sign
        meets = AllOf((at_most(0, distance), Constraint(distance.mod(abs(step)), True)))
        if type_.signed and type_.bits >= self._setting.types.arithmetic.int.bits:
            self.fact(meets, context, loop)
        elif not self._setting.require(AssumptionCode.RELATION, meets, context, loop):
            raise refused(loop, "bound", "the loop may run past its `!=` bound and wrap around.")

    def must_end(self, header: Header, symbol: str, context: Context, loop: Any, always_true: bool) -> None:
        """No value tested leaves the iterator's type: up to one step beyond the last.

        ``always_true``: the condition has a part that holds as long as nothing wraps, so that a wrap ends the loop.
        """
        type_, step = header.type, header.step
        beyond = abs(step) - (1 if header.relation == "!=" else 0)
        if step > 0:
            inside = at_least_bound(Affine.of(type_.largest - beyond), header.last)
        else:
            inside = at_most_bound(Affine.of(type_.smallest + beyond), header.last)
        runs = at_most_between(header.first, header.last, step)
        if self._setting.knowledge.proves(context.where(runs).formula, inside):
            return
        narrow = type_.bits < self._setting.types.arithmetic.int.bits
        if abs(step) != 1 and (narrow or not type_.signed):
            self._must_not_wrap(header, symbol, context, loop)
        elif (abs(step) == 1 and not always_true) or (type_.signed and not narrow):
            self.fact(inside, context.where(runs), loop)
        elif not self._setting.require(AssumptionCode.NO_WRAP, inside, context.where(runs), loop):
            raise refused(loop, "bound", "the loop's iterator may wrap around.")

    def _must_not_wrap(self, header: Header, symbol: str, context: Context, loop: Any) -> None:
        """From the last value within the bounds the next one, beyond them, must still be one of the type."""
        if not isinstance(header.first, Affine):
            raise refused(
                loop,
                "step",
                "the first value is the larger or smaller of two and the step is not one; "
                "give the loop a plain first value.",
            )
        after = Affine.of(symbol) + header.step
        leaves = negate(at_most_bound(after, header.last) if header.step > 0 else at_least_bound(after, header.last))
        inside = context.inside(symbol, header.binding, AllOf((header.constraint(symbol, header.first), leaves)))
        holds = AllOf((at_most(header.type.smallest, after), at_most(after, header.type.largest)))
        if not self._setting.require(AssumptionCode.NO_WRAP, holds, inside, loop):
            raise refused(loop, "bound", "the loop's iterator may wrap around.")

    def fact(self, formula: Formula, context: Context, loop: Any) -> None:
        """What must hold of the sizes for the loop to end, whenever it is reached."""
        knowledge = self._setting.knowledge
        condition = knowledge.exact_condition(
            Obligation(AssumptionCode.OTHER, formula, context.formula, context.loops, loop)
        )
        if condition is None:
            return
        if condition == AnyOf():
            raise refused(
                loop, "infinite-loop", "the loop never ends: its bound lies beyond what its iterator can hold."
            )
        if not self._setting.strict:
            knowledge.add_fact(condition)


def at_most_between(first: Bound, last: Bound, step: int) -> Formula:
    """Where the loop runs at all: ``first <= last`` upwards, ``last <= first`` downwards."""
    low, high = (first, last) if step > 0 else (last, first)
    if isinstance(low, Affine):
        return at_most_bound(low, high)
    if low.kind == "max":
        return AllOf(tuple(at_most_between(part, high, 1) for part in low.bounds))
    return AnyOf(tuple(at_most_between(part, high, 1) for part in low.bounds))
