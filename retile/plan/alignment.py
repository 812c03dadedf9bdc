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

from ..affine import Affine, bound_names
from ..dependence import Edge
from ..model import Alignment, Nest, Plan, Statement
from ..values import replace
from .schedule import placed

# Plans that are judged in one search; every step tries each candidate of each open slot once.
MOST_TRIALS = 150

# With many edges a trial costs more, and fewer are made.
_MOST_EDGES = 2000

# Those of some edges that a placed plan reverses.
Judged = Callable[[Plan, tuple[Edge, ...]], tuple[Edge, ...]]


def settled(plan: Plan, nest: Nest, edges: tuple[Edge, ...], wrong: tuple[Edge, ...], judged: Judged,
            trials: int) -> Plan | None:
    """The plan with values for missing loops under which it reverses none of the edges; None if none were found.

    ``wrong``: those that it reverses as it stands.  A trial moves one statement, so only edges at it are judged again.
    """
    trials = min(trials, _MOST_EDGES // max(1, len(edges)))
    stated = {(a.statement, a.loop) for a in plan.aligned}
    while wrong:
        best: tuple[Plan, tuple[Edge, ...]] | None = None
        for new in _candidates(plan, nest, wrong):
            if (new.statement, new.loop) in stated:
                continue
            trials -= 1
            if trials < 0:
                return None
            trial = placed(replace(plan, aligned=(*_others(plan, new), new)), nest)
            still = tuple(edge for edge in wrong if not _at(edge, new.statement))
            still += judged(trial, tuple(edge for edge in edges if _at(edge, new.statement)))
            if len(still) < len(best[1] if best else wrong):
                best = trial, still
            if not still:
                break
        if best is None:
            return None
        plan, wrong = best
    return plan


def _at(edge: Edge, statement: str) -> bool:
    return statement in (edge.source, edge.target)


def _others(plan: Plan, new: Alignment) -> tuple[Alignment, ...]:
    return tuple(a for a in plan.aligned if (a.statement, a.loop) != (new.statement, new.loop))


def _candidates(plan: Plan, nest: Nest, wrong: tuple[Edge, ...]) -> Iterator[Alignment]:
    ends = {end for edge in wrong for end in (edge.source, edge.target)}
    chunked = {loop for term in plan.terms if term.chunk is not None for loop, _ in term.form}
    for statement in nest.statements:
        for loop in plan.moved if statement.id in ends else ():
            if loop not in statement.loops:
                for value in _values(statement, loop, nest, plan.moved):
                    for chunks_only in (True, False) if loop in chunked else (False,):
                        candidate = Alignment(statement.id, loop, value, chunks_only)
                        if candidate not in plan.aligned:
                            yield candidate


def _values(statement: Statement, id: str, nest: Nest, moved: tuple[str, ...]) -> Iterator[Affine]:
    """Forms of the statement's iterators that lie at or next to the loop's bounds.

    Loops that the plan does not move run inside the statement's piece of text: one piece stands at one value.
    """
    loop = nest.loop(id)
    known = {*(name for name in statement.loops if name in moved), *(parameter.symbol for parameter in nest.parameters)}
    seen: set[Affine] = set()
    near = [Affine.of(name) + shift for name in reversed(statement.loops) if name in moved for shift in (0, 1, -1)]
    for bound in (loop.first, loop.last):
        if isinstance(bound, Affine) and bound_names(bound) <= known:
            near += [bound - loop.step, bound, bound + loop.step]
    for value in near:
        if value not in seen:
            seen.add(value)
            yield value
