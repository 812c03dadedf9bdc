"""The picture of a measurement."""

from __future__ import annotations

import xml.etree.ElementTree as ET

import pytest

from retile.model import RetileError
from retile.report.plot import check_plot_name, speedup_plot
from retile.trial.records import Campaign, Trial, Verification


def campaign(*trials: Trial) -> Campaign:
    return Campaign("survey.c:3", {}, (("n", 1000),), trials[0].baseline_samples, trials, "cc", None, ("-O3",), 1, (),
                    "random", "", "2026-01-01T00:00:00Z")


def trial(plan: str, *ratios: float) -> Trial:
    return Trial(plan, "", Verification(True, (), True, "random"), tuple(1 / ratio for ratio in ratios),
                 tuple(1.0 for _ in ratios))


def test_every_timed_plan_stands_in_the_picture():
    drawn = speedup_plot(campaign(trial("i k j", 2, 2, 2, 2.5, 3, 2), trial("k:64 i k j", *[6, 7, 8, 6, 7] * 4, 90)), ".svg")
    assert ET.fromstring(drawn).tag.endswith("svg")
    text = " ".join("".join(drawn_text.itertext()) for drawn_text in ET.fromstring(drawn).iter() if drawn_text.text)
    for part in ("i k j", "k:64 i k j", "survey.c:3 at n = 1000", "some rounds lie further right"):
        assert part in text


@pytest.mark.parametrize("suffix, head", [(".png", b"\x89PNG"), (".pdf", b"%PDF")])
def test_kinds_of_files(suffix: str, head: bytes):
    assert speedup_plot(campaign(trial("i k j", 2)), suffix).startswith(head)


def test_nothing_timed_gives_an_empty_picture():
    untimed = Trial("i k j", "", None)
    assert speedup_plot(campaign(untimed), ".png").startswith(b"\x89PNG")


def test_a_name_that_says_no_kind_is_refused():
    with pytest.raises(RetileError, match=r"\.svg, \.png, \.pdf"):
        check_plot_name("speedups.txt")
