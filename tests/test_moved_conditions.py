"""Conditions between the loops that a plan moves are tested where the loops end up; nothing else is left out."""

from __future__ import annotations

import pytest
from asked import ask
from oracle import compare

HEAD = "void settle(int n, double s[restrict n], const double t[restrict n], const double a[restrict n][n])\n{\n"
LOOPS = "    for (int i = 0; i < n; i++) {\n"
SUM = "            for (int j = 0; j < n; j++)\n                s[i] += a[i][j];\n    }\n}\n"

BODIES = {
    "after a statement": "        s[i] = 0;\n        if (i > 0)\n",
    "after a statement and on data": "        s[i] = 0;\n        if (t[i] > 0)\n",
    "on data, in the other branch": "        if (t[i] > 0)\n            s[i] = 2;\n        else\n",
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
