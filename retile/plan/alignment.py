"""Values for loops that are not there: where a statement outside a loop stands among the loop's iterations.

A statement outside a named loop stands before the loop's first value or after its last, as the text has it.  That is
often too early or too late: in a factorisation whose columns ``j`` are chunked outermost, the statement that scales
column ``k`` must wait until the chunks before it are done.  It then stands at ``j = k``.

Such values are looked for among forms of the statement's own iterators, near the loop's bounds, one after the other as
long as fewer dependences are reversed.  What is found is judged like any other plan; nothing rests on the search.
(Affine schedules per statement: Feautrier, "Some efficient solutions to the affine scheduling problem", 1992.)
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace

from ..affine import Affine, bound_names
from ..model import Alignment, Nest, Plan, Statement
from .schedule import placed

# Plans that are judged in one search; every step tries each candidate of each open slot once.
_MOST_TRIALS = 200

Cost = Callable[[Plan], tuple[int, frozenset[str]]]


def settled(plan: Plan, nest: Nest, cost: Cost) -> Plan | None:
    """The plan with values for missing loops under which it reverses nothing; None if none were found.

    ``cost`` gives the number of reversed edges of a placed plan and the statements at their ends.
    """
    current, trials = plan, 0
    wrong, ends = cost(current)
    while wrong:
        best: tuple[int, frozenset[str], Plan] | None = None
        for new in _candidates(current, nest, ends):
            trials += 1
            if trials > _MOST_TRIALS:
                return None
            aligned = (*(a for a in current.aligned if (a.statement, a.loop) != (new.statement, new.loop)), new)
            trial = placed(replace(current, aligned=aligned), nest)
            count, trial_ends = cost(trial)
            if count < (best[0] if best else wrong):
                best = count, trial_ends, trial
            if count == 0:
                break
        if best is None:
            return None
        wrong, ends, current = best
    return current


def _candidates(plan: Plan, nest: Nest, ends: frozenset[str]) -> Iterator[Alignment]:
    chunked = {loop for term in plan.terms if term.chunk is not None for loop, _ in term.form}
    for statement in nest.statements:
        for loop in plan.moved if statement.id in ends else ():
            if loop not in statement.loops:
                for value in _values(statement, loop, nest):
                    for chunks_only in (True, False) if loop in chunked else (False,):
                        candidate = Alignment(statement.id, loop, value, chunks_only)
                        if candidate not in plan.aligned:
                            yield candidate


def _values(statement: Statement, id: str, nest: Nest) -> Iterator[Affine]:
    """Forms of the statement's iterators that lie at or next to the loop's bounds."""
    loop = nest.loop(id)
    known = {*statement.loops, *(parameter.symbol for parameter in nest.parameters)}
    seen: set[Affine] = set()
    near = [Affine.of(name) + shift for name in reversed(statement.loops) for shift in (0, 1, -1, 2)]
    for bound in (loop.first, loop.last):
        if isinstance(bound, Affine) and bound_names(bound) <= known:
            near += [bound - loop.step, bound, bound + loop.step]
    for value in near:
        if value not in seen:
            seen.add(value)
            yield value
