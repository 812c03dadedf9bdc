"""Loops, rows, facts and texts of nests: C in, what is known of it out."""

from __future__ import annotations

import pytest
from asked import ask
from nest_execution import opened
from retile.affine import Affine
from retile.model import AssumptionCode, Nest
from retile.nest import read_nests
from retile.nest.readable import bound_text, formula_text
from retile.tree import Guard, Leaf, occurrences


def nest_of(text: str, directory, outermost: bool = True) -> Nest:
    found = next(f for f in read_nests(opened(text, directory)) if f.outermost == outermost)
    assert found.nest is not None, found.refusals
    return found.nest


def sweep(header: str, body: str = "depth[i] = 1;", parameters: str = "int n") -> str:
    includes = "#include <stddef.h>\n#include <stdint.h>\n"
    return f"{includes}void sweep({parameters}, double *depth) {{\n    {header}\n        {body}\n}}\n"


LOOPS = [
    ("for (int i = 0; i < n; i++)", "int n", "i: 0 .. n - 1 by 1, first `0`, `< n`"),
    ("for (int i = n - 1; i >= 0; --i)", "int n", "i: n - 1 .. 0 by -1, first `n - 1`, `>= 0`"),
    ("for (size_t i = n; i-- > 0;)", "size_t n", "i: n - 1 .. 0 by -1, first `n - 1`, `--> 0`"),
    ("for (int i = 1; n > i; i += 3)", "int n", "i: 1 .. n - 1 by 3, first `1`, `< n`"),
    ("for (int i = /* rim */ 1; i != n; i = i + 1)", "int n", "i: 1 .. n - 1 by 1, first `1`, `!= n`"),
    ("for (int i = 0; 2 * i < n; i++)", "int n", "i: 0 .. (n - 1) / 2 by 1, first `0`, `<= (n - 1) / 2`"),
    (
        "for (int i = 0; i < n && i <= w; i++)",
        "int n, int w",
        "i: 0 .. (n - 1 < w ? n - 1 : w) by 1, first `0`, `<= (n - 1 < w ? n - 1 : w)`",
    ),
    ("for (unsigned i = n - 1; i < n; i--)", "unsigned n", "i: n - 1 .. 0 by -1, first `n - 1`, `--> 0`"),
    ("for (uint8_t i = 0; i < 200; i += 50)", "int n", "i: 0 .. 199 by 50, first `0`, `< 200`"),
    (
        "for (int i = n > 4 ? n : 4; i < 99; i += 2)",
        "int n",
        "i: (n > 4 ? n : 4) .. 98 by 2, first `n > 4 ? n : 4`, `< 99`",
    ),
]


@pytest.mark.parametrize(("header", "parameters", "expected"), LOOPS, ids=[case[0] for case in LOOPS])
def test_a_header_is_read(header, parameters, expected, tmp_path):
    loop = nest_of(sweep(header, parameters=parameters), tmp_path).loops[0]
    assert (
        f"{loop.id}: {bound_text(loop.first)} .. {bound_text(loop.last)} by {loop.step}, first `{loop.first_text}`, "
        f"`{loop.relation} {loop.bound_text}`" == expected
    )


ASSUMED = [
    ("for (unsigned i = 0; i < n - 1; i++)", "unsigned n", ["no-wrap: n >= 1"]),
    ("for (size_t i = 0; i < n - 1; i++)", "size_t n", ["no-wrap: n >= 1"]),
    ("for (size_t i = 1; i + 1 < n; i++)", "size_t n", []),
    ("for (unsigned i = m; i != n; i++)", "unsigned n, unsigned m", ["relation: m <= n"]),
    ("for (unsigned i = 0; i < n; i += 4)", "unsigned n", ["no-wrap: n <= 4294967292"]),
    ("for (int i = 0; i < n; i++)", "size_t n", []),
    ("for (size_t i = n; i > 0; i--)", "int n", ["no-wrap: n >= 0"]),
    ("for (int i = n - 1; i < (int)m; i++)", "int n, size_t m", ["no-wrap: m <= 2147483647"]),
]


@pytest.mark.parametrize(("header", "parameters", "expected"), ASSUMED, ids=[f"{c[0]} {c[1]}" for c in ASSUMED])
def test_what_unsigned_arithmetic_needs_is_assumed(header, parameters, expected, tmp_path):
    nest = nest_of(sweep(header, "depth[0] = 1;", parameters), tmp_path)
    assert [f"{a.code.value}: {a.text}" for a in nest.assumptions] == expected


def test_a_guard_around_the_nest_makes_an_assumption_needless(tmp_path):
    text = (
        "void sweep(unsigned n, double *depth) {\n if (n >= 1)\n  for (unsigned i = 0; i < n - 1; i++) depth[i] = 1;\n}"
    )
    early = (
        "void sweep(unsigned n, double *depth) {\n if (n == 0) return;\n"
        " for (unsigned i = 0; i < n - 1; i++) depth[i] = 1;\n}"
    )
    changed = (
        "void sweep(unsigned n, double *depth) {\n if (n >= 1) {\n  n -= 3;\n"
        "  for (unsigned i = 0; i < n - 1; i++) depth[i] = 1;\n }\n}"
    )
    assert nest_of(text, tmp_path).assumptions == () == nest_of(early, tmp_path).assumptions
    assert [a.text for a in nest_of(changed, tmp_path).assumptions] == ["n >= 1"]


ROWS = [
    ("depth[i * ld + j]", "i, j", ("ld", "1"), ["m <= ld"]),
    ("depth[i + j * ld]", "j, i", ("ld", "1"), ["n <= ld"]),
    ("depth[i * m + j]", "i, j", ("m", "1"), []),
    ("depth[(i + 1) * (m + 2) + j + 1]", "i + 1, j + 1", ("(m + 2)", "1"), []),
    ("*(depth + i * m + (m - 1 - j))", "i, m - j - 1", ("m", "1"), []),
    ("depth[(i * m + j) * 3 + 2]", "i, 3 * j + 2", ("3 * m", "1"), []),
    ("depth[n * m + i * m + j]", "i + n, j", ("m", "1"), []),
    ("depth[i * 8 + j % 8]", "8 * i + j - 8 * (j / 8)", (), []),
]


@pytest.mark.parametrize(("cell", "subscripts", "strides", "assumed"), ROWS, ids=[case[0] for case in ROWS])
def test_rows_of_a_flattened_array_are_found(cell, subscripts, strides, assumed, tmp_path):
    text = sweep("for (int i = 0; i < n; i++) for (int j = 0; j < m; j++)", f"{cell} = 1;", "int n, int m, int ld")
    nest = nest_of(text, tmp_path)
    access = next(a for a in nest.statements[0].accesses if a.write)
    assert access.subscripts is not None
    assert ", ".join(bound_text(form) for form in access.subscripts) == subscripts
    assert nest.storage("depth").strides == strides
    assert [a.text for a in nest.assumptions if a.code is AssumptionCode.ROW_BOUND] == assumed


def test_strides_that_disagree_leave_all_accesses_open(tmp_path):
    head = "for (int i = 0; i < n; i++) for (int j = 0; j < m; j++)"
    parameters = "int n, int m, const double *restrict echo"
    read = nest_of(sweep(head, "depth[i*m + j] = echo[i*n + j] + echo[j*m + i];", parameters), tmp_path)
    assert [a.subscripts is None for a in read.statements[0].accesses] == [True, False]  # the two reads are one
    both = nest_of(sweep(head, "depth[i*n + j] = depth[i*m + j];", parameters), tmp_path)
    assert [(a.write, a.subscripts) for a in both.statements[0].accesses] == [(False, None), (True, None)]


@pytest.mark.parametrize("cell", ["depth[place[i]]", "depth[i * i]", "depth[count++]", "depth[i * m + place[j]]"])
def test_a_write_to_an_unknown_subscript_may_be_to_any_cell(cell, tmp_path):
    head = "unsigned count = 0; for (int i = 0; i < n; i++) for (int j = 0; j < m; j++)"
    nest = nest_of(sweep(head, f"{cell} = i;", "int n, int m, const int *restrict place"), tmp_path)
    assert [a.subscripts for a in nest.statements[0].accesses if a.storage == "depth" and a.write] == [None]


INDIRECT = """\
void paint(int n, int m, double *restrict mosaic, const double *restrict depth, const int *restrict place) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            mosaic[place[i * m + j]] += depth[i * m + j];
}
"""


@pytest.mark.parametrize(
    ("plan", "verdict"),
    [("i j", "legal"), ("i:4 i j", "legal"), ("i:4 i:2 i j", "legal"), ("j i", "unproven"), ("j:8 i j", "unproven")],
)
def test_indirect_writes_keep_their_order(plan, verdict):
    judged = ask(INDIRECT, 2).check(plan)
    assert judged.verdict.value == verdict
    assert all(one.source == one.target == "4" for one in judged.unproven)


def test_a_table_is_read_in_two_steps(tmp_path):
    nest = nest_of(
        sweep("for (int i = 0; i < n; i++)", "depth[i] = depth[n + cell[i]];", "int n, const int *restrict cell"),
        tmp_path,
    )
    assert [(a.storage, a.write, a.subscripts) for a in nest.statements[0].accesses] == [
        ("cell", False, (Affine.of("i"),)),
        ("depth", False, None),
        ("depth", True, (Affine.of("i"),)),
    ]


def test_ids_tell_loops_and_statements_apart(tmp_path):
    text = """\
void sweep(int n, double *depth, double *echo) {
    for (int t = 0; t < n; t++) {
        for (int i = 0; i < n; i++) { depth[i] = 1; echo[i] = 2; depth[i] += 3; }
        for (int i = 0; i < n; i++) depth[i] = 1; for (int i = 0; i < n; i++) echo[i] = 1;
    }
}
"""
    nest = nest_of(text, tmp_path)
    assert [loop.id for loop in nest.loops] == ["t", "i@3", "i@4:9", "i@4:51"]
    assert [s.id for s in nest.statements] == ["3", "3b", "3c", "4", "4b"]
    assert nest.statement("3b").loops == ("t", "i@3") and nest.statement("3b").text == "echo[i] = 2;"


def test_conditions_become_guards(tmp_path):
    text = """\
void sweep(int n, double *depth, const double *restrict echo) {
    for (int i = 0; i < n; i++) {
        if (i % 2 == 1)
            depth[i] = 0;
        else if (echo[i] > 3)
            depth[i] = 1;
    }
}
"""
    nest = nest_of(text, tmp_path)
    known, other = nest.tree[0].body
    assert isinstance(known, Guard) and known.condition is not None
    assert isinstance(other, Guard) and isinstance(other.body[0], Leaf) and other.body[0].statement == "5"
    assert isinstance(other.body[1], Guard) and other.body[1].condition is None
    assert [(s.id, [(a.storage, a.certain) for a in s.accesses]) for s in nest.statements] == [
        ("4", [("depth", True)]),
        ("5", [("echo", True)]),
        ("6", [("depth", False)]),
    ]
    assert [place.leaf.statement for place in occurrences(nest.tree)] == ["4", "5", "6"]


def test_facts_of_an_inner_nest_come_from_its_outer_loops(tmp_path):
    text = """\
void sweep(int n, double depth[n][n]) {
    for (int i = n - 1; i > 0; i -= 2)
        for (int j = 0; j < i; j++)
            depth[i][j] = 0;
}
"""
    nest = nest_of(text, tmp_path, outermost=False)
    facts = " && ".join(formula_text(fact) for fact in nest.facts)
    assert "i >= 1" in facts and "i < n" in facts and "/ 2" in facts
    assert next(p for p in nest.parameters if p.symbol == "i").kind == "outer iterator"


@pytest.mark.parametrize(("body", "before"), [("i += depth[0] > 0;", True), ("n--;", False)])
def test_an_outer_loop_that_is_changed_inside_says_nothing(body, before, tmp_path):
    text = (
        f"void sweep(int n, double *depth) {{\n for (int i = 1; i < n; i++) {{\n  {body}\n"
        "  for (int j = 0; j < 9; j++) depth[i + j] = n;\n }\n}"
    )
    nest = nest_of(text, tmp_path, outermost=False)
    assert not any("i < n" in formula_text(fact) or "i >= 1" in formula_text(fact) for fact in nest.facts)


def test_reading_a_nest_leaves_the_source_unchanged(tmp_path):
    source = opened(sweep("for (int i = 0; i < n; i++)"), tmp_path)
    before = source.text
    assert read_nests(source) == read_nests(source) and source.text == before
