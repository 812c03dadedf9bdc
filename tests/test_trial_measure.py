"""Timing, the records that it leaves, and their files."""

import json
import os
import signal
import tempfile
import threading
import time
from dataclasses import replace
from pathlib import Path

import pytest
from trial_case import case

from retile.model import RetileError
from retile.trial import Estimate, Settings, as_text, measure, read_result, write_result
from retile.trial.campaign import _is_wide
from retile.trial.statistics import median

QUICK = Settings(sanitize=False, seconds=0.1, rounds=(6, 12))
SUMS = """\
void sums(int n, int m, double *total, const double *depth) {
    for (int j = 0; j < m; j++)
        for (int i = 0; i < n; i++)
            total[j] += depth[i * m + j];
}
"""
BY_ROWS = (
    "for (int i = 0; i < n; i++)\n        for (int j = 0; j < m; j++)\n            total[j] += depth[i * m + j];"
)
SIZES = {"n": 900, "m": 700}


@pytest.fixture
def sums(tmp_path):
    return case(tmp_path, SUMS)


def test_a_campaign_keeps_its_samples_and_says_where_they_come_from(sums):
    events = []
    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS, "i j")], SIZES, QUICK, events.append)
    (trial,) = campaign.trials
    assert trial.verified and trial.identical and trial.failure is None
    assert 6 <= len(trial.samples) == len(campaign.baseline_samples) <= 12
    assert trial.seconds.low <= trial.seconds.median <= trial.seconds.high
    ratios = [a / b for a, b in zip(campaign.baseline_samples, trial.samples)]
    assert trial.speedup.median == median(ratios)
    assert dict(campaign.sizes) == SIZES and campaign.address == str(sums.nest.address)
    assert campaign.host["page_bytes"]["value"] and campaign.flags == ("-O3", "-march=native")
    assert {event.stage for event in events} == {"verify", "build", "time"}
    assert campaign.best == trial and not campaign.interrupted


def test_the_document_has_the_agreed_fields(sums):
    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS, "i j")], SIZES, QUICK)
    document = json.loads(as_text(campaign))
    assert {"address", "host", "sizes", "baseline", "trials", "best"} <= document.keys()
    assert set(document["baseline"]["seconds"]) == {"median", "low", "high"}
    (trial,) = document["trials"]
    assert {"plan", "options", "verified", "identical", "seconds", "speedup"} <= trial.keys()
    assert trial["plan"] == "i j" and trial["options"] == "" and trial["verified"] is True
    assert document["best"]["plan"] == "i j"


def test_what_walks_along_rows_is_timed_as_faster(sums):
    """Rows of 32 KiB: each step down a column opens another page and another cache line, along the row every eighth one
    (Hennessy & Patterson, "Computer Architecture: A Quantitative Approach", loop interchange)."""
    campaign = measure(
        sums.source,
        sums.nest,
        [sums.variant(BY_ROWS, "i j")],
        {"n": 3000, "m": 4096},
        replace(QUICK, rounds=(6, 6)),
    )
    assert campaign.trials[0].speedup.median > 1.2


def test_a_wrong_variant_is_not_timed(sums):
    wrong = sums.variant(BY_ROWS.replace("i = 0", "i = 1"), "i j")
    campaign = measure(sums.source, sums.nest, [wrong, sums.variant(BY_ROWS, "i j")], SIZES, QUICK)
    bad, good = campaign.trials
    assert not bad.verified and bad.samples == () and "total[" in bad.failure
    assert good.verified and good.samples
    assert campaign.best == good and not campaign.all_verified


def test_timed_builds_that_differ_say_by_how_much_and_why(sums):
    text = BY_ROWS.replace("depth[i * m + j]", "depth[i * m + j] * SCALE")
    text = f"\n#ifdef __FAST_MATH__\n#define SCALE (1 + 0x1p-40)\n#else\n#define SCALE 1\n#endif\n{text}"
    campaign = measure(
        sums.source, sums.nest, [sums.variant(text, "i j")], SIZES, replace(QUICK, flags=("-O2", "-ffast-math"))
    )
    (trial,) = campaign.trials
    assert trial.verified and trial.identical is False
    assert 0 < trial.largest_difference < 1e-6 and 0 < trial.largest_relative < 1e-6
    assert "reassociate" in trial.cause and "total[" in trial.cause


def test_inputs_are_restored_between_rounds(tmp_path):
    """Cubed again and again, numbers end as zero or infinite; restored, they give the same outputs each time."""
    one = case(
        tmp_path, "void f(int n, double *z) {\n for (int i = 0; i < n; i++)\n  z[i] = 4 * z[i] * z[i] * z[i];\n}\n"
    )
    campaign = measure(one.source, one.nest, [one.variant(one.text)], {"n": 1000}, replace(QUICK, rounds=(50, 50)))
    assert campaign.trials[0].identical and len(campaign.baseline_samples) == 50


def test_a_missing_size_is_named_with_the_command_to_type(sums):
    with pytest.raises(
        RetileError, match=r"no value for m.*retile measure survey.c:2 'i j' --set n=900 --set m=1000"
    ):
        measure(sums.source, sums.nest, [], {"n": 900}, QUICK, command="retile measure survey.c:2 'i j'")


def test_a_size_that_the_nest_has_not_is_named(sums):
    with pytest.raises(RetileError, match="no size q"):
        measure(sums.source, sums.nest, [], {**SIZES, "q": 1}, QUICK)


def test_sizes_for_which_the_original_is_undefined_are_refused(tmp_path):
    one = case(tmp_path, "double z[100];\nvoid f(int n) {\n for (int i = 0; i < n; i++)\n  z[i] *= 2;\n}\n")
    with pytest.raises(RetileError, match="101"):
        measure(one.source, one.nest, [one.variant(one.text)], {"n": 101}, QUICK)


def test_arrays_that_do_not_fit_are_refused_before_anything_runs(sums):
    with pytest.raises(RetileError, match="MiB"):
        measure(sums.source, sums.nest, [], {"n": 2_000_000, "m": 2_000_000}, QUICK)


def test_short_calls_come_with_a_warning(sums):
    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS)], {"n": 2, "m": 2}, QUICK)
    assert any("clock steps" in note for note in campaign.notes)


# ---------------------------------------------------------------- leaving early


@pytest.fixture
def scratch(tmp_path, monkeypatch):
    """A place for temporary files of this test alone."""
    folder = tmp_path / "scratch"
    folder.mkdir()
    monkeypatch.setattr(tempfile, "tempdir", str(folder))
    return folder


def _trials_in(folder):
    return [path.name for path in folder.iterdir() if path.name.startswith("retile-trial-")]


def test_the_scratch_folder_goes(sums, scratch):
    seen = []
    measure(
        sums.source,
        sums.nest,
        [sums.variant(BY_ROWS, "i j")],
        SIZES,
        QUICK,
        lambda event: seen.append(_trials_in(scratch)),
    )
    assert seen and all(len(names) == 1 for names in seen)
    with pytest.raises(RetileError):
        measure(sums.source, sums.nest, [], {}, QUICK)
    assert _trials_in(scratch) == []


@pytest.mark.parametrize("signal_number", [signal.SIGINT, signal.SIGTERM])
def test_interrupted_campaigns_keep_what_they_have(sums, scratch, signal_number):
    began = time.monotonic()

    def on_progress(event):
        if event.stage == "time":
            threading.Timer(1.0, os.kill, (os.getpid(), signal_number)).start()

    campaign = measure(
        sums.source,
        sums.nest,
        [sums.variant(BY_ROWS, "i j")],
        SIZES,
        replace(QUICK, seconds=60, rounds=(6, 1_000_000)),
        on_progress,
    )
    assert campaign.interrupted and time.monotonic() - began < 30
    assert campaign.trials[0].verified and campaign.trials[0].samples
    assert campaign.as_json()["interrupted"] is True
    assert _trials_in(scratch) == []


def test_interrupted_before_timing(sums):
    def on_progress(event):
        raise KeyboardInterrupt

    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS, "i j")], SIZES, QUICK, on_progress)
    assert campaign.interrupted and campaign.trials[0].verification is None and campaign.baseline_samples == ()
    assert json.loads(as_text(campaign))["baseline"]["seconds"] is None


# ---------------------------------------------------------------- files


@pytest.fixture
def result(sums, tmp_path):
    wrong = sums.variant(BY_ROWS.replace("i = 0", "i = 1"), "i j")
    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS, "i j; remainder peel"), wrong], SIZES, QUICK)
    return campaign, write_result(campaign, str(tmp_path / "result.json"))


def test_a_result_file_reads_back_as_the_same_campaign(result):
    campaign, path = result
    assert read_result(path) == campaign
    assert campaign.trials[0].options == "remainder peel"


def test_the_file_is_named_after_the_time(result, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    path = write_result(result[0])
    assert path.startswith("retile-result-") and path.endswith(".json") and Path(path).exists()


BROKEN = [b"", b"{", b"[]", b"null", b"\xff\xfe", b"[" * 100_000, b'{"format": 1}', b'{"format": "1"}', b"NaN"]


@pytest.mark.parametrize("data", BROKEN)
def test_other_files_are_refused(tmp_path, data):
    path = tmp_path / "result.json"
    path.write_bytes(data)
    with pytest.raises(RetileError, match="result.json"):
        read_result(str(path))


def test_missing_files_and_folders_are_refused(tmp_path):
    for path in (tmp_path / "none.json", tmp_path):
        with pytest.raises(RetileError):
            read_result(str(path))


@pytest.mark.parametrize("value", [None, "x", 7, -1, True, [], {}, [1], {"a": []}, [{}], 1e400])
def test_no_field_of_a_wrong_kind_gets_through_as_a_crash(result, tmp_path, value):
    """Every field, at every depth, is replaced in turn: the file reads, or is refused with one message."""
    document = json.loads(Path(result[1]).read_text())
    path = tmp_path / "hostile.json"
    for where in list(_places(document)):
        changed = json.loads(Path(result[1]).read_text())
        holder = changed
        for step in where[:-1]:
            holder = holder[step]
        holder[where[-1]] = value
        path.write_text(json.dumps(changed))
        try:
            as_text(read_result(str(path)))
        except RetileError as problem:
            assert str(path) in str(problem)


def _places(value, so_far=()):
    parts = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, part in parts:
        if so_far[:1] != ("host",) and not (isinstance(key, int) and key > 1):
            yield (*so_far, key)
            yield from _places(part, (*so_far, key))


SLOW = """\
void slow(int n, double *z) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                z[i] = z[i] * 0.5 + z[j] * 0.25 + z[k] * 0.125;
}
"""


def test_slow_nests_have_fewer_rounds_and_say_so(tmp_path):
    """A round takes longer than the time for all of them: three are left, which have no interval."""
    one = case(tmp_path, SLOW)
    campaign = measure(one.source, one.nest, [one.variant(one.text)], {"n": 300}, replace(QUICK, seconds=0.01))
    (trial,) = campaign.trials
    assert len(trial.samples) == 3 and trial.seconds.median > 0 and trial.speedup.low is None
    assert any("3 rounds are too few for an interval" in note for note in campaign.notes)


def test_fast_nests_have_all_the_rounds_that_fit(sums):
    campaign = measure(sums.source, sums.nest, [sums.variant(BY_ROWS, "i j")], {"n": 9, "m": 7},
                       replace(QUICK, seconds=0.2, rounds=(6, 100)))
    assert len(campaign.trials[0].samples) == 100


def test_wide_intervals_are_pointed_out():
    assert _is_wide(Estimate(2, 1, 3)) and not _is_wide(Estimate(2, 1.9, 2.2)) and not _is_wide(Estimate(2, None, None))
