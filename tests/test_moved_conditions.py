"""Conditions between the loops that a plan moves are tested where the loops end up; nothing else is left out."""

from __future__ import annotations

import pytest
from asked import ask
from oracle import compare
from retile.plan import build_tree, moved_conditions
from retile.questions import order_kept
from retile.sets import Region

HEAD = "void settle(int n, double s[restrict n], const double t[restrict n], const double a[restrict n][n])\n{\n"
LOOPS = "    for (int i = 0; i < n; i++) {\n"
SUM = "            for (int j = 0; j < n; j++)\n                s[i] += a[i][j];\n    }\n}\n"

BODIES = {
    "after a statement": "        s[i] = 0;\n        if (i > 0)\n",
    "after a statement and on data": "        s[i] = 0;\n        if (t[i] > 0)\n",
    "on data, in the other branch": "        if (t[i] > 0)\n            s[i] = 2;\n        else\n",
    "on data and an iterator": "        s[i] = 0;\n        if (i > 1 && t[i] > 0)\n",
    "on an iterator and data, twice": "        if (t[i] > 0 && i < n - 1)\n        if (i >= 0 && t[i] > 1)\n",
    "after two statements, one inside another": "        s[i] = 0;\n        s[i] += 1;\n        if (i > 1)\n        if (t[i] > 0)\n",
}


@pytest.mark.parametrize("body", BODIES.values(), ids=BODIES.keys())
@pytest.mark.parametrize("plan", ["i:4 j:8 i j", "i:2 j i", "j:3 i j"])
def test_all_statements_beside_a_condition_are_kept(body, plan):
    text = HEAD + LOOPS + body + SUM
    answer = ask(text, 3)
    assert answer.verdict(plan) == "legal"
    for n in (0, 1, 3, 9):
        assert compare(text, answer.variant(plan).text, "settle", {"n": n}) == []


def test_the_known_part_of_a_condition_narrows_what_it_guards():
    text = HEAD + LOOPS + """        if (i > 0 && i < n - 1 && t[i] > 0.5)
            s[i - 1] = a[i + 1][i];
        else
            s[i] = 1;
    }
}
"""
    nest = ask(text, 3).opened.nest
    inside = {s.id: Region.where(s.domain).at({"n": 5}).points(("i",)) for s in nest.statements}
    assert {id: sorted(i for (i,) in points) for id, points in inside.items()} == {
        "4": [0, 1, 2, 3, 4], "5": [1, 2, 3], "7": [0, 1, 2, 3, 4]}


def test_a_part_that_needs_memory_to_stay_is_data():
    text = """void settle(int n, double *restrict s, int *restrict hits)
{
    for (int i = 0; i < n; i++)
        if (i > hits[0] && s[i] > 0)
            hits[i] = 1;
}
"""
    assert {p.symbol for p in ask(text, 3).opened.nest.parameters} == {"n"}


OWN_DATA = """void settle(int n, int m, double s[n + 1], double a[n + 1][m + 1])
{{
    for (int i = 0; i < n; i++) {{
{body}
    }}
}}
"""
ROW = "for (int j = 0; j < m; j++)\n                {};"
CHANGES = {
    "its branch": ("        if (s[i] > 0.25)\n            " + ROW.format("s[i] -= a[i][j]"), "legal"),
    "its branch, beside others": (
        "        s[i] += 1;\n        if (s[i] > 0.25) {\n            a[i][m] = 1;\n            " + ROW.format("s[i] -= a[i][j]") +
        "\n            s[i] *= 2;\n        }\n        s[i + 1] = s[i];", "legal"),
    "one of two, nested": (
        "        if (s[i] > 0.25)\n        if (i < n - 1 && a[i + 1][m] < 3)\n            " + ROW.format("a[i + 1][m] += s[i]"), "legal"),
    "an affine one outside": ("        if (i > 1)\n        if (s[i - 2] > 0.25)\n            " + ROW.format("s[i - 2] += a[i][j]"),
                              "legal"),
    "the other branch asks again": (
        "        if (s[i] > 0.25)\n            " + ROW.format("s[i] -= a[i][j]") + "\n        else\n            s[i] = 7;", "illegal"),
}


@pytest.mark.parametrize("change", CHANGES)
@pytest.mark.parametrize("plan", ["i:4 i j", "i:2 i j:3 j", "i j:2 j"])
def test_a_condition_that_its_own_branch_changes_is_asked_once(change, plan):
    """Chunks that leave the order as it is leave the condition ahead of the loops that it guards."""
    body, verdict = CHANGES[change]
    text = OWN_DATA.format(body=body)
    answer = ask(text, 3)
    assert answer.verdict(plan) == verdict
    for remainder in ("clamp", "peel") if verdict == "legal" else ():
        for sizes in ((0, 2), (1, 1), (3, 4), (5, 3), (7, 7)):
            variant = answer.variant(f"{plan}; remainder {remainder}").text
            assert compare(text, variant, "settle", dict(zip("nm", sizes, strict=True))) == []


def test_a_condition_that_is_asked_too_late_is_found_in_the_tree():
    """With the rows cut outermost the condition is asked for each chunk, and its branch has changed what it reads."""
    answer = ask(OWN_DATA.format(body=CHANGES["its branch"][0]), 3)
    plan = "j:2 i j"
    judgement, nest, dependences = answer.check(plan), answer.opened.nest, answer.opened.dependences
    assert judgement.verdict.value == "illegal"
    tree = build_tree(nest, judgement.plan)
    moved = [nest.statement(id) for id in moved_conditions(nest, judgement.plan)]
    assert [s.line for s in moved] == [4]
    edges = [edge for edge in dependences.edges if edge.source != edge.target]
    assert order_kept(tree, dependences, edges, moved) and not order_kept(tree, dependences, edges)
