"""Bounds of loops around a nest that stand in memory, and jumps ahead of it: facts, where nothing stores in between."""

from __future__ import annotations

import pytest
from nest_execution import opened
from retile.affine import formula_names
from retile.nest import read_nest

HEAD = "struct grid { int n, m; double *d; };\nvoid other(void);\n"
KNOWN = {
    "right inside": "for (int t = 1; t < g->n; t++)",
    "two loops": "for (int s = 0; s < 3; s++) for (int t = 1; t < g->n; t++)",
    "under a condition": "for (int t = 1; t < g->n; t++) if (a[t] > 0)",
    "spelled in another way": "for (int t = 1; t < (*g).n; t++)",
    "behind a local": "for (int t = 1; t < g->n; t++) { double x = a[t]; x += 1;",
}
UNKNOWN = {
    "a store before": "for (int t = 1; t < g->n; t++) { a[t] = 1;",
    "a call before": "for (int t = 1; t < g->n; t++) { other();",
    "the nest itself, in a loop between": "for (int t = 1; t < g->n; t++) for (int s = 0; s < 3; s++)",
    "the pointer changes": "for (int t = 1; t < g->n; t++) { g = h;",
    "the iterator changes": "for (int t = 1; t < g->n; t++) { t += 2;",
    "another structure": "for (int t = 1; t < h->n; t++)",
    "a pointer of the block": "for (int t = 1; t < g->n; t++) { struct grid *g = h;",
    "a bound that is read once": "for (int t = g->n; t < 99; t++)",
}


def facts(around: str, directory) -> list[str]:
    """The facts of the innermost loop of a function that speak of ``t`` and a member."""
    ends = "}" * around.count("{")
    text = (f"{HEAD}void survey(struct grid *g, struct grid *h, double *a) {{\n    {around}\n"
            f"    for (int i = t; i < g->n; i++)\n        a[i] = a[i - 1];\n    {ends}\n}}\n")
    nest = read_nest(opened(text, directory), 5).nest
    names = [] if nest is None else [formula_names(fact) for fact in nest.facts]
    return [str(found) for found in names if "t" in found and any(name.endswith("n") for name in found)]


@pytest.mark.parametrize("around", KNOWN.values(), ids=KNOWN.keys())
def test_a_bound_in_memory_is_known(around, tmp_path):
    assert facts(around, tmp_path)


@pytest.mark.parametrize("around", UNKNOWN.values(), ids=UNKNOWN.keys())
def test_a_bound_in_memory_that_may_have_changed_is_not(around, tmp_path):
    assert not facts(around, tmp_path)


@pytest.mark.parametrize(("jump", "known"), [
    ("if (t < 2) continue;", True), ("if (t < 2) break;", True), ("if (t < 2) return;", True), ("if (t < 2) { a[0] = 1; continue; }", True),
    ("if (t < 2) a[0] = 1;", False), ("if (n < 2) continue; n = 3;", False), ("for (;;) { if (t < 2) break; }", False)])
def test_what_a_jump_ahead_of_the_nest_leaves_is_known(jump, known, tmp_path):
    text = (f"void survey(int n, double *a) {{\n    for (int t = 0; t < 9; t++) {{\n    {jump}\n"
            "    for (int i = 0; i < n; i++)\n        a[i + t] = a[i];\n    }\n}\n")
    nest = read_nest(opened(text, tmp_path), 4).nest
    assert any("constant=-2" in str(fact) for fact in nest.facts) == known
