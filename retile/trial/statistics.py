"""Medians of repeated timings, with an interval that assumes nothing about their distribution.

The interval runs between two order statistics whose coverage follows from the binomial distribution alone
(Le Boudec, "Performance Evaluation of Computer and Communication Systems", 2010, section 2.2): of n independent samples
the j-th smallest lies above the true median exactly when fewer than j samples lie below it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import comb

CONFIDENCE = 0.95


@dataclass(frozen=True)
class Estimate:
    """A median and its 95 % interval; low and high are None where there are too few samples for one (under 6)."""

    median: float
    low: float | None
    high: float | None

    def as_json(self) -> dict[str, float | None]:
        """The three numbers by name."""
        return {"median": self.median, "low": self.low, "high": self.high}


def ranks(count: int, confidence: float = CONFIDENCE) -> tuple[int, int] | None:
    """The ranks (from 1) of the two order statistics that enclose the median; None if no pair reaches the confidence.

    >>> ranks(6), ranks(10), ranks(5)
    ((1, 6), (2, 9), None)
    """
    below, chosen = 0, 0
    most = (1 - Fraction(str(confidence))) * 2**count  # thousands of samples are too many for a float
    for rank in range(1, count // 2 + 1):
        below += comb(count, rank - 1)  # outcomes with fewer than `rank` samples under the median
        if 2 * below > most:
            break
        chosen = rank
    return (chosen, count + 1 - chosen) if chosen else None


def median(samples: Sequence[float]) -> float:
    """The middle sample, or the mean of the two in the middle; ValueError without samples."""
    if not samples:
        raise ValueError("no samples")
    ordered = sorted(samples)
    half = len(ordered) // 2
    return ordered[half] if len(ordered) % 2 else (ordered[half - 1] + ordered[half]) / 2


def estimate(samples: Sequence[float]) -> Estimate:
    """The median of the samples and its interval; ValueError without samples."""
    ordered = sorted(samples)
    pair = ranks(len(ordered))
    low, high = (ordered[pair[0] - 1], ordered[pair[1] - 1]) if pair else (None, None)
    return Estimate(median(ordered), low, high)


def speedup(baseline: Sequence[float], variant: Sequence[float]) -> Estimate:
    """How many times faster the variant is, from the ratios of the two timings of each round.

    Pairing cancels what changes slowly (clock rate, other load), because both timings of a round share it.
    """
    return estimate([before / after for before, after in zip(baseline, variant, strict=True)])
