"""The table of a campaign as its reader sees it."""

import pytest

from retile.report.table import Look
from retile.report.trials import Scale, campaign_lines
from retile.trial import Campaign, Estimate, Trial, Verification

SAME = Verification(True, ((("n", 7),),), True, "random")
LOOSE = Verification(True, ((("n", 7),),), True, "random", loose=("total",), tolerance=2.5e-14, largest_difference=1e-16)
CONTRACTED = "without contraction both leave the same bytes"


def campaign(*trials: Trial, rounds: int = 6) -> Campaign:
    return Campaign("survey.c:3", {}, (("n", 1000),), (1.25,) * rounds, trials, "cc", "cc 1.0", ("-O3",), 1, (), "random",
                    "", "2030-01-01T00:00:00Z")


def trial(plan: str, seconds: float, rounds: int = 6, check: Verification = SAME, **more) -> Trial:
    return Trial(plan, more.pop("options", ""), check, (seconds,) * rounds, (1.25,) * rounds, **more)


def test_numbers_share_a_unit_and_stand_under_each_other():
    lines = campaign_lines(campaign(trial("i k j", 0.25, identical=True), trial("j i", 0.0125, identical=True)), Look())
    rows = lines[3:8]
    assert [row.split()[:1] for row in rows[2:]] == [["the"], ["i"], ["j"]]
    assert ["1250.0 ms" in rows[2], " 250.0 ms" in rows[3], "  12.5 ms" in rows[4]] == [True] * 3
    assert len({row.index(" ms") for row in rows[2:]}) == 1
    assert "100.00" in rows[4] and rows[4].endswith("best") and not rows[3].endswith("best")
    assert "95 % interval" in rows[0] and "12.5 to 12.5" in rows[4]


def test_without_intervals_there_is_no_column_for_them():
    lines = campaign_lines(campaign(trial("i", 0.25, 3, identical=True), rounds=3), Look())
    assert not any("interval" in line for line in lines)


def test_contraction_is_explained_once():
    differing = [trial(plan, 0.5, identical=False, largest_difference=amount,
                       cause=f"{CONTRACTED}; first at z[{at}] is 1.5, the original leaves 1.0")
                 for at, (plan, amount) in enumerate({"j i": 4e-14, "i:8 j i": 3e-15}.items())]
    text = "\n".join(campaign_lines(campaign(*differing), Look()))
    assert text.count(CONTRACTED) == 1 and '"j i" (by up to 4e-14), "i:8 j i" (by up to 3e-15): ' in text
    assert "z[0]" in text and "z[1]" not in text


def test_a_tolerance_is_shown_and_explained():
    lines = campaign_lines(campaign(trial("j i", 0.5, check=LOOSE, options="reassociate yes", identical=True)), Look())
    assert "j i; reassociate yes" in lines[6] and "to 2.5e-14" in lines[6]
    assert any("the updates of total run in another order" in line for line in lines)


@pytest.mark.parametrize("seconds, shown", [(1.5, "1.50 s"), (0.0123, "12.3 ms"), (2e-6, "2.00 us"), (3e-10, "0.30 ns")])
def test_units_fit_the_smallest_time(seconds, shown):
    value = Estimate(seconds, None, None)
    assert Scale.of([value, Estimate(2.0, None, None)]).cells(value) == (shown, "")
