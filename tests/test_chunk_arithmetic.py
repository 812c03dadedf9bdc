"""Chunk loops near the ends of types, and chunk sizes that are constants of the program.

Each nest notes the values of its iterator in their order, in one number.  It is called with all pairs of values around
the smallest and the largest of the type and around 0 for which the original ends, however few rounds it makes there; the
reference is the definition of the loop in 128 bits.
"""

from __future__ import annotations

import subprocess
from pathlib import Path

import pytest
from rewriting import HEADERS, SANITIZERS, case_of, compile_and_run, compilers, renamed

from retile.model import RetileError

TYPES = {"unsigned char": ("0", "UCHAR_MAX"), "short": ("SHRT_MIN", "SHRT_MAX"), "int": ("INT_MIN", "INT_MAX"),
         "unsigned": ("0", "UINT_MAX"), "size_t": ("0", "SIZE_MAX")}
# The header with the first value, how many steps it makes (an expression of the 128-bit values), and the step.
HEADS = {
    "i = first; i <= last; i++": ("last - first + 1", 1),
    "i = first; i < last; i += 3": ("(last - first + 2) / 3", 3),
    "i = 0; i <= last; i += 2": ("(last + 2) / 2", 2),
    "i = first; i >= last; i -= 2": ("(first - last + 2) / 2", -2),
    "i = first; i-- > last; ": ("first - last", -1),
}
PLANS = ("i:7 i", "i:K_PAGE i", "i:K_MOST i", "i:7 i; remainder peel", "i:40 i:7 i", "i:K_MOST i:K_THREE i")
CONSTANTS = "#define K_THREE 3u\n#define K_PAGE 4096 / sizeof(double)\n#define K_MOST 2147483647\n"

MAIN = """
typedef __int128 wide;
static unsigned one[1], two[1];
int main(void) {
    static const int away[] = { 0, 1, 2, 3, 6, 7, 8, 13, 14, 15, 40, 41, 80, 300 };
    const wide low = LOW, high = HIGH, near[] = { low, 0, high };
    int calls = 0;
    for (int at = 0; at < 3 * 28 * 28; at++) {
        const int a = at / 3 % 28, b = at / 84;
        const wide first = near[at % 3] + (a < 14 ? away[a] : -away[a - 14]);
        const wide last = near[at % 3] + (b < 14 ? away[b] : -away[b - 14]);
        if (first < low || first > high || last < low || last > high)
            continue;
        CALLS
    }
    return calls > 500 ? 0 : 3;
}
"""
# The loop starts at START; the value with which it ends must fit, as in the original; one below 0 wraps only for --.
CALL = """{
            const wide start = START;
            wide rounds = ROUNDS;
            if (rounds < 0) rounds = 0;
            const wide end = start + rounds * (STEP);
            if (rounds < 5000 && end <= high && (end >= low || MAY_WRAP)) {
                unsigned all = 7;
                for (wide r = 0; r < rounds; r++)
                    all = all * 31u + (unsigned)(start + r * (STEP));
                calls++;
                VARIANTS
            }
        }"""
COMPARED = """two[0] = 7; NAME((TYPE)first, (TYPE)last, two);
                if (two[0] != all) { printf("differ: NAME %lld %lld\\n", (long long)first, (long long)last); return 1; }
                """


def nest_of(type: str, head: str) -> str:
    return f"""#include <stddef.h>
void survey({type} first, {type} last, unsigned *restrict to)
{{
    for ({type} {head})
        to[0] = to[0] * 31u + (unsigned)i;
}}
"""


@pytest.mark.parametrize("type", TYPES)
def test_chunks_near_the_ends_of_a_type(type: str, tmp_path: Path) -> None:
    functions, calls = [], []
    for number, (head, (rounds, step)) in enumerate(HEADS.items()):
        case = case_of(tmp_path, nest_of(type, head))
        names = [f"original{number}"]
        functions.append(renamed(nest_of(type, head), "survey", names[0]))
        for at, plan in enumerate(PLANS):
            names.append(f"variant{number}_{at}")
            functions.append(f"/* {plan} */\n" + renamed(case.variant(plan).text, "survey", names[-1]))
        compared = "".join(COMPARED.replace("NAME", name) for name in names).replace("TYPE", type)
        begin = "0" if head.startswith("i = 0") else "first - 1" if "--" in head else "first"
        calls.append(CALL.replace("START", begin).replace("ROUNDS", rounds).replace("STEP", str(step))
                     .replace("MAY_WRAP", "low == 0" if "--" in head else "0").replace("VARIANTS", compared))
    low, high = TYPES[type]
    main = MAIN.replace("LOW", low).replace("HIGH", high).replace("CALLS", "\n        ".join(calls))
    compiler = compilers()[list(TYPES).index(type) % len(compilers())]
    compile_and_run(tmp_path, CONSTANTS + HEADERS + "\n".join(functions) + main, compiler=compiler,
                    warnings=("-std=gnu11", "-w"), flags=SANITIZERS)


COUNT = """void survey(int first, int last, int *to)
{
    int i;
    for (i = first; i < last; i++)
        to[0] = to[0] * 31 + i % 7;
}
"""


@pytest.mark.parametrize("standard", ["gnu90", "c99", "c11"])
@pytest.mark.parametrize(("size", "fits"), [
    ("1", True), ("64u", True), ("64ul", True), ("32 + 32", True), ("4096 / sizeof(double)", True), ("'a'", True),
    ("2147483647", True), ("0", False), ("-3", False), ("0u - 1", False), ("2147483648", False), ("5000000000", False),
    ("1.5", False), ("first", False),
])
def test_a_constant_is_a_number_of_iterations_or_does_not_compile(size: str, fits: bool, standard: str, tmp_path: Path) -> None:
    text = case_of(tmp_path, COUNT, flags=(f"-std={standard}",)).variant("i:ROWS i").text
    for compiler in compilers():
        file = tmp_path / "variant.c"
        file.write_text(text)
        built = subprocess.run([compiler, f"-std={standard.replace('c99', 'gnu99')}", "-Wall", "-Wextra", "-Wconversion",
                                "-c", f"-DROWS={size}", str(file), "-o", str(tmp_path / "variant.o")],
                               check=False, capture_output=True, text=True, timeout=60)
        assert (built.returncode == 0) is fits, built.stderr
        if fits:
            assert not built.stderr
        else:
            assert "error: " in built.stderr and ("ROWS" in built.stderr or "rows" in built.stderr)


def test_a_variable_is_no_constant(tmp_path: Path) -> None:
    with pytest.raises(RetileError, match="'last' is a variable, not a constant"):
        case_of(tmp_path, COUNT).variant("i:last i")


def test_the_name_for_a_constant_is_new(tmp_path: Path) -> None:
    text = case_of(tmp_path, COUNT.replace("first", "rows")).variant("i:ROWS i").nest_text
    assert "enum { rows_ = ROWS };" in text and "i_from += rows_)" in text
