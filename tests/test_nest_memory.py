"""What a nest's text says about memory: which names may overlap, what must not change, which variables are private."""

from __future__ import annotations

import pytest
from nest_execution import opened
from retile.model import Nest
from retile.nest import read_nests


def nest_of(text: str, directory) -> Nest:
    found = next(f for f in read_nests(opened(text, directory)) if f.outermost)
    assert found.nest is not None, found.refusals
    return found.nest


def assumptions(nest: Nest) -> list[str]:
    return [f"{a.code.value}: {a.text}" for a in nest.assumptions]


OVERLAPS = {
    "two pointers": (
        "void sweep(int n, double *to, const double *from) {\n for (int i = 0; i < n; i++) to[i] = from[i];\n}",
        ["no-overlap: from and to do not overlap"],
    ),
    "only reads": (
        "double sweep(int n, const double *a, const double *b) {\n double s = 0;\n"
        " for (int i = 0; i < n; i++) s += a[i] * b[i];\n return s; }",
        [],
    ),
    "restrict target": (
        "void sweep(int n, double *restrict to, const double *from) {\n"
        " for (int i = 0; i < n; i++) to[i] = from[i];\n}",
        [],
    ),
    "restrict array parameter": (
        "void sweep(int n, double to[restrict], double *from) {\n for (int i = 0; i < n; i++) to[i] = from[i];\n}",
        [],
    ),
    "a pointer that may come from a restrict one": (
        "void sweep(int n, double *restrict to, double *c) {\n double *b = c; if (n > 3) b = to + 1;\n"
        " for (int i = 0; i < n; i++) to[i] = b[i];\n}",
        ["no-overlap: b and to do not overlap"],
    ),
    "declared arrays": (
        "static double raw[9], clean[9];\nvoid sweep(void) {\n for (int i = 0; i < 9; i++) clean[i] = raw[i];\n}",
        [],
    ),
    "a static array that no pointer reaches": (
        "static double raw[9];\nvoid sweep(int n, double *to) {\n for (int i = 0; i < n; i++) to[i] = raw[i];\n}",
        [],
    ),
    "a static array that a pointer reaches": (
        "static double raw[9];\ndouble *window(void) { return raw; }\nvoid sweep(int n, double *to) {\n"
        " for (int i = 0; i < n; i++) to[i] = raw[i];\n}",
        ["no-overlap: raw and to do not overlap"],
    ),
    "a global array": (
        "double raw[9];\nvoid sweep(int n, double *to) {\n for (int i = 0; i < n; i++) to[i] = raw[i];\n}",
        ["no-overlap: raw and to do not overlap"],
    ),
    "a local array": (
        "void sweep(double *from) {\n double t[9];\n for (int i = 0; i < 9; i++) t[i] = from[i];\n from[0] = t[3]; }",
        [],
    ),
    "a global variable as bound": (
        "int pings;\nvoid sweep(double *to) {\n for (int i = 0; i < pings; i++) to[i] = 1;\n}",
        ["unchanged: the stores to to do not change pings"],
    ),
    "a static variable as bound": (
        "static int pings;\nvoid sweep(double *to) {\n for (int i = 0; i < pings; i++) to[i] = 1;\n}",
        [],
    ),
    "a local whose address is known": (
        "double *ask(int *);\nvoid sweep(void) {\n int n; double *to = ask(&n);\n"
        " for (int i = 0; i < n; i++) to[i] = 1;\n}",
        ["unchanged: the stores to to do not change n"],
    ),
    "a local whose address no argument knows": (
        "void ask(int *);\nvoid sweep(double *to) {\n int n; ask(&n);\n for (int i = 0; i < n; i++) to[i] = 1;\n}",
        [],
    ),
    "a global pointer": (
        "double *level;\nvoid sweep(int n) {\n for (int i = 0; i < n; i++) level[i] = 1;\n}",
        ["unchanged: the stores to level do not change level"],
    ),
    "structures behind pointers": (
        "struct swath { int n; double *d; };\nvoid sweep(struct swath *to, struct swath *from) {\n"
        " for (int i = 0; i < to->n; i++) to->d[i] = from->d[i];\n}",
        [
            "no-overlap: from->d and to->d do not overlap",
            "unchanged: the stores to to->d do not change to->n",
            "unchanged: the stores to to->d do not change from->d",
        ],
    ),
    "a structure by value": (
        "struct swath { int n; double *d; };\nvoid sweep(struct swath s) {\n"
        " for (int i = 0; i < s.n; i++) s.d[i] = 1;\n}",
        [],
    ),
    "rows of pointers": (
        "void sweep(int n, double **rows) {\n for (int i = 0; i < n; i++)\n"
        "  for (int j = 0; j < n; j++) rows[i][j] = 0;\n}",
        ["other: the rows that rows points to do not overlap each other or rows itself"],
    ),
    "rows of pointers that are only read": (
        "void sweep(int n, double *to, double **rows) {\n for (int i = 0; i < n; i++)\n"
        "  for (int j = 0; j < n; j++) to[i * n + j] = rows[i][j];\n}",
        ["no-overlap: rows and to do not overlap", "other: rows[] and to do not overlap"],
    ),
    "memory of its own": (
        "#include <stdlib.h>\nvoid sweep(int n, double *from) {\n double *t = malloc(n * sizeof *t); if (!t) return;\n"
        " for (int i = 0; i < n; i++) t[i] = from[i];\n free(t); }",
        [],
    ),
    "two pieces of memory": (
        "#include <stdlib.h>\nextern double level[];\ndouble *sweep(int n) {\n double *t, *u = (double *)calloc(n, 8);\n"
        " t = aligned_alloc(64, 64);\n for (int i = 0; i < n; i++) t[i] = u[i] + level[i];\n free(u); return t; }",
        [],
    ),
    "memory that another pointer leads to": (
        "#include <stdlib.h>\nvoid sweep(int n) {\n double *t = malloc(n * 8), *u; u = t + 1;\n"
        " for (int i = 0; i < n; i++) t[i] = u[i];\n}",
        ["no-overlap: u and t do not overlap"],
    ),
    "memory that is given away": (
        "#include <stdlib.h>\nstruct swath { double *d; };\nvoid sweep(int n, struct swath *s) {\n"
        " double *t = malloc(n * 8); s->d = t;\n for (int i = 0; i < n; i++) t[i] = s->d[i];\n}",
        ["no-overlap: s->d and t do not overlap"],  # *s was there before the memory
    ),
    "memory that may be an argument's": (
        "#include <stdlib.h>\nvoid sweep(int n, double *from) {\n double *t = malloc(n * 8); if (!t) t = from;\n"
        " for (int i = 0; i < n; i++) t[i] = from[i];\n}",
        ["no-overlap: from and t do not overlap"],
    ),
    "a pointer into the same array": (
        "void sweep(int n, double *a) {\n double *b = a + n;\n for (int i = 0; i < n; i++) b[i] = a[i];\n}",
        [],
    ),
    "a row of an outer loop": (
        "void sweep(int n, int m, double *a) {\n for (int i = 0; i < n; i++) {\n"
        "  double *row = a + i * m;\n  for (int j = 0; j < m; j++) row[j] = a[j];\n }\n}",
        [],
    ),
}


@pytest.mark.parametrize(("text", "expected"), OVERLAPS.values(), ids=OVERLAPS.keys())
def test_what_may_overlap_is_assumed_not_to(text, expected, tmp_path):
    assert [a for a in assumptions(nest_of(text, tmp_path)) if not a.startswith("row")] == expected


@pytest.mark.parametrize("text", [case[0] for case in OVERLAPS.values()], ids=OVERLAPS.keys())
def test_the_storages_of_an_assumption_exist(text, tmp_path):
    nest = nest_of(text, tmp_path)
    for assumption in nest.assumptions:
        for name in assumption.storages:
            assert nest.storage(name).name == name


VARIABLES = {
    "sum": (
        "double sweep(int n, double *a) {\n double s = 0;\n for (int i = 0; i < n; i++) s += a[i];\n return s; }",
        ["s accumulator () live"],
    ),
    "product, written out": (
        "void sweep(int n, double *a, double *out) {\n double p = 1;\n"
        " for (int i = 0; i < n; i++) p = a[i] * p;\n *out = p; }",
        ["p accumulator () live"],
    ),
    "a difference the other way": (
        "void sweep(int n, double *a, double *out) {\n double p = 1;\n"
        " for (int i = 0; i < n; i++) p = a[i] - p;\n *out = p; }",
        ["p carried () live"],
    ),
    "started afresh": (
        "void sweep(int n, double *a) {\n double s;\n for (int i = 0; i < n; i++) {\n  s = 0;\n"
        "  for (int j = 0; j < n; j++) s += a[i * n + j];\n  a[i * n] = s;\n }\n}",
        ["s private (i) dead"],
    ),
    "declared inside": (
        "void sweep(int n, double *a) {\n for (int i = 0; i < n; i++) {\n  double t = a[i];\n  a[i] = t * 2;\n }\n}",
        ["t private (i) dead"],
    ),
    "seen afterwards": (
        "double sweep(int n, double *a) {\n double t = 0;\n for (int i = 0; i < n; i++) {\n  t = a[i];\n"
        "  a[i] = t * 2;\n }\n return t; }",
        ["t private (i) live"],
    ),
    "overwritten afterwards": (
        "double sweep(int n, double *a) {\n double t;\n for (int i = 0; i < n; i++) {\n  t = a[i];\n"
        "  a[i] = t * 2;\n }\n t = 3; return t; }",
        ["t private (i) dead"],
    ),
    "overwritten on one path only": (
        "double sweep(int n, double *a) {\n double t = 0;\n for (int i = 0; i < n; i++) {\n  t = a[i];\n"
        "  a[i] = t * 2;\n }\n if (n > 3) t = 3;\n return t; }",
        ["t private (i) live"],
    ),
    "seen in the next round": (
        "void sweep(int n, double *a) {\n double t = 0; int k = 0;\n while (k++ < 3) {\n  a[0] = t;\n"
        "  for (int i = 0; i < n; i++) {\n   t = a[i];\n   a[i] = t * 2;\n  }\n }\n}",
        ["t private (i) live"],
    ),
    "two lives": (
        "void sweep(int n, double *a) {\n double t;\n for (int k = 0; k < n; k++) {\n"
        "  for (int i = 0; i < n; i++) {\n   t = a[i];\n   a[i] = t * 2;\n  }\n"
        "  for (int j = 0; j < n; j++) {\n   t = a[j];\n   a[j] = t * 3;\n  }\n }\n}",
        ["t private (k i) dead", "t@9 private (k j) dead"],
    ),
    "both branches": (
        "void sweep(int n, double *a) {\n double t;\n for (int i = 0; i < n; i++) {\n"
        "  if (a[i] > 0) t = 1;\n  else t = 2;\n  a[i] = t;\n }\n}",
        ["t private (i) dead"],
    ),
    "one branch": (
        "void sweep(int n, double *a) {\n double t = 0;\n for (int i = 0; i < n; i++) {\n"
        "  if (a[i] > 0) t = 1;\n  a[i] = t;\n }\n}",
        ["t carried () dead"],
    ),
    "half an expression": (
        "void sweep(int n, double *a) {\n double t = 0;\n for (int i = 0; i < n; i++) {\n"
        "  a[i] > 0 && (t = 1);\n  a[i] = t;\n }\n}",
        ["t carried () dead"],
    ),
    "the one before": (
        "void sweep(int n, double *a) {\n double before = 0;\n for (int i = 0; i < n; i++) {\n"
        "  double x = a[i];\n  a[i] = x - before;\n  before = x;\n }\n}",
        ["x private (i) dead", "before carried () dead"],
    ),
    "largest": (
        "void sweep(int n, double *a, double *out) {\n double p = 1;\n for (int i = 0; i < n; i++)\n"
        "  if (a[i] > p)\n   p = a[i];\n *out = p; }",
        ["p accumulator () live"],
    ),
    "a subscript of its own": (
        "void sweep(int n, int m, double *a) {\n int at;\n for (int i = 0; i < n; i++)\n"
        "  for (int j = 0; j < m; j++) {\n   at = i * m + j;\n   a[at] = 1;\n  }\n}",
        ["at private (i j) dead"],
    ),
    "only read": (
        "void sweep(int n, double gain, double *a) {\n for (int i = 0; i < n; i++) a[i] *= gain;\n}",
        ["gain parameter () dead"],
    ),
    "a static local": (
        "void sweep(int n, double *a) {\n for (int i = 0; i < n; i++) {\n  static int calls;\n  calls++;\n"
        "  a[i] = calls;\n }\n}",
        ["calls carried () live"],
    ),
    "jumps make everything live": (
        "double sweep(int n, double *a) {\n double t = 0;\nagain:\n"
        " for (int i = 0; i < n; i++) {\n  t = a[i];\n  a[i] = t * 2;\n }\n"
        " if (a[0] > 9) goto again;\n t = 3; return t; }",
        ["t private (i) live"],
    ),
}


@pytest.mark.parametrize(("text", "expected"), VARIABLES.values(), ids=VARIABLES.keys())
def test_what_a_nest_does_with_a_variable(text, expected, tmp_path):
    nest = nest_of(text, tmp_path)
    assert [
        f"{s.name} {s.scalar.value} ({' '.join(s.private_to)}) {'live' if s.live_after else 'dead'}"
        for s in nest.storages
        if s.scalar is not None
    ] == expected


ITERATORS = {
    "returned": ("int sweep(int n, double *a) {\n int i;\n for (i = 0; i < n; i++) a[i] = 1;\n return i; }", [True]),
    "set again": (
        "void sweep(int n, double *a) {\n int i;\n for (i = 0; i < n; i++) a[i] = 1;\n"
        " for (i = 0; i < n; i++) a[i] += 1;\n}",
        [False],
    ),
    "declared in the header": ("void sweep(int n, double *a) {\n for (int i = 0; i < n; i++) a[i] = 1;\n}", [False]),
    "the inner one": (
        "int sweep(int n, double *a) {\n int i, j;\n for (i = 0; i < n; i++)\n"
        "  for (j = 0; j < n; j++) a[j] = 1;\n return j; }",
        [False, True],
    ),
}


@pytest.mark.parametrize(("text", "expected"), ITERATORS.values(), ids=ITERATORS.keys())
def test_whether_an_iterator_can_be_seen_afterwards(text, expected, tmp_path):
    assert [loop.iterator_live_after for loop in nest_of(text, tmp_path).loops] == expected
