"""The iterators' values after the nest, where somebody can see them.

An iterator declared before the nest ends with the value that its loop's last execution in the original left behind:
the first value beyond its bound, or its first value if it made no round; if the loops around it made none, with the
value that it had before.  The variant runs the loops in another order, so that value is set anew.  For loops whose
bounds depend on each other the original headers run once more, empty.
"""

from __future__ import annotations


from ..affine import Affine, Constraint, less
from ..model import LoopText, Nest
from ..values import dataclass
from .expression import (
    CHOICE,
    Expression,
    NoRoom,
    Scope,
    comparison,
    converted,
    express,
    promoted,
    same_values,
)
from .layout import NestText
from .names import Names
from .style import Style


@dataclass(frozen=True)
class Restored:
    """Lines ahead of the variant's loops, which remember values, and lines behind them, which set them."""

    ahead: list[str]
    behind: list[str]


def restored(nest: Nest, layout: NestText, style: Style, scope: Scope, names: Names, indent: str) -> Restored:
    """What keeps the iterators right that are looked at after the nest; no condition stands around their loops."""
    found = Restored([], [])
    for loop in nest.loops:
        if loop.iterator_live_after and not loop.declared_in_for:
            _restore(loop, nest, layout, style, scope, names, indent, found)
    return found


def _restore(loop: LoopText, nest: Nest, layout: NestText, style: Style, scope: Scope, names: Names, indent: str,
             found: Restored) -> None:
    chain = [nest.loop(id) for id in (*loop.outer, loop.id)]
    try:
        tests, value = _computed(loop, chain[:-1], scope)
    except NoRoom:
        found.behind.extend(_run_again(loop, chain, layout, style, names, indent, found))
        return
    line = f"{loop.iterator} = {value.text};"
    if not tests:
        found.behind.append(indent + line)
        return
    before = _remembered(loop, names, indent, found)
    found.behind.extend([f"{indent}if ({' && '.join(tests)})", f"{indent}{style.step}{line}",
                         f"{indent}else", f"{indent}{style.step}{loop.iterator} = {before};"])


def _remembered(loop: LoopText, names: Names, indent: str, found: Restored) -> str:
    """The name of a constant with the iterator's value before the nest."""
    name = names.fresh(f"{loop.iterator}_before")
    found.ahead.append(f"{indent}const {loop.type.spelling} {name} = {loop.iterator};")
    return name


def _computed(loop: LoopText, outer: list[LoopText], scope: Scope) -> tuple[list[str], Expression]:
    """The conditions that the loops around made a round, and the value then; NoRoom if they depend on each other."""
    tests = []
    for one in (*outer, loop):
        if not one.independent or not isinstance(one.first, Affine) or not isinstance(one.last, Affine):
            raise NoRoom(one.id)
    for one in outer:
        if not scope.implies(_runs(one)):
            tests.append(_runs_text(one, scope))
        scope = scope.knowing(_runs(one))
    return tests, _exit_value(loop, scope)


def _runs(loop: LoopText) -> Constraint:
    """The loop makes at least one round."""
    assert isinstance(loop.first, Affine) and isinstance(loop.last, Affine)
    return less(loop.first, loop.last + 1) if loop.step > 0 else less(loop.last, loop.first + 1)


def _runs_text(loop: LoopText, scope: Scope) -> str:
    assert isinstance(loop.first, Affine) and isinstance(loop.last, Affine)
    if loop.step > 0:
        return comparison(loop.first, "<", loop.last + 1, scope).text
    return comparison(loop.first, ">", loop.last - 1, scope).text if loop.relation != "-->" else \
        comparison(loop.first + 1, ">", loop.last, scope).text


def _exit_value(loop: LoopText, scope: Scope) -> Expression:
    """The first value on the loop's grid beyond its last one; the first value if there is no round."""
    assert isinstance(loop.first, Affine) and isinstance(loop.last, Affine)
    stride, upward = abs(loop.step), loop.step > 0
    distance = loop.last - loop.first if upward else loop.first - loop.last
    rounds = distance.floor_div(stride) + 1
    end = loop.first + rounds * loop.step
    runs = _runs(loop)
    if loop.relation == "-->" and not scope.knowing(runs).fits(end, loop.type):
        end = end + (1 << loop.type.bits)  # unsigned: one below 0 is the largest value
    beyond = _of_type(end, loop, scope.knowing(runs))
    if scope.implies(runs) or end == loop.first:
        return beyond
    first = _of_type(loop.first, loop, scope)
    return Expression(f"{_runs_text(loop, scope)} ? {beyond.at(CHOICE)} : {first.at(CHOICE)}", loop.type, CHOICE)


def _of_type(form: Affine, loop: LoopText, scope: Scope) -> Expression:
    value = express(form, scope)
    return value if same_values(promoted(value.type), promoted(loop.type)) else converted(value, loop.type)


def _run_again(loop: LoopText, chain: list[LoopText], layout: NestText, style: Style, names: Names, indent: str,
               found: Restored) -> list[str]:
    """The loops around and the loop itself with their own headers, doing nothing."""
    lines = [f"{indent}{loop.iterator} = {_remembered(loop, names, indent, found)};"] if len(chain) > 1 else []
    for depth, one in enumerate(chain):
        lines.append(indent + style.step * depth + layout.text[one.header.start:one.header.end])
    return [*lines, indent + style.step * len(chain) + ";"]
