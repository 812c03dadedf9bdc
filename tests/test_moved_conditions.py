"""Conditions between the loops that a plan moves are tested where the loops end up; nothing else is left out."""

from __future__ import annotations

import pytest
from asked import ask
from oracle import compare
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
