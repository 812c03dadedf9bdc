"""A search in two rounds: all first plans briefly, then the fastest again beside plans near it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from ..model import Plan
from .records import Campaign, Settings, Trial

_FIRST = 0.4  # of the time, for the first round
# Where a round of all kernels takes long, so many samples of each must do in the first round.
_FEW = 2


def in_rounds(plans: Sequence[Plan], settings: Settings, most: int,
              further: Callable[[str, set[str], int], list[Plan]],
              measure: Callable[[Sequence[Plan], Settings], Campaign]) -> Campaign:
    """Measure plans, then those that ``further`` gives for the text of the fastest, the texts tried and the room left.

    The campaign is that of the second round, with the trials of the first before its own; the fastest of the first
    counts as measured in the second.  Interrupted in the first, or if the original was fastest, there is no second.
    """
    brief = replace(settings, seconds=settings.seconds * _FIRST, rounds=(settings.least_rounds, settings.rounds[1]),
                    least_rounds=_FEW)
    first = measure(plans, brief)
    best = first.best
    if first.interrupted or best is None or best.speedup is None or best.speedup.median <= 1:
        return first
    tried = {plan.text for plan in plans}
    more = further(text_of(best), tried, most - len(plans))
    if not more:
        return first
    again = next(plan for plan in plans if plan.text == text_of(best))
    second = measure([again, *more], replace(settings, seconds=settings.seconds * (1 - _FIRST)))
    if not second.trials or not second.trials[0].samples:
        return replace(first, interrupted=second.interrupted)
    before = tuple(trial for trial in first.trials if trial is not best)
    note = (f"{len(plans)} suggested plans were tried first, then {len(more)} near the fastest of them, which was "
            f"\"{text_of(best)}\"")
    notes = tuple(dict.fromkeys((*first.notes, *second.notes, note)))
    return replace(second, trials=(*before, *second.trials), notes=notes)


def text_of(trial: Trial) -> str:
    """The plan of a trial as it is typed."""
    return trial.plan + (f"; {trial.options}" if trial.options else "")
