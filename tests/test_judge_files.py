"""The judge on files: whole functions and nests alone, sizes of its own choice, and what the commands make of it."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import pytest
from command_line import SAMPLES, line_of, retile

import retile as program
from retile.commands import rewrite as command
from retile.commands.compiling import CompilerOptions
from retile.commands.opening import Facts
from retile.judge import Examiner, Finding, Task
from retile.library import OpenNest
from retile.report.table import Look
from retile.report.trials import campaign_lines
from retile.source import open_source
from retile.trial import read_result, write_result


def examiner(folder: Path, text: str, seconds: float = 5.0) -> Examiner:
    """The examiner of the nest at the first ``for`` of a text."""
    path = folder / "survey.c"
    path.write_text(text)
    line = next(number for number, row in enumerate(text.splitlines(), 1) if row.strip().startswith("for"))
    return Examiner(open_source(str(path)), line, seconds=seconds)


SWEEP = """#include <stddef.h>
void sweep(size_t n, size_t ld, double *z) {
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            z[i * ld + j] = 0.5 * z[i * ld + j];
}
"""
CHUNKED = SWEEP.replace("for (size_t j = 0; j < n; j++)", "for (size_t b = 0; b < n; b += 64)\n"
                        "    for (size_t j = b; j < (b + 64 < n ? b + 64 : n); j++)")


def test_sizes_around_the_chunk_are_tried_by_themselves(tmp_path):
    judge = examiner(tmp_path, SWEEP)
    good = judge.examine(Task(CHUNKED, (64,)))
    assert good.judged is True and len(good.settings) > 8 and any("65" in sizes for sizes in good.settings)
    lost = judge.examine(Task(CHUNKED.replace("b + 64 < n ? b + 64 : n", "b + 64 < n ? b + 63 : n"), (64,)))
    assert lost.judged is False and "65" in lost.reason and "z[" in lost.reason


REPORT = """#include <stdio.h>
#include <stdlib.h>
int report(FILE *log, int n) {
    double z[n + 1], sum = 0.0, scratch = 0.0;
    int i;
    fscanf(log, "%lf", z);
    for (i = 0; i < n; i++) {
        scratch = z[i] * 2;
        sum += scratch;
    }
    scratch = 1.0;
    fprintf(log, "%g %g", sum, scratch);
    return i;
}
"""


_SUM = "scratch = z[i] * 2;\n        sum += scratch;"


@pytest.mark.parametrize(("old", "new", "right"), [
    (_SUM, "sum += z[i] * 2;", True),
    (_SUM, "scratch = z[i] * 2;\n        sum = scratch + sum;", False),
    ("for (i = 0; i < n; i++) {", "for (int k = 0; k < n; k++) { i = k;", False),
    ("for (i = 0; i < n; i++) {\n        " + _SUM, "i = 0;\n    for (int k = 0; k < n; k++) {\n        i = k + 1;\n"
     "        sum += z[k] * 2;", True)])  # fmt: skip
def test_a_nest_alone_leaves_what_may_be_read_later(tmp_path, old, new, right):
    """The whole function cannot be run; ``scratch`` is set again before anybody reads it, ``sum`` and ``i`` are not."""
    judge = examiner(tmp_path, REPORT)
    assert old in REPORT
    found = judge.examine(Task(REPORT.replace(old, new)))
    assert found.judged is right, found
    assert any("run alone" in note and "call of fscanf" in note for note in found.notes)


def test_pointers_of_an_assumption_are_laid_into_one_memory(tmp_path):
    text = """void f(int n, double *s, double *a) {
    for (int i = 1; i < n; i++)
        s[i] = a[0] + s[i - 1];
}
"""
    held = text.replace("    for", "    const double first = n > 1 ? a[0] : 0;\n    for").replace("= a[0]", "= first")
    judge = examiner(tmp_path, text)
    assert judge.examine(Task(held)).judged is True
    found = judge.examine(Task(held, overlaps=(("a", "s"),)))
    assert found.judged is False and "a = s + " in found.reason


LARGE = """static float g[900][900];
void f(void) {
    for (int i = 0; i < 900; i++)
        for (int j = 0; j < 900; j++)
            g[i][j] = 0;
}
"""


def test_what_cannot_be_judged_is_said(tmp_path):
    text = "void f(int n, double *s) {\n    for (int i = 0; i < n; i++)\n        s[i] = drand48();\n}\n"
    found = examiner(tmp_path, text).examine(Task(text))
    assert found.judged is None and "drand48" in found.reason
    large = LARGE.replace("900", "2000")
    found = examiner(tmp_path, large, 0.5).examine(Task(large))
    assert found.judged is None and "too many steps" in found.reason


@pytest.mark.parametrize(("sample", "function", "plan"), [
    ("beamform.c", "form_beams", "k:4 i k j; remainder peel"), ("relax.c", "relax_four", "s:3 s i j"),
    ("swath_mosaic.c", "mosaic", None), ("drift.c", "drift", "t:4 (t+x):8 t x"), ("tide_normal.c", "", "k:3 k l i"),
    ("tidal_factor.c", "", "j:4 k i@16 i@18 j"), ("track_match.c", "", "i:3 j:5 i j")])  # fmt: skip
def test_variants_of_samples_pass(sample, function, plan):
    code = program.open_file(SAMPLES / sample)
    nest = next(code.nest(found.address.line) for found in code.nests() if found.nest is not None)
    plan = plan or " ".join(f"{loop.iterator}:3" for loop in nest.nest.loops[:1]) + " " + \
        " ".join(loop.iterator for loop in nest.nest.loops)
    found = nest.judge(nest.rewrite(plan))
    assert found.judged is True, found


# ---------------------------------------------------------------- commands


ADDRESS = f"{SAMPLES / 'beamform.c'}:{line_of('beamform.c', 'form_beams')}"


def test_measure_tells_what_the_judge_says(tmp_path):
    done = retile("measure", ADDRESS, "k:8 i k j", "--set", "n=40", "--seconds", "0.2", "--json", cwd=tmp_path)
    trial = json.loads(done.out)["trials"][0]
    assert (done.status, trial["judged"], trial["verified"]) == (0, True, True)
    assert len(trial["judge"]["settings"]) > 5 and trial["judge"]["reason"] == ""


def _wrong(nest: OpenNest, plan: str):
    """The variant of a plan with a fault: a lost remainder."""
    variant = nest.rewrite(plan)
    old, new = "k_from + 8 < n ? (int)k_from + 8 : n", "k_from + 8 < n ? (int)k_from + 8 : k_from"
    assert old in variant.nest_text
    return replace(variant, nest_text=variant.nest_text.replace(old, new), text=variant.text.replace(old, new))


def _nest() -> OpenNest:
    return program.open_file(SAMPLES / "beamform.c").nest(int(ADDRESS.rsplit(":", 1)[1]))


def test_a_wrong_variant_is_neither_verified_nor_timed(tmp_path, monkeypatch):
    nest = _nest()
    wrong = _wrong(nest, "k:8 i k j")
    rewrite = OpenNest.rewrite
    monkeypatch.setattr(OpenNest, "rewrite", lambda self, plan, **options:
                        wrong if "8" in str(getattr(plan, "text", plan)) else rewrite(self, plan, **options))
    from retile.trial import Settings

    campaign = nest.measure(["k:8 i k j", "i k j"], {"n": 30}, Settings(seconds=0.1, sanitize=False))
    bad, good = campaign.trials
    assert (bad.judged, bad.verified, bad.samples) == (False, False, ()) and "beams[" in bad.failure
    assert good.judged is True and good.verified and good.samples and bad.verification is None
    said = "\n".join(campaign_lines(campaign, Look(None)))
    assert "NOT verified: it computes something else: at n = " in said
    again = read_result(write_result(campaign, str(tmp_path / "result.json")))
    assert again.trials[0].judged is False and again.trials[0].finding["differences"]


def test_rewrite_verify_writes_nothing_that_is_wrong(tmp_path, monkeypatch, capsysbinary):
    wrong = _wrong(_nest(), "k:8 i k j")
    monkeypatch.setattr(OpenNest, "rewrite", lambda self, plan, **options: wrong)
    target = command.Target(file=str(tmp_path / "out.c"), as_json=True)
    status = command.run(ADDRESS, "k:8 i k j", CompilerOptions(None, (), None), facts=Facts((), ()), defaults={},
                         trust=False, verify=True, target=target)
    said = capsysbinary.readouterr()
    document = json.loads(said.out)
    assert status == 1 and not (tmp_path / "out.c").exists()
    assert (document["judged"], document["verified"], document["text"]) == (False, None, None)
    assert b"computes something else: at n = " in said.err
    assert b"not built and run: the judge found it wrong" in said.err


def test_rewrite_verify_writes_what_is_right(tmp_path):
    done = retile("rewrite", ADDRESS, "k:8 i k j", "--verify", "-o", tmp_path / "out.c", "--json")
    document = json.loads(done.out)
    assert (done.status, document["judged"], document["verified"]) == (0, True, True)
    assert "not judged" not in done.err and "not verified" not in done.err
    assert (tmp_path / "out.c").read_text() == document["text"]


def test_rewrite_verify_says_where_the_judge_cannot_run(tmp_path):
    (tmp_path / "large.c").write_text(LARGE)
    done = retile("rewrite", tmp_path / "large.c:3", "j i", "--verify", "--json")
    document = json.loads(done.out)
    assert (done.status, document["judged"], document["verified"]) == (0, None, True)
    assert "not judged: the original takes too many steps" in done.err


def test_findings_are_values():
    assert Finding(None, "why").as_json()["judged"] is None
