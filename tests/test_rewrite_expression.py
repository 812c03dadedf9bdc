"""Forms as C expressions: the value that the form has, without an overflow on the way, at the ends of the types too."""

from __future__ import annotations

import itertools
from pathlib import Path

import pytest
from rewriting import WARNINGS, compile_and_run

from retile.affine import Affine, at_most
from retile.model import CType
from retile.rewrite.bounds import without_alignment
from retile.rewrite.expression import Expression, NoRoom, Scope, comparison, condition, express
from retile.sets import Region

A = Affine.of
x, y = A("x"), A("y")
TYPES = {name: CType(name, bits, signed) for name, bits, signed in (
    ("int", 32, True), ("unsigned", 32, False), ("short", 16, True), ("unsigned char", 8, False), ("long", 64, True),
    ("unsigned long", 64, False))}


def scope_of(types: dict[str, str], bounds: dict[str, tuple[int, int]] | None = None) -> Scope:
    """A place where these names have all the values of their types, or those between the bounds."""
    facts, operands = [], {}
    for name, type in types.items():
        low, high = (bounds or {}).get(name, (TYPES[type].smallest, TYPES[type].largest))
        facts += [at_most(low, A(name)), at_most(A(name), high)]
        operands[name] = Expression(name, TYPES[type])
    return Scope(Region.where(*facts), operands)


def values_of(type: str) -> list[int]:
    """Values around zero and around both ends of a type."""
    low, high = TYPES[type].smallest, TYPES[type].largest
    return sorted({low, low + 1, low + 7, high - 7, high - 1, high, *(v for v in (-9, -8, -1, 0, 1, 7, 8, 64)
                                                                     if low <= v <= high)})


FORMS = [x - 1, x + 64, y - x, x * 2 + y, -x, 5 - x, x.floor_div(8), x.floor_div(8) * 8, x.mod(8), (x - 3).floor_div(4) * 12,
         x.floor_div(2) - y, x * 3 - y * 2 + 1, x.mod(3) + y, (x + y).floor_div(5) * 5]
PAIRS = [("int", "int"), ("unsigned", "int"), ("short", "unsigned char"), ("unsigned", "unsigned"), ("unsigned char", "short")]


@pytest.mark.parametrize(("a", "b"), PAIRS, ids=str)
def test_expressions_have_the_forms_value(a: str, b: str, tmp_path: Path) -> None:
    scope = scope_of({"x": a, "y": b})
    texts = [express(form, scope).text for form in FORMS]
    compared = [(left, sign, right, comparison(left, sign, right, scope).text)
                for left, right in itertools.combinations(FORMS[:6], 2) for sign in ("<", ">=")]
    checks = []
    for vx in values_of(a):
        for vy in values_of(b):
            values = {"x": vx, "y": vy}
            checks.append(f"check({spelled(vx)}, {spelled(vy)}, (const long long[]){{ "
                          + ", ".join(spelled(form.evaluate(values)) for form in FORMS) + " }, \""
                          + "".join("01"[truth(left, sign, right, values)] for left, sign, right, _ in compared) + "\");")
    body = "".join(f"    if (({text}) != want[{at}]) fail({at}, x, y);\n" for at, text in enumerate(texts))
    body += "".join(f"    if (({text}) != (truths[{at}] == '1')) fail(100 + {at}, x, y);\n"
                    for at, (_, _, _, text) in enumerate(compared))
    program = ("#include <stdio.h>\n#include <stdlib.h>\n"
               "static void fail(int at, long long x, long long y) { printf(\"%d at %lld %lld\\n\", at, x, y); exit(1); }\n"
               f"static void check({a} x, {b} y, const long long *want, const char *truths) {{\n{body}}}\n"
               "int main(void) {\n" + "\n".join(checks) + "\nreturn 0; }\n")
    compile_and_run(tmp_path, program, warnings=(*WARNINGS, "-Wno-type-limits"), optimize="-O0",
                    flags=("-fsanitize=undefined", "-fno-sanitize-recover=all"))


def spelled(value: int) -> str:
    """An integer as C of type long long, or unsigned where that is too small."""
    return f"(-{-value - 1}LL - 1)" if value < 0 else f"{value}LL" if value < 1 << 63 else f"{value}ULL"


def truth(left: Affine, sign: str, right: Affine, values: dict[str, int]) -> bool:
    """The comparison in plain integers."""
    a, b = left.evaluate(values), right.evaluate(values)
    return a < b if sign == "<" else a >= b


def test_what_fits_is_written_plainly() -> None:
    scope = scope_of({"x": "int", "y": "int"}, {"x": (0, 1000), "y": (0, 1000)})
    assert [express(form, scope).text for form in (x + 64, x - 1, y * 2 - x, x.floor_div(8) * 8, x.mod(8))] == \
        ["x + 64", "x - 1", "2 * y - x", "x - x % 8", "x % 8"]


def test_what_fits_nowhere_is_refused() -> None:
    scope = scope_of({"x": "long", "y": "unsigned long"})
    for form in (x + 1, y * 2, x - y):
        with pytest.raises(NoRoom):
            express(form, scope)


def test_a_sum_that_may_wrap_is_compared_by_its_distance() -> None:
    scope = scope_of({"x": "unsigned long", "y": "unsigned long"}).knowing(at_most(x, y))
    assert comparison(x + 64, "<", y, scope).text == "y - x > 64"


@pytest.mark.parametrize("by", [1, 7, -1, -7])
def test_relations_hold_where_no_type_holds_the_sum(by: int, tmp_path: Path) -> None:
    """``x <= y + by`` at the ends of every type, under the sanitizer."""
    parts, calls = [], []
    for number, type in enumerate(TYPES):
        text = condition(at_most(x, y + by), scope_of({"x": type, "y": type})).text
        parts.append(f"static int relation{number}({type} x, {type} y) {{ return {text}; }}")
        calls += [f"if (relation{number}(({type}){spelled(a)}, ({type}){spelled(b)}) != {int(a <= b + by)}) return 1;"
                  for a in values_of(type) for b in values_of(type)]
    program = "\n".join(parts) + "\nint main(void) {\n" + "\n".join(calls) + "\nreturn 0; }\n"
    compile_and_run(tmp_path, program, warnings=(*WARNINGS, "-Wno-type-limits"), optimize="-O0",
                    flags=("-fsanitize=undefined", "-fno-sanitize-recover=all"))


def test_a_distance_of_one_reads_as_the_relation_itself() -> None:
    scope = scope_of({"x": "long", "y": "long"})
    assert condition(at_most(x, y + 1), scope).text == "x <= y || x - 1 <= y"
    assert condition(at_most(x, y - 1), scope).text == "x < y"


@pytest.mark.parametrize("sign", ["<", ">"])
def test_a_choice_asks_for_the_numerator_alone(sign: str) -> None:
    """floor(x / d) + k against b, by a comparison of x, for all small values."""
    for divisor, k, b in itertools.product((2, 3, 16), (-2, 0, 1), (-3, 0, 4)):
        asked, other = without_alignment(x.floor_div(divisor) + k, y + b, sign)
        for vx, vy in itertools.product(range(-40, 40), (-2, 0, 1)):
            values = {"x": vx, "y": vy}
            one, two = asked.evaluate(values), other.evaluate(values)
            left, right = vx // divisor + k, vy + b
            assert (one < two if sign == "<" else one > two) is (left < right if sign == "<" else left > right)
