"""Medians and their intervals, against published ranks and a general-purpose library."""

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import binom

from retile.trial.statistics import estimate, median, ranks, speedup


@pytest.mark.parametrize(
    "count, expected",
    [(5, None), (6, (1, 6)), (8, (1, 8)), (10, (2, 9)), (20, (6, 15)), (31, (10, 22)), (50, (18, 33))],
)
def test_ranks_of_the_published_table(count, expected):
    """Le Boudec, 2010, table A.1 (quoted from memory; the coverage is checked below without it)."""
    assert ranks(count) == expected


@given(st.integers(1, 2500))
def test_coverage_is_enough_and_no_narrower_pair_is(count):
    """Coverage by the binomial distribution function of scipy."""
    pair = ranks(count)
    if pair is None:
        assert 1 - 2 * binom.cdf(0, count, 0.5) < 0.95
        return
    low, high = pair
    assert low + high == count + 1
    assert binom.cdf(high - 1, count, 0.5) - binom.cdf(low - 1, count, 0.5) >= 0.95 - 1e-12
    if low + 1 <= count // 2:
        assert binom.cdf(high - 2, count, 0.5) - binom.cdf(low, count, 0.5) < 0.95


def test_the_interval_covers_the_true_median_in_practice():
    generator = random.Random(5)
    hits = 0
    for _ in range(1000):
        found = estimate([generator.expovariate(1.0) for _ in range(15)])
        hits += found.low <= 0.6931471805599453 <= found.high  # median of the unit exponential is ln 2
    assert hits >= 940


def test_median_of_even_and_odd_counts():
    assert median([3, 1, 2]) == 2
    assert median([4, 1, 2, 3]) == 2.5
    with pytest.raises(ValueError):
        median([])


def test_too_few_samples_have_no_interval():
    assert estimate([2.0, 1.0]).as_json() == {"median": 1.5, "low": None, "high": None}


def test_speedup_pairs_the_rounds():
    """A load that doubles both timings of some rounds leaves the ratio as it is."""
    load = [1, 2, 1, 2, 1, 2, 1, 2]
    found = speedup([6.0 * x for x in load], [2.0 * x for x in load])
    assert (found.median, found.low, found.high) == (3, 3, 3)
    with pytest.raises(ValueError):
        speedup([1.0], [1.0, 2.0])
