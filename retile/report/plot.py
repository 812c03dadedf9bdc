"""A picture of a measurement: how many times faster each variant ran, round by round.

Drawn with matplotlib, which comes with the extra ``report``; nothing else of the program needs it.
"""

from __future__ import annotations

import io
from pathlib import Path
from typing import TYPE_CHECKING

from ..model import RetileError

if TYPE_CHECKING:
    from ..trial import Campaign

_SUFFIXES = (".svg", ".png", ".pdf")


def check_plot_name(path: str) -> None:
    """RetileError if no picture can be written under this name, or if there is nothing to draw with."""
    if Path(path).suffix.lower() not in _SUFFIXES:
        raise RetileError(f"--plot {path}: a picture of a measurement is written as {', '.join(_SUFFIXES)}; "
                          "give a name that ends so.")
    try:
        import matplotlib  # noqa: F401
    except ImportError:
        raise RetileError("--plot needs matplotlib, which is not installed here; pip install 'retile[report]' "
                          "brings it.") from None


def speedup_plot(campaign: Campaign, suffix: str) -> bytes:
    """The picture as a file of the kind that ``suffix`` names (``.svg``, ``.png`` or ``.pdf``).

    One row per timed variant: a dot for the paired ratio of every round (baseline seconds over variant seconds), a bar for
    the median with its 95 % interval, and a line at 1, where the variant is as fast as the original.
    """
    from matplotlib import rc_context
    from matplotlib.figure import Figure

    from ..trial.statistics import speedup

    timed = [trial for trial in campaign.trials if trial.samples]
    found = [speedup(trial.baseline_samples, trial.samples) for trial in timed]
    figure = Figure(figsize=(8, 1.4 + 0.45 * max(1, len(timed))), layout="constrained")
    axes = figure.add_subplot()
    for row, trial in enumerate(timed):
        rounds = min(len(trial.samples), len(trial.baseline_samples))
        ratios = [trial.baseline_samples[at] / trial.samples[at] for at in range(rounds)]
        axes.plot(ratios, [row] * rounds, "o", markersize=3, color="0.65", zorder=1)
        axes.plot([found[row].median], [row], "|", markersize=16, markeredgewidth=2, color="0.1", zorder=2)
        low, high = found[row].low, found[row].high
        if low is not None and high is not None:
            axes.plot([low, high], [row, row], linewidth=2, color="0.1", zorder=2)
    axes.axvline(1, linestyle=":", color="0.4")
    axes.set_yticks(range(len(timed)), [f"{t.plan}; {t.options}" if t.options else t.plan for t in timed])
    axes.set_ylim(max(1, len(timed)) - 0.5, -0.5)
    # A round that the machine disturbed must not squeeze all others into a corner.
    reach = 1.6 * max([1.0, *(one.high or one.median for one in found)])
    hidden = any(a / b > reach for t in timed for a, b in zip(t.baseline_samples, t.samples, strict=False))
    axes.set_xlim(0, reach)
    axes.set_xlabel("times faster than the original: every round, median and its 95 % interval"
                    + ("; some rounds lie further right" if hidden else ""))
    sizes = ", ".join(f"{name} = {value}" for name, value in campaign.sizes)
    axes.set_title(f"{campaign.address} at {sizes}" if sizes else campaign.address, loc="left", fontsize=10)
    written = io.BytesIO()
    with rc_context({"svg.fonttype": "none"}):  # text stays text: it can be searched and read aloud
        figure.savefig(written, format=suffix.removeprefix("."), dpi=150)
    return written.getvalue()
