"""Plans that set aside the order of updates: what is compared within a tolerance, and how wide it is."""

import json
import sys
from dataclasses import replace

import pytest
from trial_case import FAST, Case, case

from retile.library import OpenFile
from retile.trial import Settings, as_text, measure, read_result, verify_all, write_result
from retile.trial.tolerance import STEPS, WIDTHS, inexact_outputs

EPS = sys.float_info.epsilon
MEAN_DEPTH = """\
void mean_depth(int n, int m, double *mean, const double *restrict depth, int *soundings) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++) {
            mean[i] += depth[i * m + j] * 0.1;
            soundings[i] += depth[i * m + j] > 0.25;
        }
}
"""
BACKWARDS = ("int j = 0; j < m; j++", "int j = m - 1; j >= 0; j--")
ANYHOW = (("reassociate", "yes"),)


@pytest.fixture
def mean(tmp_path):
    return case(tmp_path, MEAN_DEPTH)


def swapped(found: Case, old: str, new: str, options=ANYHOW):
    """A variant whose plan may set the order aside."""
    variant = found.replaced(old, new, "i j")
    return replace(variant, plan=replace(variant.plan, text="i j; reassociate yes", options=options))


def test_sums_in_another_order_pass_only_if_that_was_asked_for(mean):
    found = mean.accepts(swapped(mean, *BACKWARDS))
    assert found.loose == ("mean",) and 0 < found.largest_difference < found.tolerance
    strict = mean.tells_apart(swapped(mean, *BACKWARDS, options=()))
    assert strict.difference.array == "mean" and strict.tolerance is None and strict.loose == ()


WRONG = {
    "a term that is left out": ("j = 0", "j = (i + 1) % 2"),
    "a term too much": ("j = 0", "j = -(i == 3 && m > 3)"),
    "a factor that is nearly right": ("0.1", "(0.1 + 1e-11)"),
    "an integer": ("> 0.25", "> 0.25 && i != 4"),
    "an infinite value": ("* 0.1", "/ (i == 4 && j == 2 ? 0 : 10.0)"),
}


@pytest.mark.parametrize("what", WRONG)
def test_wrong_sums_are_still_found(mean, what):
    found = mean.verify(swapped(mean, *WRONG[what]))
    assert not found.verified and found.difference is not None
    assert found.difference.array == ("soundings" if what == "an integer" else "mean")


def test_the_tolerance_stays_below_the_bound_of_the_books(mean):
    """Positive terms: any two orders of n terms lie at most 2 (n - 1) u times the sum apart, to first order, u = eps / 2
    (Higham, "Accuracy and Stability of Numerical Algorithms", 2002, section 4.2); products add one rounding each."""
    settings = replace(FAST, fills=(("depth", "positive"), ("mean", "positive")))
    found = mean.accepts(swapped(mean, *BACKWARDS), settings)
    terms = 1 + max(dict(sizes)["m"] for sizes in found.cases)
    between_orders = 2 * terms * EPS / 2
    assert STEPS * EPS < found.tolerance <= (2 * WIDTHS * 2 * between_orders) + STEPS * EPS
    assert found.largest_difference > 0


def test_differences_within_the_last_bits_of_float_are_wider(tmp_path):
    text = MEAN_DEPTH.replace("double", "float").replace("0.1", "0.1f")
    found = case(tmp_path, text)
    result = found.accepts(swapped(found, *BACKWARDS))
    assert 1e-7 < result.tolerance < 1e-4


CHAIN = """\
void chain(int n, double *total, double *scaled, double *apart, const double *d, int *count) {
    for (int i = 0; i < n; i++) {
        total[0] += d[i];
        scaled[i] = 2 * total[0];
        apart[i] = 2 * d[i];
        count[i] = (int)total[0];
    }
}
"""


def test_all_that_is_computed_from_a_sum_is_loose_but_integers(tmp_path):
    found = case(tmp_path, CHAIN)
    assert inexact_outputs(found.nest, swapped(found, "2 * d", "2 * d").plan) == ("scaled", "total")
    assert inexact_outputs(found.nest, swapped(found, "2 * d", "2 * d", ()).plan) == ()
    assert found.tells_apart(swapped(found, "2 * d[i]", "2 * d[i] * (1 + 0x1p-52)")).difference.array == "apart"


@pytest.mark.parametrize("statement", ["count[i] += d[i] > 0;", "a[i] = a[i + 1] * 0.5;", "bits[i] ^= 3u;"])
def test_without_inexact_updates_the_comparison_stays_bit_for_bit(tmp_path, statement):
    text = f"void f(int n, int *count, double *a, unsigned *bits, double *d) {{\n for (int i = 0; i < n; i++)\n {statement}\n}}\n"
    nest = OpenFile(_source(tmp_path, text)).nest(2)
    (found,) = verify_all(nest.source, nest.nest, [nest.rewrite("i; reassociate yes")], FAST)
    assert found.verified and found.tolerance is None and found.loose == ()


def _source(folder, text):
    return case(folder, text).source


def test_a_plan_that_only_reassociation_allows_is_measured_and_recorded(tmp_path):
    text = "double total(int n, int m, double d[n][m]) {\n    double s = 0;\n    for (int i = 0; i < n; i++)\n"
    text += "        for (int j = 0; j < m; j++)\n            s += d[i][j];\n    return s;\n}\n"
    nest = OpenFile(_source(tmp_path, text)).nest(3)
    variants = [nest.rewrite("j i; reassociate yes"), nest.rewrite("i:4 i j")]
    quick = Settings(sanitize=False, seconds=0.1, rounds=(3, 6))
    campaign = measure(nest.source, nest.nest, variants, {"n": 300, "m": 200}, quick)
    loose, strict = campaign.trials
    assert loose.verified and loose.options == "reassociate yes" and strict.verified and strict.identical
    assert loose.verification.loose == ("s",) and not loose.identical and "another order" in loose.cause
    document = json.loads(as_text(campaign))
    assert document["trials"][0]["tolerance"] == loose.verification.tolerance > 0
    assert document["trials"][1]["tolerance"] is None
    path = write_result(campaign, str(tmp_path / "result.json"))
    assert read_result(path).trials == campaign.trials
