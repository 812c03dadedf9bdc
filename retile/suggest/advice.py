"""What is worth trying on a nest, or why it is best left as it is."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from ..dependence import Dependences
from ..host import Host
from ..model import Judgement, Nest, Plan, RetileError, Verdict
from ..plan import is_legal, judge, parse_plan
from ..plan.alignment import MOST_TRIALS
from ..values import replace
from . import leave
from .blocks import blocks
from .grids import skewed, wavefronts
from .idea import Advice, Idea, Suggestion
from .machine import Machine
from .orders import chunked, jammed, orders
from .transposed import transposed
from .view import View, view_of

MOST = 10
_PER_FAMILY = {"register block": 5, "transposition": 2, "few rows": 4, "unroll and jam": 3, "order": 2, "chunks": 3}
_FEW = 2
_MISSED = 2  # plans with options of a family without a legal one, after which its others are not asked
_ASKED = 30  # ideas whose legality is asked at most
# How long places for statements outside a loop are looked for while an order is judged: most orders need none.
_PLACES = 4


def suggest(nest: Nest, dependences: Dependences, host: Host, sizes: Mapping[str, int] | None = None,
            most: int = MOST) -> Advice:
    """Legal plans worth a trial on a host, the most promising first; or the reason to leave the nest alone.

    ``sizes`` by name, as far as they are known; they only rank.  Every plan is judged ``legal`` for all sizes.
    """
    machine = Machine.of(host)
    view = view_of(nest, dependences, machine, sizes or {})
    reason = leave.before(view)
    if reason is None:
        court = Court(nest, dependences)
        found = tuple(_chosen(court, sorted(ideas(view, court.allows), key=lambda idea: -idea.worth), most))
        return Advice(found, None if found else leave.after(view), _assumed(view))
    return Advice((), reason, _assumed(view))


def ideas(view: View, legal: leave.Legal) -> Iterator[Idea]:
    """All ideas, in no order."""
    yield from blocks(view)
    yield from skewed(view, legal)
    yield from wavefronts(view)
    yield from transposed(view)
    yield from orders(view)
    yield from jammed(view)
    yield from chunked(view)


class Court:
    """The verdict about plans by their text, each asked once."""

    def __init__(self, nest: Nest, dependences: Dependences) -> None:
        self._nest, self._dependences = nest, dependences
        self._known: dict[str, Plan | None] = {}
        self._orders: dict[str, bool] = {}

    def allows(self, text: str) -> bool:
        """True if the plan is legal, with other places for statements too."""
        return self.plan(text, MOST_TRIALS) is not None

    def plan(self, text: str, trials: int = _PLACES) -> Plan | None:
        """The plan of a text if it is legal; None if it is not, or is no plan for the nest.

        ``trials`` limits the search for other places of statements outside a loop.
        """
        if text not in self._known:
            self._known[text] = self._judged(text, trials)
        return self._known[text]

    def _judged(self, text: str, trials: int) -> Plan | None:
        try:
            plan = parse_plan(text, self._nest)
        except RetileError:
            return None
        if not plan.buffers:
            return plan if is_legal(self._nest, self._dependences, plan, trials) else None
        order = plan.order_text
        if order not in self._orders:  # the order decides for most, and is asked sooner
            bare = replace(plan, text=order, options=(), buffers=(), unrolled=())
            self._orders[order] = is_legal(self._nest, self._dependences, bare, 0)
        judgement: Judgement | None = judge(self._nest, self._dependences, plan) if self._orders[order] else None
        return plan if judgement is not None and judgement.verdict is Verdict.LEGAL else None


def _chosen(court: Court, several: Iterable[Idea], most: int) -> Iterator[Suggestion]:
    """The first legal ones, not too many of a family."""
    seen: set[str] = set()
    taken: dict[str, int] = {}
    missed: dict[str, int] = {}
    asked = 0
    for idea in several:
        family = idea.relatives
        hopeless = not taken.get(family) and missed.get(family, 0) >= _MISSED and ";" in idea.text
        if idea.text in seen or hopeless or taken.get(family, 0) >= _PER_FAMILY.get(family, _FEW):
            continue
        seen.add(idea.text)
        plan = court.plan(idea.text, MOST_TRIALS if idea.kind == "time skewing" else _PLACES)
        asked += 1
        if plan is None:
            missed[family] = missed.get(family, 0) + 1
        else:
            taken[family] = taken.get(family, 0) + 1
            yield Suggestion(plan, idea.kind, idea.why)
        if asked >= _ASKED or sum(taken.values()) >= most:
            return


def _assumed(view: View) -> tuple[str, ...]:
    found = [] if view.assumed is None else [f"sizes that are not given count as {view.assumed}"]
    found += [f"the {what} of this machine are not known and were guessed" for what in view.machine.guessed]
    return tuple(found)
