"""Random nests and plans: every verdict and every variant against brute force.

A long run leaves each failure as a file; made small it becomes a C file in ``regressions/`` (plan and line stand in its last
line), and all files there run each time.
"""

from __future__ import annotations

import re
import time
from pathlib import Path

import pytest
from campaign import Tally, effort_of, run
from examination import Effort, Finding, examine
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from many_variants import SANITIZED, Printed, Setting, problems
from random_choices import Drawn, Seeded
from random_nests import RandomNest, nests, seeded_nest
from random_plans import LoopShape, Shape, plan

REGRESSIONS = Path(__file__).parent / "regressions"
GROUPS, SECONDS = 4, 12.0  # of the default run


@pytest.mark.parametrize("group", range(GROUPS))
def test_seeded_pairs(group):
    """A fixed budget of time; the seeds are disjoint from those of the long runs."""
    end, tally = time.monotonic() + SECONDS, Tally()
    for seed in range(group * 1000, group * 1000 + 200):
        more = run([seed], effort=Effort(plans=12, variants=3, **_build_of(seed)))
        tally.counts.update(more.counts)
        assert not more.failed, "\n\n".join(more.failed)
        if time.monotonic() > end and tally.counts["bits compared"] and tally.counts["illegal"]:
            break
    # A generator whose nests are all refused would prove nothing.
    assert tally.counts["legal, order compared"] and tally.counts["illegal"] and tally.counts["tags compared"], tally.counts


def _build_of(seed: int) -> dict:
    effort = effort_of(seed, clang=False)
    return {"build": effort.build, "flags": effort.flags}


QUIET = [HealthCheck.too_slow, HealthCheck.data_too_large]


@settings(max_examples=6, deadline=None, derandomize=True, phases=[Phase.generate], suppress_health_check=QUIET)
@given(nests(), st.data())
def test_drawn_pairs(nest, data):
    _examine_drawn(nest, data, Effort(plans=3, build=""))


@pytest.mark.long
@settings(max_examples=2000, deadline=None, suppress_health_check=QUIET)
@given(nests(), st.data())
def test_drawn_pairs_made_small(nest, data):
    """As above, with hypothesis shrinking what fails, which takes minutes."""
    _examine_drawn(nest, data, Effort(plans=3))


def _examine_drawn(nest: RandomNest, data: st.DataObject, effort: Effort) -> None:
    finding = examine(nest, Drawn(data.draw), 1, effort)
    assert not finding.problems, f"{nest}\n{finding.problems}"


def kept(path: Path) -> tuple[RandomNest, str]:
    """A saved case: the nest and the plan."""
    text, _, last = path.read_text().rstrip("\n").rpartition("\n")
    line, wanted = re.fullmatch(r"/\* nest at line (\d+), plan: (.*) \*/", last).groups()
    outermost = next(number for number, row in enumerate(text.split("\n"), 1) if row.startswith("    for "))
    return RandomNest(f"{text}\n", int(line), outermost, ("n", "m", "w", *(["chart.rows"] if "} chart" in text else []))), wanted


@pytest.mark.parametrize("path", sorted(REGRESSIONS.glob("*.c")), ids=lambda path: path.stem)
def test_regressions(path):
    nest, wanted = kept(path)
    plans = [f"{wanted}; remainder {style}" for style in ("clamp", "peel")] if ";" not in wanted else [wanted]
    for seed in range(2):
        finding = examine(nest, Seeded(seed), seed, Effort(build="gcc" if seed else "", flags=SANITIZED), plans)
        assert not finding.problems, f"{nest}\n{finding.problems}"
        assert not [what for what in finding.counts if "not compared" in what], finding.counts


@pytest.mark.long
def test_many_pairs(request):
    """``pytest -m long tests/test_random.py -s --pairs 100000 --seed 1``: goes on after failures and prints a tally."""
    first, pairs = request.config.getoption("seed"), request.config.getoption("pairs")
    tally = run(range(first * 1_000_000, (first + 1) * 1_000_000), pairs=pairs)
    print("\n" + "\n".join(tally.lines()))
    assert not tally.failed, "\n\n".join(tally.failed[:20])


# ---------------------------------------------------------------- the instruments themselves


def test_a_seed_says_all():
    shape = Shape((LoopShape("i", ()), LoopShape("j", ("i",))), (("7", ("i",)),))
    for seed in range(20):
        assert seeded_nest(seed) == seeded_nest(seed)
        assert plan(Seeded(seed), shape) == plan(Seeded(seed), shape)
    assert len({seeded_nest(seed).text for seed in range(50)}) == 50


def test_the_generator_covers_the_language():
    texts = [seeded_nest(seed).text for seed in range(400)]
    for pattern in (r"for \(unsigned char", r"for \(size_t", r"-- > 0;\)", r"-= 2\)", r"\+= 3\)", r"MIN\(", r"\? .* :", r"if \(",
                    r"double sum = ", r"double factor = ", r"\*row = ", r"map\[", r"chart\.rows", r"\bAT\(", r"\.high",
                    r"restrict", r"% 3", r"/ 2", r"!= [nmw];", r"static \w+ \w+\[24\]", r" {20}for ", r"unsigned \*",
                    r"float ", r"\* w \+", r"return total"):
        assert sum(bool(re.search(pattern, text)) for text in texts) >= 2, pattern


DOUBLED = """void survey(int n, int m, int w, double *depth, double *echo) {
    for (int i = 0; i < n; i++) {
        depth[i] = 2.0 * echo[i];
    }
}
"""
SETTING = Setting({"n": 5, "m": 1, "w": 1}, {"depth": (0, 40), "echo": (0, 40)})


@pytest.mark.parametrize("before, after, flags, told", [
    ("2.0 * echo", "2.5 * echo", ("-O1",), "array 0 byte 0"),
    ("i < n", "i < n - 1", ("-O1",), "array 0 byte 32"),
    ("depth[i] = ", "depth[i] = 0.0 * echo[i + 1] + ", SANITIZED, "heap-buffer-overflow"),
    ("int i = 0; i < n; i++", "int i = n - 1; i >= 0; i--", ("-O1",), "shift 1"),
    ("i < n", "i < n || n == 5", ("-O1",), "status"),
])
def test_the_harness_sees_what_is_wrong(before, after, flags, told):
    variant = Printed(DOUBLED.replace(before, after), "i:2 i", allowed=(True,))
    found = problems(DOUBLED, "survey", [variant], [SETTING], flags=flags, seconds=20)
    assert found and "i:2 i" in found[0] and told in found[0], found
    assert not problems(DOUBLED, "survey", [Printed(DOUBLED, "i", allowed=(True,))], [SETTING], flags=flags)


def test_a_tally_counts_what_is_wrong(monkeypatch):
    monkeypatch.setattr("campaign.examine", lambda nest, choose, seed, effort: Finding(problems=[("i", "wrong")]))
    tally = run(range(3))
    assert len(tally.failed) == 3 and "3 failures" in "\n".join(tally.lines())
