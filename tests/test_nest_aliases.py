"""Different names for the same memory: a nest knows of every meeting, or says what it assumes."""

from __future__ import annotations

import time
from collections import Counter
from dataclasses import replace

import pytest
from asked import ask
from nest_aliases import ALIASES, missed
from nest_execution import opened
from oracle import TooLong, Undefined, Unsupported, compare
from random_aliases import AliasCase, alias_case
from retile.model import Nest, RetileError
from retile.nest import read_nest, read_nests


def nest_of(text: str, directory) -> Nest:
    found = next(f for f in read_nests(opened(text, directory)) if f.outermost)
    assert found.nest is not None, found.refusals
    return found.nest


@pytest.mark.parametrize("text", ALIASES.values(), ids=ALIASES.keys())
def test_no_meeting_is_missed(text, tmp_path):
    assert missed(text, nest_of(text, tmp_path), {"n": 4}) == []


def test_the_search_for_missed_meetings_finds_one(tmp_path):
    text = ALIASES["an offset set later"]
    nest = nest_of(text, tmp_path)
    assert missed(text, replace(nest, assumptions=()), {"n": 4})


# A pointer is read as a number, or the other way round; a value that grows with every iteration is too deep to compare.
NO_GROUND = (Undefined, TooLong, Unsupported, AttributeError, TypeError, RecursionError)


def hunted(seed: int, directory) -> Counter:
    """Look for missed meetings in the nests of a seed's function, and for wrong variants; what was seen, by kind."""
    case, seen = alias_case(seed), Counter()
    source = opened(case.text, directory)
    for line in case.lines[:-1]:
        found = read_nest(source, line)
        if found.nest is None:
            seen[found.refusals[0].code] += 1
            continue
        for n in (3, 4):
            try:
                problems = missed(case.text, found.nest, {"n": n}, case.run, 8)
                blind = missed(case.text, replace(found.nest, assumptions=()), {"n": n}, case.run, 8)
            except NO_GROUND:
                continue
            assert not problems, f"seed {seed}, line {line}, n = {n}: {problems[:3]}\n{case.text}"
            seen.update({"nests run": 1, "meetings under two names": bool(blind)})
        if line == case.lines[-2]:
            seen.update(variants(seed, case, line))
    return seen


def variants(seed: int, case: AliasCase, line: int) -> Counter:
    """Legal variants, which test their assumptions: what they compute when arguments overlap."""
    seen: Counter = Counter()
    answer, plan = ask(case.text, line), ("j i", "i:2 j i", "j:2 i j", "i j:3 j")[seed % 4]
    if answer.verdict(plan) != "legal":
        return seen
    try:
        text = answer.variant(plan, trust=False).text
    except RetileError as problem:
        pytest.fail(f"seed {seed}: legal, but no variant: {problem}")
    for n in (3, 4):
        try:
            wrong = compare(case.text, text, case.run, {"n": n}, steps=5000)
            if wrong and compare(case.text, case.text, case.run, {"n": n}, steps=5000):
                continue  # a pointer that is read as a number is another one in every run
        except NO_GROUND:
            continue
        assert not wrong, f"seed {seed}, plan {plan}, n = {n}: {wrong[:3]}\n{text}"
        seen["variants run"] += 1
    return seen


@pytest.mark.parametrize("group", range(4))
def test_no_meeting_of_a_random_function_is_missed(group, tmp_path):
    seen, end = Counter(), time.monotonic() + 8
    for seed in range(1000 * group, 1000 * group + 80):
        seen += hunted(seed, tmp_path)
        if time.monotonic() > end and min(seen[kind] for kind in ENOUGH) > 4:
            break
    assert min(seen[kind] for kind in ENOUGH) > 4, seen


ENOUGH = ("nests run", "meetings under two names", "variants run")


@pytest.mark.long
def test_no_meeting_of_many_random_functions_is_missed(tmp_path, pytestconfig):
    first, count = pytestconfig.getoption("--seed") * 1_000_000, pytestconfig.getoption("--pairs")
    seen = Counter()
    for seed in range(first, first + count):
        seen += hunted(seed, tmp_path)
    print(seen)
    assert min(seen[kind] for kind in ENOUGH) > count / 20, seen


ONE_NAME = {
    "spelled in three ways": ["g->h"],
    "the first row in two ways": ["p[0]"],
    "rows of pointers": ["p", "p[]"],
    "one and many": ["g.h", "g.h[]"],
    "fixed and many rows": ["g->rows", "g.rows[]"],
    "a pointer of the nest": ["g->h"],
}


@pytest.mark.parametrize(("name", "expected"), ONE_NAME.items(), ids=ONE_NAME.keys())
def test_one_pointer_has_one_name(name, expected, tmp_path):
    nest = nest_of(ALIASES[name], tmp_path)
    used = {access.storage for statement in nest.statements for access in statement.accesses}
    assert sorted(used - {"s"}) == expected


def test_rows_and_their_table_have_one_assumption(tmp_path):
    nest = nest_of(ALIASES["fixed and many rows"], tmp_path)
    assert [a.text for a in nest.assumptions] == [
        "the rows that g.rows points to do not overlap each other or g.rows itself"
    ]


def test_an_assumption_names_two_storages_or_rows(tmp_path):
    for name, text in ALIASES.items():
        for assumption in nest_of(text, tmp_path).assumptions:
            assert len(set(assumption.storages)) == len(assumption.storages), (name, assumption)


HIDDEN = {
    "a size": "void sweep(int i, double *a) {\n for (int k = 0; k < i; k++)\n"
    "  for (int i = 0; i < 5; i++)\n   a[k + i] = 0; }",
    "an outer iterator": "void sweep(int n, double *a) {\n for (int i = 0; i < n; i++)\n"
    "  for (int i = 0; i < 5; i++)\n   a[i] = 0; }",
    "a file's variable": "extern int n;\nvoid sweep(int n, double *a) {\n for (int k = 0; k < n; k++) {\n"
    "  extern int n;\n  for (int i = 0; i < n; i++)\n   a[k + i] = 0; } }",
}


@pytest.mark.parametrize("text", HIDDEN.values(), ids=HIDDEN.keys())
def test_a_size_or_iterator_that_is_hidden_is_refused(text, tmp_path):
    found = next(f for f in read_nests(opened(text, tmp_path)) if f.outermost)
    assert found.nest is None and found.refusals[0].code == "hidden-name"


def test_sibling_loops_may_share_a_name(tmp_path):
    text = (
        "void sweep(int n, double *a) {\n for (int k = 0; k < n; k++) {\n  for (int i = 0; i < 5; i++) a[i] = 0;\n"
        "  for (int i = 0; i < 5; i++) a[i] += k; } }"
    )
    assert [loop.id for loop in nest_of(text, tmp_path).loops] == ["k", "i@3", "i@4"]


def test_a_bound_is_written_in_names_that_exist_ahead_of_the_nest(tmp_path):
    text = (
        "struct swath { int n; double *d; };\nvoid sweep(struct swath *g, struct swath *f) {\n"
        " for (int i = 0; i < g->n; i++) {\n  struct swath *s = f;\n"
        "  for (int j = 0; j < s->n; j++) g->d[i] += s->d[j];\n } }"
    )
    assert {parameter.text for parameter in nest_of(text, tmp_path).parameters} == {"g->n", "f->n"}
