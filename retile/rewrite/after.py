"""The iterators' values after the nest, where somebody can see them.

An iterator declared before the nest ends with the value that its loop's last execution in the original left behind:
the first value beyond its bound, or its first value if it made no round.  The variant runs the loops in another order,
so that value is set anew.  For loops whose bounds depend on each other the original headers run once more, empty.
"""

from __future__ import annotations

from ..affine import Affine, Constraint, less
from ..model import LoopText, Nest, RetileError
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
from .style import Style


def restored(nest: Nest, layout: NestText, style: Style, scope: Scope, indent: str) -> list[str]:
    """The lines that set the iterators that are looked at after the nest; none if there are none."""
    lines: list[str] = []
    for loop in nest.loops:
        if loop.iterator_live_after and not loop.declared_in_for:
            if _behind_data(loop, nest):
                raise RetileError(f"{nest.address}: '{loop.iterator}' is used after the nest, and whether its loop in line "
                                  f"{loop.span.line} runs depends on data.\nDeclare it in the 'for', or set it after the "
                                  "nest yourself.")
            lines += _restored(loop, nest, layout, style, scope, indent)
    return lines


def _behind_data(loop: LoopText, nest: Nest) -> bool:
    """True if a condition stands between the nest's loops around this one."""
    from ..tree import Guard, Loop, Node

    def found(nodes: tuple[Node, ...], guarded: bool) -> bool:
        for node in nodes:
            if isinstance(node, Loop) and (node.of == loop.id and guarded or found(node.body, guarded)):
                return True
            if isinstance(node, Guard) and found(node.body, True):
                return True
        return False

    return found(nest.tree, False)


def _restored(loop: LoopText, nest: Nest, layout: NestText, style: Style, scope: Scope, indent: str) -> list[str]:
    chain = [nest.loop(id) for id in (*loop.outer, loop.id)]
    ids = {one.id for one in chain}
    if all(isinstance(bound, Affine) and not bound.names() & ids for one in chain for bound in (one.first, one.last)):
        try:
            return _computed(loop, chain[:-1], style, scope, indent)
        except NoRoom:
            pass
    return _run_again(chain, layout, style, indent)


def _computed(loop: LoopText, outer: list[LoopText], style: Style, scope: Scope, indent: str) -> list[str]:
    """``j = m > 0 ? m : 0;``, under the condition that the loops around made a round."""
    tests = []
    for one in outer:
        if not scope.implies(_runs(one)):
            tests.append(_runs_text(one, scope))
        scope = scope.knowing(_runs(one))
    value = _exit_value(loop, scope)
    line = f"{loop.iterator} = {value.text};"
    if not tests:
        return [indent + line]
    return [f"{indent}if ({' && '.join(tests)})", f"{indent}{style.step}{line}"]


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


def _run_again(chain: list[LoopText], layout: NestText, style: Style, indent: str) -> list[str]:
    """The loops around and the loop itself with their own headers, doing nothing."""
    lines = []
    for depth, loop in enumerate(chain):
        header = layout.text[loop.header.start:loop.header.end]
        lines.append(indent + style.step * depth + header)
    return [*lines, indent + style.step * len(chain) + ";"]
