"""What a campaign of trials found, as lines of text."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from ..values import dataclass
from .table import Column, Look, coloured, paragraph, table

if TYPE_CHECKING:
    from ..trial import Campaign, Trial
    from ..trial.statistics import Estimate

_COLUMNS = (Column("plan"), Column("time per call", right=True, whole=True), Column("95 % interval", right=True, whole=True),
            Column("times faster", right=True, whole=True), Column("95 % interval", right=True, whole=True),
            Column("verified", whole=True), Column("identical", whole=True), Column(""))
_INTERVALS = (2, 4)  # the columns that are left out where there is none
_NAMED = 4  # plans that a remark names; of more it says how many
_UNITS = ((1.0, "s"), (1e-3, "ms"), (1e-6, "us"), (1e-9, "ns"))


def campaign_lines(campaign: Campaign, look: Look) -> list[str]:
    """The table of a campaign, the best variant marked, and all that is to be said about it."""
    sizes = ", ".join(f"{name} = {value}" for name, value in campaign.sizes)
    version = campaign.compiler_version or campaign.compiler
    lines = [f"{campaign.address}" + (f" at {sizes}" if sizes else ""), f"{version}, {' '.join(campaign.flags)}", ""]
    from ..trial.statistics import Estimate, estimate

    baseline = estimate(campaign.baseline_samples) if campaign.baseline_samples else None
    clock = Scale.of([trial.seconds for trial in campaign.trials] + [baseline])
    rows: list[tuple[str, ...]] = [("the original", *clock.cells(baseline), *_RATIO.cells(Estimate(1, None, None)), "", "", "")]
    rows += [_row(trial, clock, trial is campaign.best) for trial in campaign.trials]
    best = next((number for number, trial in enumerate(campaign.trials, 1) if trial is campaign.best), None)
    shown = [at for at in range(len(_COLUMNS)) if at not in _INTERVALS or any(row[at] for row in rows)]
    lines += table([_COLUMNS[at] for at in shown], [[row[at] for at in shown] for row in rows], look, best=best)
    lines += ["", *paragraph("Times are medians. verified: built without contraction of floating-point "
                             "operations, all outputs are the same, bit for bit, at every size tried. identical: so "
                             "are those of the builds that were timed.", look)]
    lines += _loose(campaign, look)
    lines += _remarks(campaign, look)
    for note in campaign.notes:
        lines += paragraph(note, look, "Note: ", "      ")
    if campaign.interrupted:
        lines.append(coloured("Interrupted: this is what was measured until then.", "doubtful", look))
    return lines


def _loose(campaign: Campaign, look: Look) -> list[str]:
    """What a number under ``verified`` means."""
    checks = [trial.verification for trial in campaign.trials if trial.verification is not None]
    names = sorted({name for check in checks if check.tolerance is not None for name in check.loose})
    if not names:
        return []
    return paragraph(f"verified to a number: the updates of {', '.join(names)} run in another order, so they were compared "
                     "within a tolerance, at most this part of the largest value of their array; it follows from how far "
                     "results rounded downward and upward lie apart. All others are the same, bit for bit.", look)


def _row(trial: Trial, clock: Scale, is_best: bool) -> tuple[str, ...]:
    plan = trial.plan + (f"; {trial.options}" if trial.options else "")
    checked = "not asked" if trial.verification is None else "yes" if trial.verified else "NO"
    if trial.judged is False:
        checked = "NO"
    if trial.verified and trial.verification is not None and trial.verification.tolerance is not None:
        checked = f"to {trial.verification.tolerance:.1e}"
    identical = "" if trial.identical is None else "yes" if trial.identical else "no"
    times, ratios = clock.cells(trial.seconds), _RATIO.cells(trial.speedup)
    return plan, *times, *ratios, checked, identical, "best" if is_best else ""


@dataclass(frozen=True)
class Scale:
    """One unit and one number of decimals for a column, so that its numbers compare at a glance."""

    factor: float
    unit: str
    decimals: int

    @staticmethod
    def of(times: Iterable[Estimate | None]) -> Scale:
        """The unit in which the smallest median is at least 1, shown with three digits."""
        least = min((time.median for time in times if time is not None), default=1.0)
        factor, unit = next((pair for pair in _UNITS if least >= pair[0]), _UNITS[-1])
        return Scale(factor, " " + unit, sum(least / factor < limit for limit in (10, 100)))

    def cells(self, value: Estimate | None) -> tuple[str, str]:
        """The median and its interval, ``12.3 ms`` and ``12.1 to 12.6``; a dash if there is no median."""
        if value is None:
            return "-", ""
        low, high = value.low, value.high
        interval = "" if low is None or high is None else f"{self._number(low)} to {self._number(high)}"
        return self._number(value.median) + self.unit, interval

    def _number(self, number: float) -> str:
        return f"{number / self.factor:.{self.decimals}f}"


_RATIO = Scale(1.0, "", 2)


def _remarks(campaign: Campaign, look: Look) -> list[str]:
    """What went wrong with variants, or differs; the same of several is said once, with the first place of it."""
    plans: dict[str, list[Trial]] = {}
    places: dict[str, str] = {}
    for trial in campaign.trials:
        for text in _faults(trial):
            what, mark, place = text.partition("; first at ")
            places.setdefault(what, mark + place)
            plans.setdefault(what, []).append(trial)
    return [line for what, trials in plans.items()
            for line in paragraph(f"{_named(trials)}: {what}{places[what]}", look, "", "  ")]


def _named(trials: list[Trial]) -> str:
    """The plans that a remark is about."""
    if len(trials) <= _NAMED:
        return ", ".join(f'"{trial.plan}"' + _amount(trial) for trial in trials)
    return f"{len(trials)} variants" + _amount(max(trials, key=lambda trial: trial.largest_difference or 0.0))


def _faults(trial: Trial) -> list[str]:
    found = []
    verification = trial.verification
    if trial.finding is not None and trial.judged is False:
        found.append(f"NOT verified: it computes something else: {trial.finding['reason']}")
    if trial.finding is not None and trial.judged is None:
        found.append(f"not judged: {trial.finding['reason']}")
    if verification is not None and not verification.verified:
        reason = str(verification.difference) if verification.difference else verification.failure
        found.append(f"NOT verified: {reason or 'no reason was recorded'}")
    elif trial.failure and trial.judged is not False:
        found.append(f"not timed: {trial.failure}")
    if trial.identical is False:
        found.append("the timed build differs from the original's" + (f": {trial.cause}" if trial.cause else ""))
    return found


def _amount(trial: Trial) -> str:
    return "" if trial.largest_difference is None else f" (by up to {trial.largest_difference:.2g})"
