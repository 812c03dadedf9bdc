"""``continue``: what it skips is guarded, its text stays in its loop, and plans that would take it apart are refused."""

from __future__ import annotations

import re
import time
from collections import Counter
from dataclasses import replace

import pytest
from asked import ask
from examination import Effort, examine
from nest_execution import events_read, events_run, line_of_first_for, opened
from oracle import Unsupported, compare
from random_choices import Seeded
from random_nests import RandomNest, seeded_nest
from retile.nest import read_nest
from retile.tree import Guard, Loop, children

FORMS = {
    "rest of the iteration": "if (depth[i][j] < 0)\n continue;\n depth[i][j] = 1;\n echo[i][j] += 2;",
    "affine": "if (i == j || j % 3 == 1)\n continue;\n depth[i][j] = depth[j][i];",
    "with something before it": "if (j > i) {\n echo[i][j] = 1;\n continue;\n }\n depth[i][j] += echo[j][i];",
    "behind else": "if (j <= i) {\n echo[i][j] = 1;\n } else\n continue;\n depth[i][j] += echo[j][i];",
    "several": "if (i > 2)\n continue;\n echo[i][j] += 1;\n if (depth[i][j] > 0)\n continue;\n depth[i][j] = echo[j][i];",
    "in a chain": "if (i > 3)\n echo[i][j] = 1;\n else if (j > 2)\n continue;\n else\n echo[i][j] = 2;\n depth[i][j] = echo[i][j];",
    "in a block": "{\n if (i > j)\n continue;\n echo[i][j] = 4;\n }\n depth[i][j] = echo[j][i];",
    "deep": "if (i > 1) {\n if (j > i)\n continue;\n echo[i][j] = 1;\n }\n depth[i][j] = echo[j][i];",
    "deep, on data": "if (depth[i][j] > 0) {\n if (j > i)\n continue;\n echo[i][j] = 1;\n }\n depth[i][j] = 2;",
    "at the end": "depth[i][j] = 3;\n if (depth[i][j] > 1)\n continue;",
    "private": "double t = depth[i][j];\n if (t < 0)\n continue;\n double u = t * 2;\n echo[i][j] = u;",
}

LIGHT = Effort(plans=4, variants=2, tags=2, build="")


def text_of(body: str) -> str:
    return ("void survey(int n, double (*restrict depth)[9], double (*restrict echo)[9]) {\n    for (int i = 0; i < n; i++) {\n"
            f"        for (int j = 0; j < n; j++) {{\n{body}\n        }}\n        depth[i][8] += 1;\n    }}\n}}\n")


@pytest.mark.parametrize("body", FORMS.values(), ids=FORMS.keys())
def test_a_continue_is_read_as_it_runs(body, tmp_path):
    text = text_of(body)
    nest = read_nest(opened(text, tmp_path), line_of_first_for(text)).nest
    read = {event for event in events_read(nest, {"n": 5}) if event[2] or event[3]}
    run = events_run(text, "survey", 2, {"n": 5}, frozenset())
    assert read == {event for event in run if event[2] or event[3]}


@pytest.mark.parametrize("plan", ["i j", "j:2 i j", "i:3 j:2 i j", "j i", "i:2 j i; remainder peel"])
@pytest.mark.parametrize("body", FORMS.values(), ids=FORMS.keys())
def test_variants_skip_the_same(body, plan):
    text = text_of(body)
    answer = ask(text, 2)
    if answer.verdict(plan) == "legal":
        assert compare(text, answer.variant(plan).text, "survey", {"n": 5}) == []
    else:
        assert examine(RandomNest(text, 2, 2, ("n",)), Seeded(0), 0, LIGHT, [plan]).problems == []


def test_most_of_these_can_be_reordered():
    legal = [name for name, body in FORMS.items() if ask(text_of(body), 2).verdict("j:2 i j") == "legal"]
    assert len(legal) >= 5, legal


SUMS = """\
void survey(int n, int m, double (*restrict depth)[9], double *restrict echo) {
    for (int i = 0; i < n; i++) {
        double sum = 0;
        for (int k = 0; k < m; k++) {
            if (depth[i][k] < 0)
                continue;
            sum += depth[i][k];
        }
        echo[i] = sum;
    }
}
"""


@pytest.mark.parametrize("plan", ["i:4 k:3 k i", "i:2 k i", "i:4 k:2 i k", "i:3 k:2 k i; remainder peel"])
def test_a_continue_before_something_else_gets_a_loop_of_its_own(plan):
    text = ask(SUMS, 2).variant(plan).text
    assert ("} while (0);" in text) == (plan.split(";")[0].split()[-1] == "i")
    for sizes in ({"n": 5, "m": 7}, {"n": 4, "m": 2}, {"n": 0, "m": 3}, {"n": 1, "m": 0}):
        assert compare(SUMS, text, "survey", sizes) == []


SKIPPED = """\
void survey(int n, double *restrict depth, double (*restrict echo)[9]) {
    for (int i = 0; i < n; i++) {
        if (depth[i] < 0)
            continue;
        for (int j = 0; j < n; j++)
            echo[i][j] = 1;
    }
}
"""


def test_a_loop_that_is_skipped_stays_where_it_is():
    judgement = ask(SKIPPED, 2).check("j i")
    assert [(refusal.code, refusal.line) for refusal in judgement.refusals] == [("continue", 5)]
    assert ask(SKIPPED, 2).verdict("i:4 i") == "legal"
    assert compare(SKIPPED, ask(SKIPPED, 2).variant("i:4 i").text, "survey", {"n": 7}) == []


def test_what_can_never_run_is_refused(tmp_path):
    text = "void survey(int n, double *depth) {\n    for (int i = 0; i < n; i++) {\n        continue;\n        depth[i] = 1;\n    }\n}\n"
    assert [r.code for r in read_nest(opened(text, tmp_path), 2).refusals] == ["continue"]


def test_what_is_skipped_is_marked():
    def guards(nodes):
        return [node for node in nodes if isinstance(node, Guard)] + [g for node in nodes for g in guards(children(node))]

    assert [guard.jump for guard in guards(ask(SKIPPED, 2).opened.nest.tree)] == [True]
    plain = SKIPPED.replace("            continue;\n", "            ;\n        else\n")
    assert [guard.jump for guard in guards(ask(plain, 2).opened.nest.tree)] == [False]
    assert isinstance(ask(plain, 2).opened.nest.tree[0], Loop)


def with_continue(nest: RandomNest) -> RandomNest | None:
    """The nest with each guarded statement (without else) after a ``continue`` instead; None if it has none."""
    lines = nest.text.split("\n")
    changed = 0
    for at in range(len(lines) - 2):
        if re.match(r"\s+if \(.*\) \{$", lines[at]) and lines[at + 2].strip() == "}":
            lines[at], lines[at + 1], lines[at + 2] = lines[at].removesuffix(" {"), "continue;", lines[at + 1]
            changed += 1
    return replace(nest, text="\n".join(lines)) if changed else None


def examined(seed: int, effort: Effort) -> Counter:
    """What comes out about the nest of a seed with a ``continue``; its problems fail the test."""
    nest = with_continue(seeded_nest(seed))
    if nest is None:
        return Counter()
    try:
        finding = examine(nest, Seeded(seed), seed, effort)
    except Unsupported:  # the interpreter of the tests does not know a form of this nest
        return Counter()
    assert not finding.problems, f"seed {seed}\n{nest}\n{finding.problems[:2]}"
    return finding.counts


@pytest.mark.parametrize("group", range(2))
def test_random_pairs(group):
    seen, end = Counter(), time.monotonic() + 8
    for seed in range(3_000_000 + 1000 * group, 3_000_150 + 1000 * group):
        seen += examined(seed, LIGHT)
        if time.monotonic() > end and seen["legal"] and seen["illegal"]:
            break
    assert seen["legal"] and seen["illegal"], seen


@pytest.mark.long
def test_many_random_pairs(pytestconfig):
    first, nests = pytestconfig.getoption("--seed") * 1_000_000, pytestconfig.getoption("--pairs")
    seen = Counter()
    for seed in range(first, first + nests):
        seen += examined(seed, Effort())
    print(seen)
    assert seen["legal"] and seen["illegal"], seen
