"""What a campaign of trials found, as lines of text."""

from __future__ import annotations

from typing import TYPE_CHECKING

from .table import Column, Look, coloured, paragraph, table

if TYPE_CHECKING:
    from ..trial import Campaign, Trial
    from ..trial.statistics import Estimate

_COLUMNS = (Column("plan"), Column("time per call", right=True), Column("times faster", right=True),
            Column("verified", whole=True), Column("identical", whole=True), Column(""))
_UNITS = ((1.0, "s"), (1e-3, "ms"), (1e-6, "us"), (1e-9, "ns"))


def campaign_lines(campaign: Campaign, look: Look) -> list[str]:
    """The table of a campaign, the best variant marked, and all that is to be said about it."""
    sizes = ", ".join(f"{name} = {value}" for name, value in campaign.sizes)
    version = campaign.compiler_version or campaign.compiler
    lines = [f"{campaign.address}" + (f" at {sizes}" if sizes else ""), f"{version}, {' '.join(campaign.flags)}", ""]
    from ..trial.statistics import estimate

    baseline = estimate(campaign.baseline_samples) if campaign.baseline_samples else None
    rows: list[tuple[str, ...]] = [("the original", duration(baseline), "1", "", "", "")]
    rows += [_row(trial, trial is campaign.best) for trial in campaign.trials]
    best = next((number for number, trial in enumerate(campaign.trials, 1) if trial is campaign.best), None)
    lines += table(_COLUMNS, rows, look, best=best)
    lines += ["", *paragraph("Medians with their 95 % intervals. verified: built without contraction of floating-point "
                             "operations, all outputs are the same, bit for bit, at every size tried. identical: so are "
                             "those of the builds that were timed.", look)]
    for trial in campaign.trials:
        lines += _remarks(trial, look)
    for note in campaign.notes:
        lines += paragraph(note, look, "Note: ", "      ")
    if campaign.interrupted:
        lines.append(coloured("Interrupted: this is what was measured until then.", "doubtful", look))
    return lines


def _row(trial: Trial, is_best: bool) -> tuple[str, ...]:
    plan = trial.plan + (f"; {trial.options}" if trial.options else "")
    checked = "not asked" if trial.verification is None else _yes(trial.verified)
    identical = "" if trial.identical is None else _yes(trial.identical)
    return plan, duration(trial.seconds), ratio(trial.speedup), checked, identical, "best" if is_best else ""


def _yes(answer: bool) -> str:
    return "yes" if answer else "NO"


def duration(time: Estimate | None) -> str:
    """Seconds with a fitting unit: ``12.3 ms [12.1, 12.6]``; a dash if there is none."""
    if time is None:
        return "-"
    factor, unit = next((pair for pair in _UNITS if time.median >= pair[0]), _UNITS[-1])
    return f"{time.median / factor:.3g} {unit}" + _interval(time, factor)


def ratio(times: Estimate | None) -> str:
    """A ratio: ``3.21 [3.1, 3.4]``; a dash if there is none."""
    return "-" if times is None else f"{times.median:.3g}" + _interval(times, 1.0)


def _interval(value: Estimate, factor: float) -> str:
    if value.low is None or value.high is None:
        return ""
    return f" [{value.low / factor:.3g}, {value.high / factor:.3g}]"


def _remarks(trial: Trial, look: Look) -> list[str]:
    """What went wrong with a variant, or differs."""
    found = []
    verification = trial.verification
    if verification is not None and not verification.verified:
        reason = str(verification.difference) if verification.difference else verification.failure
        found.append(f"it is NOT verified: {reason or 'no reason was recorded'}")
    if trial.failure:
        found.append(f"it was not timed: {trial.failure}")
    if trial.identical is False:
        amount = f" by up to {trial.largest_difference:g}" if trial.largest_difference is not None else ""
        found.append(f"the timed builds differ{amount}" + (f": {trial.cause}" if trial.cause else ""))
    return [line for text in found for line in paragraph(f'"{trial.plan}": {text}', look, "", "  ")]
