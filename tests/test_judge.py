"""The judge: right variants pass, every fault is noticed and said in words."""

from __future__ import annotations

import re

import pytest
from judge_variants import GROUPS, PRODUCT, Group
from oracle import compare, judge_of
from oracle_text import TooLong, Undefined, Unsupported, parse
from retile.judge.judge import Judge, Setting
from retile.judge.program import Program
from retile.judge.tags import Book

RIGHT = [(group, name) for group, held in GROUPS.items() for name in held.right]
WRONG = [(group, name) for group, held in GROUPS.items() for name in held.wrong]


def differences(group: Group, body: str, reassociate: bool = False) -> list[str]:
    """What the judge says of a body at all sizes of its group."""
    function = re.search(r"(\w+)\(", group.head).group(1)
    found = []
    for sizes in group.sizes:
        found += compare(group.text(group.original), group.text(body), function, sizes, reassociate=reassociate)
    return found


@pytest.mark.parametrize(("group", "name"), RIGHT)
def test_right_variants_pass(group, name):
    assert differences(GROUPS[group], GROUPS[group].right[name]) == []


@pytest.mark.parametrize(("group", "name"), WRONG)
def test_faults_are_noticed(group, name):
    body, said = GROUPS[group].wrong[name]
    assert body != GROUPS[group].original
    found = differences(GROUPS[group], body)
    assert found and any(said in text for text in found), found


def test_a_difference_is_told_with_both_histories():
    body = PRODUCT.wrong["operands of the sum swapped"][0]
    found = compare(PRODUCT.text(PRODUCT.original), PRODUCT.text(body), "form", {"n": 1})
    assert found == ["beams[0][0] ends with another value; in the original comes (beams[0][0] + (weights[0][0] * "
                     "echoes[0][0])), in the variant ((weights[0][0] * echoes[0][0]) + beams[0][0])"]


# ---------------------------------------------------------------- reassociation


def sums(body: str, head: str = "void f(int n, double *s, const double *a)") -> str:
    return f"{head} {{ {body} }}"


UP = "for (int i = 0; i < n; i++) s[0] += a[i];"
DOWN = "for (int i = n - 1; i >= 0; i--) s[0] += a[i];"
PARTS = """double even = 0.0, odd = 0.0; int i = 0;
    for (; i + 1 < n; i += 2) { even += a[i]; odd += a[i + 1]; }
    for (; i < n; i++) even += a[i];
    if (n > 0) s[0] += even + odd;"""


@pytest.mark.parametrize("variant", [DOWN, PARTS])
def test_sums_in_another_order_pass_only_where_that_is_allowed(variant):
    original, text = sums(UP), sums(variant)
    for n in (0, 1, 2, 5, 6):
        assert compare(original, text, "f", {"n": n}, reassociate=True) == []
    assert compare(original, text, "f", {"n": 5})


@pytest.mark.parametrize("variant", [
    DOWN.replace("i >= 0", "i > 0"), DOWN.replace("+= a[i]", "+= a[i] * a[i]"), DOWN.replace("a[i]", "a[0]"),
    DOWN.replace("+=", "-="), UP.replace("a[i];", "2 * a[i];"),
    "for (int i = 0; i < n; i++) s[0] = a[i] + s[0] / 1;"])  # fmt: skip
def test_reassociation_hides_no_other_fault(variant):
    assert compare(sums(UP), sums(variant), "f", {"n": 4}, reassociate=True)


def test_cells_that_were_excepted_are_counted():
    judge = Judge(Program(parse(sums(UP)), Book()), "f")
    variant = Program(parse(sums(DOWN)), judge.book)
    rules = judge.rules(variant, reassociate=True)
    assert judge.compare(variant, Setting.of({"n": 4}), rules) == []
    assert rules.excepted == {"s[0]"}


@pytest.mark.parametrize(("type", "update", "passes"), [
    ("unsigned", "s[0] += a[i]", True), ("unsigned", "s[0] *= a[i]", True),
    ("unsigned char", "s[0] += (unsigned)a[i]", True),
    ("int", "s[0] ^= a[i]", True), ("int", "s[0] = a[i] > s[0] ? a[i] : s[0]", True), ("int", "s[0] += a[i]", False),
    ("unsigned", "s[0] = s[0] * 3 + a[i]", False), ("float", "s[0] += a[i]", False),
    ("double", "s[0] = a[i] > s[0] ? a[i] : s[0]", False)])  # fmt: skip
def test_what_cannot_round_or_overflow_may_run_in_any_order(type, update, passes):
    """ISO C11 6.2.5, paragraph 9: unsigned arithmetic wraps; bitwise operators and integer extremes are exact."""
    head = f"void f(int n, {type} *s, const {type} *a)"
    original, variant = (sums(order.replace("s[0] += a[i]", update), head) for order in (UP, DOWN))
    found = compare(original, variant, "f", {"n": 5})
    assert (found == []) == passes, found


# ---------------------------------------------------------------- C that the judge meets


def test_where_the_original_is_undefined_it_is_no_measure():
    outside = PRODUCT.text(PRODUCT.original.replace("k < n", "k <= n"))
    with pytest.raises(Undefined):
        compare(outside, outside, "form", {"n": 3})
    endless = sums("for (unsigned i = n; i >= 0; i--) s[0] += a[0];")
    with pytest.raises(TooLong):
        compare(endless, endless, "f", {"n": 3}, steps=1000)


@pytest.mark.parametrize(("body", "what"), [
    ("printf(\"%d\", n);", "call of printf"), ("goto end; end: ;", "jump"), ("switch (n) { case 1: ; }", "jump"),
    ("union { int i; float f; } u; u.i = n;", "union"), ("s[0] = ((float *)a)[0];", "another type")])  # fmt: skip
def test_what_is_not_interpreted_is_said(body, what):
    with pytest.raises(Unsupported, match=what):
        judge_of(sums(body), "f").at(Setting.of({"n": 2}))


def test_pointers_into_the_same_memory():
    """A variant that holds a value across a store is right only where the arrays do not overlap."""
    original = sums("for (int i = 1; i < n; i++) s[i] = a[0] + s[i - 1];")
    held = sums("if (n > 1) { double first = a[0]; for (int i = 1; i < n; i++) s[i] = first + s[i - 1]; }")
    judge = judge_of(original, "f")
    variant = Program(parse(held), judge.book)
    assert judge.compare(variant, Setting((("n", 4),))) == []
    assert judge.compare(variant, Setting((("n", 4),), (("a", "s", 0),))) == []
    assert judge.compare(variant, Setting((("n", 4),), (("a", "s", 16),)))


def test_branches_follow_the_numbers():
    original = sums("for (int i = 0; i < n; i++) { double x = a[i]; while (x > 1.0 || x < -1.0) x *= 0.25; s[i] = x; }")
    other = original.replace("x > 1.0 ||", "x > 0.5 ||")
    assert compare(original, original, "f", {"n": 9}) == []
    assert compare(original, other, "f", {"n": 9})


def test_iterators_stand_for_their_values():
    """A number that is computed from iterators does not depend on which iterators they were."""
    original = sums("for (int i = 0; i < n; i++) s[i] = a[i] * (i + 1);")
    chunks = sums("for (int b = 0; b < n; b += 3) for (int r = 0; r < 3 && b + r < n; r++) "
                  "s[b + r] = a[b + r] * (b + 1 + r);")
    assert compare(original, chunks, "f", {"n": 7}) == []


def test_histories_are_exact_for_long_chains():
    original = sums("for (int t = 0; t < n; t++) for (int i = 1; i < 9; i++) s[i] = 0.5 * (s[i - 1] + s[i]);")
    other = original.replace("i < 9; i++) s[i] = 0.5", "i < 9; i++) s[i] = (t == 3 && i == 4 ? 0.25 * 2 : 0.5)")
    assert compare(original, original, "f", {"n": 300}) == []
    assert compare(original, other, "f", {"n": 300})


def test_many_variants_of_one_original_run_it_once(monkeypatch):
    judge = Judge(Program(parse(PRODUCT.text(PRODUCT.original)), Book()), "form")
    runs = []
    run = judge.original.run
    monkeypatch.setattr(judge.original, "run", lambda *a: runs.append(a) or run(*a))
    for body in PRODUCT.right.values():
        judge.compare(Program(parse(PRODUCT.text(body)), judge.book), Setting.of({"n": 3}))
    assert len(runs) == 1


def test_names_and_depth_that_python_does_not_take():
    """C compilers take dollar signs in names and any word of Python; Python nests no more than 20 loops."""
    strange = sums("double deep$ = a[0], class = 1; for (int $i = 0; $i < n; $i++) s[$i] = deep$ + class;")
    assert compare(strange, strange, "f", {"n": 3}) == []
    deep = sums("".join(f"for (int i{k} = 0; i{k} < 1; i{k}++) " for k in range(25)) + "s[0] = 1;")
    with pytest.raises(Unsupported, match="nested too deep"):
        judge_of(deep, "f").at(Setting.of({"n": 2}))
