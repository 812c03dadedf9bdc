"""What stands around a nest may name variables that inner declarations hide: nothing is known of those."""

from __future__ import annotations

import pytest
from nest_execution import opened
from retile.affine import formula_names
from retile.nest import read_nest

# What stands around, with a variable that is hidden; the nest counts to the inner one.
AROUND = {
    "an outer bound": "for (int t = 0; t < n; t++) { int n = m;",
    "a condition": "if (n > 10) { int n = m;",
    "an early return": "if (n < 10) return; { int n = m;",
    "an outer iterator": "for (int n = 3; n < 9; n++) { int n = m;",
    "a parameter of the file": "if (rows > 3) { int rows = m; int n = rows;",
}


@pytest.mark.parametrize("around", AROUND.values(), ids=AROUND.keys())
def test_nothing_is_known_of_a_hidden_variable(around, tmp_path):
    text = ("int rows;\nvoid survey(int n, int m, double *restrict depth) {\n"
            f"    {around}\n    for (int i = 0; i < n; i++)\n        depth[i] = i;\n    }}\n}}\n")
    nest = read_nest(opened(text, tmp_path), 4).nest
    assert nest is not None
    assert not any(formula_names(fact) & {"n", "rows"} for fact in nest.facts), nest.facts


def test_what_is_not_hidden_is_known(tmp_path):
    text = ("void survey(int n, double *restrict depth) {\n    if (n > 10) { int m = n;\n    for (int i = 0; i < n; i++)\n"
            "        depth[i] = m;\n    }\n}\n")
    assert any(formula_names(fact) == {"n"} for fact in read_nest(opened(text, tmp_path), 3).nest.facts)


def test_an_extent_does_not_speak_of_the_variable_that_hides_its_own(tmp_path):
    text = ("void survey(int n, int m, double depth[n][n]) {\n    { int n = m;\n    for (int i = 0; i < n; i++)\n"
            "        depth[i][0] = i;\n    }\n}\n")
    nest = read_nest(opened(text, tmp_path), 3).nest
    assert nest is not None and all(extent is None for storage in nest.storages for extent in storage.shape)
