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


def _row(trial: Trial, is_best: bool) -> tuple[str, ...]:
    plan = trial.plan + (f"; {trial.options}" if trial.options else "")
    checked = "not asked" if trial.verification is None else "yes" if trial.verified else "NO"
    if trial.verified and trial.verification is not None and trial.verification.tolerance is not None:
        checked = f"to {trial.verification.tolerance:.1e}"
    identical = "" if trial.identical is None else "yes" if trial.identical else "no"
    return plan, duration(trial.seconds), ratio(trial.speedup), checked, identical, "best" if is_best else ""


def duration(time: Estimate | None) -> str:
    """Seconds with a fitting unit: ``12.3 ms [12.1, 12.6]``; a dash if there is none."""
    if time is None:
        return "-"
    factor, unit = next((pair for pair in _UNITS if time.median >= pair[0]), _UNITS[-1])
    return f"{_digits(time.median / factor)} {unit}" + _interval(time, factor)


def ratio(times: Estimate | None) -> str:
    """A ratio: ``3.21 [3.1, 3.4]``; a dash if there is none."""
    return "-" if times is None else _digits(times.median) + _interval(times, 1.0)


def _digits(number: float) -> str:
    """Three digits, or all those before the point."""
    return f"{number:.0f}" if number >= 1000 else f"{number:.3g}"


def _interval(value: Estimate, factor: float) -> str:
    if value.low is None or value.high is None:
        return ""
    return f" [{_digits(value.low / factor)}, {_digits(value.high / factor)}]"


def _remarks(campaign: Campaign, look: Look) -> list[str]:
    """What went wrong with variants, or differs; the same of several is said once."""
    plans: dict[str, list[str]] = {}
    for trial in campaign.trials:
        for text in _faults(trial):
            plans.setdefault(text, []).append(f'"{trial.plan}"')
    return [line for text, names in plans.items() for line in paragraph(f"{', '.join(names)}: {text}", look, "", "  ")]


def _faults(trial: Trial) -> list[str]:
    found = []
    verification = trial.verification
    if verification is not None and not verification.verified:
        reason = str(verification.difference) if verification.difference else verification.failure
        found.append(f"NOT verified: {reason or 'no reason was recorded'}")
    elif trial.failure:
        found.append(f"not timed: {trial.failure}")
    if trial.identical is False:
        amount = f" by up to {trial.largest_difference:.3g}" if trial.largest_difference is not None else ""
        found.append(f"the timed builds differ{amount}" + (f": {trial.cause}" if trial.cause else ""))
    return found
