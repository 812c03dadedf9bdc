"""Variants against their originals: compiled strictly, run under the sanitizers, at sizes around the chunks.

The body counts and mixes, so that an instance that is missing, repeated or out of its domain shows in the result.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from rewriting import case_of, compile_and_run, compilers, renamed, together

from retile.dependence import analyse
from retile.model import Verdict
from retile.plan import judge, parse_plan

SIZES = "0, 1, 2, 3, 7, 8, 9, 15, 16, 17, 31, 33, 38"

MAIN = """
enum { N = 40 };
static unsigned char one[N][N][2], two[N][N][2];
typedef void survey_function(TYPE n, TYPE m, unsigned char z[][40][2]);
int main(void) {
    static survey_function *const variants[] = { VARIANTS };
    static const int sizes[] = { SIZES };
    const size_t many = sizeof sizes / sizeof *sizes;
    for (size_t v = 0; v < sizeof variants / sizeof *variants; v++)
        for (size_t s = 0; s < many; s++)
            for (size_t t = 0; t < many; t++) {
                memset(one, 0, sizeof one);
                memset(two, 0, sizeof two);
                original((TYPE)sizes[s], (TYPE)sizes[t], one);
                variants[v]((TYPE)sizes[s], (TYPE)sizes[t], two);
                if (memcmp(one, two, sizeof one)) {
                    printf("variant %d differs at %d, %d\\n", (int)v, sizes[s], sizes[t]);
                    return 1;
                }
            }
    return 0;
}
"""

BODY = "z[i][j][0] += 1 + z[i][j][1]++;"


def nest(type: str, outer: str, inner: str, body: str = BODY) -> str:
    """A function around two loops, whose headers may say T for the type."""
    return (f"#include <stddef.h>\nvoid survey({type} n, {type} m, unsigned char z[][40][2]) {{\n    (void)n; (void)m;\n    {outer}\n        {inner}\n"
            f"            {body}\n}}\n").replace("T ", f"{type} ")


RECTANGLE = ("for (T i = 0; i < n; i++)", "for (T j = 0; j < m; ++j)")
TRIANGLE = ("for (T i = 0; i < n; i++)", "for (T j = i; j < n; j += 1)")
UNDER = ("for (T i = 0; i < n; i++)", "for (T j = 0; j <= i; j++)")
BAND = ("for (T i = 0; i < n; i++)", "for (T j = i > m ? i - m : 0; j < i; j++)")
CASES = [
    *((f"rectangle, {type}", type, RECTANGLE, ["j:8 i j", "i:4 j:8 i j", "i:12 i:4 j i", "i:5 i:2 i j"])
      for type in ("int", "unsigned", "size_t", "long", "short", "unsigned char")),
    *((f"triangle, {type}", type, TRIANGLE, ["j i", "i:4 j:8 i j", "j:8 i j"]) for type in ("int", "size_t")),
    *((f"under the diagonal, {type}", type, UNDER, ["j i", "i:4 j:8 i j"]) for type in ("int", "long", "size_t")),
    ("band", "int", BAND, ["j i", "i:4 j:8 i j", "j:8 i j"]),
    ("downwards", "int", ("for (T i = n - 1; i >= 0; i--)", "for (T j = m - 1; j >= 0; j -= 2)"),
     ["j i", "i:4 j:8 i j", "j:3 i j"]),
    ("steps", "int", ("for (T i = 0; i < n; i += 3)", "for (T j = 1; j <= m; j += 2)"), ["j i", "i:4 j:8 i j", "j:3 i j"]),
    ("steps that depend", "int", ("for (T i = n - 1; i >= 0; i -= 3)", "for (T j = i; j <= n - 1; j += 2)"),
     ["j i", "i:4 j:8 i j", "j:8 i j"]),
    ("down to zero, unsigned", "unsigned", ("for (T i = n; i-- > 0; )", "for (T j = m; j-- > 0; )"),
     ["j i", "i:4 j:8 i j", "j:3 i j", "i:6 i:2 j i"]),
    ("unequal", "int", ("for (T i = 0; i != n; i++)", "for (T j = 0; j < m; j++)"), ["j i", "i:4 j:8 i j"]),
    ("constant", "int", ("for (T i = 2; i < 37; i++)", "for (T j = 0; j < 32; j++)"), ["j:8 i j", "i:4 j:5 i j"]),
    ("skewed", "int", RECTANGLE, ["(i+j):8 i j", "i:4 (2*i+j):8 i j", "(i+2*j):8 i j", "(i+j) i", "i:4 (i+j):8 i (i+j)"]),
    ("guarded", "int", ("for (T i = 0; i < n; i++)", "for (T j = 0; j < m; j++)", "if (i + j < m) z[i][j][0] += 3;"),
     ["j i", "i:4 j:8 i j"]),
]


@pytest.mark.parametrize(("name", "type", "loops", "plans"), CASES, ids=[case[0] for case in CASES])
def test_variants_compute_what_the_original_computes(name: str, type: str, loops: tuple[str, ...], plans: list[str],
                                                     tmp_path: Path) -> None:
    text = nest(type, *loops)
    case = case_of(tmp_path, text)
    variants = [case.variant(plan, remainder=remainder).text for plan in plans for remainder in ("clamp", "peel")]
    names = ", ".join(f"variant{number}" for number in range(len(variants)))
    main = MAIN.replace("TYPE", type).replace("VARIANTS", names).replace("SIZES", SIZES)
    compile_and_run(tmp_path, together(text, variants, main), optimize="-O0")


def test_both_compilers_take_the_variants_without_a_warning(tmp_path: Path) -> None:
    parts = []
    for name, type, loops, plans in CASES:
        folder = tmp_path / name
        folder.mkdir()
        case = case_of(folder, nest(type, *loops))
        parts += [renamed(case.variant(plan, trust=True).text, "survey", f"variant{len(parts) + number}")
                  for number, plan in enumerate(plans[:2])]
    declared = [f"{re.search(r'void variant.*', part)[0].rstrip(' {')};\n{part}" for part in parts]  # type: ignore[index]
    for compiler in compilers():
        compile_and_run(tmp_path, "\n".join(declared) + "\nint main(void) { return 0; }\n", compiler=compiler, flags=())


EDGES = """
static int one, two;
int main(void) {
    RUNS
    return 0;
}
"""


@pytest.mark.parametrize(("type", "text", "plan", "calls"), [
    ("int", "for (int i = n; i < INT_MAX; i++)", "i:64 i", ["INT_MAX - 100, 0", "INT_MAX - 1, 0", "INT_MAX, 0"]),
    ("int", "for (int i = n; i >= INT_MIN + 5; i--)", "i:64 i", ["INT_MIN + 70, 0", "INT_MIN + 5, 0", "INT_MIN, 0"]),
    ("int", "for (int i = m; i < n; i++)", "i:64 i", ["INT_MAX, INT_MAX - 99", "INT_MIN + 99, INT_MIN", "-5, 7"]),
    ("int", "for (int i = m; i < n; i += 3)", "i:64 i", ["INT_MAX - 3, INT_MAX - 199", "INT_MIN + 9, INT_MIN"]),
    ("unsigned", "for (unsigned i = m; i < n; i++)", "i:64 i", ["UINT_MAX, UINT_MAX - 99", "70, 0"]),
    ("size_t", "for (size_t i = m; i < n; i++)", "i:64 i", ["SIZE_MAX, SIZE_MAX - 99", "70, 0", "0, 70"]),
    ("size_t", "for (size_t i = m; i < n; i++)", "i:96 i:6 i", ["SIZE_MAX, SIZE_MAX - 99", "70, 0", "0, 70"]),
    ("size_t", "for (size_t i = n; i-- > m; )", "i:64 i", ["SIZE_MAX, SIZE_MAX - 99", "70, 0", "64, 0", "0, 70"]),
    ("long", "for (long i = m; i < n; i++)", "i:64 i", ["LONG_MAX, LONG_MAX - 99", "LONG_MIN + 99, LONG_MIN"]),
    ("long", "for (long i = m; i > n; i--)", "i:64 i", ["LONG_MIN, LONG_MIN + 99", "LONG_MAX - 99, LONG_MAX"]),
    ("unsigned char", "for (unsigned char i = m; i < n; i++)", "i:64 i", ["255, 0", "255, 254", "3, 7", "200, 200"]),
    ("short", "for (short i = n; i > m; i--)", "i:100 i", ["32767, 31000", "-32768, 5", "5, -32768"]),
], ids=str)
def test_bounds_at_the_limits_of_a_type(type: str, text: str, plan: str, calls: list[str], tmp_path: Path) -> None:
    """The loops touch one cell per iteration number, so a lost or repeated one shows; wrapping would not end."""
    text = (f"#include <limits.h>\n#include <stdint.h>\n#include <stddef.h>\nvoid survey({type} n, {type} m, int *sum) {{\n"
            f"    (void)n; (void)m;\n    {text}\n        sum[0] += (int)(i % 1000) + 1;\n}}\n")
    case = case_of(tmp_path, text)
    variants = [case.variant(plan, remainder=remainder).text for remainder in ("clamp", "peel")]
    runs = "\n    ".join(f"one = two = 0; original({call}, &one); variant{v}({call}, &two); if (one != two) return 1;"
                         for call in calls for v in range(2))
    compile_and_run(tmp_path, together(text, variants, EDGES.replace("RUNS", runs)))


def test_the_full_part_has_a_trip_count_that_the_compiler_knows(tmp_path: Path) -> None:
    for type in ("int", "size_t"):
        text = nest(type, *RECTANGLE)
        peeled = case_of(tmp_path, text).variant("i:4 j:8 i j", remainder="peel").nest_text
        first = "(int)" if type == "int" else ""
        assert f"for ({type} j = {first}j_from; j < {first}j_from + 8; ++j)" in peeled
        assert peeled.count(BODY) == 2


def test_the_same_call_gives_the_same_text(tmp_path: Path) -> None:
    text = nest("size_t", *UNDER)
    one, two = (case_of(tmp_path, text).variant("i:4 j:8 i j", remainder="peel") for _ in range(2))
    assert one.text == two.text


@pytest.mark.parametrize("remainder", ["clamp", "peel"])
def test_chunks_whose_size_is_a_constant_of_the_build(remainder: str, tmp_path: Path) -> None:
    text = nest("int", *RECTANGLE)
    variant = case_of(tmp_path, text).variant("i:I_CHUNK j:J_CHUNK i j", remainder=remainder).text
    main = MAIN.replace("TYPE", "int").replace("VARIANTS", "variant0").replace("SIZES", SIZES)
    for sizes in (("-DI_CHUNK=1", "-DJ_CHUNK=1"), ("-DI_CHUNK=5", "-DJ_CHUNK=8"), ("-DI_CHUNK=100", "-DJ_CHUNK=3")):
        compile_and_run(tmp_path, together(text, [variant], main), flags=sizes)


WAITING = """void survey(int n, int m, unsigned char z[][40][2])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            unsigned sum = z[i][j][0];
            for (int k = 0; k < m; k++)
                sum = sum * 3 + z[k][(i + j) % 40][1];
            z[i][j][0] = (unsigned char)sum;
        }
}
"""


def test_values_that_wait_in_cells_come_back(tmp_path: Path) -> None:
    variants = [case_of(tmp_path, WAITING).variant(plan, remainder=remainder).text
                for plan in ("i:4 j:3 k:5 i j k", "i:4 j:3 k:5 k i j") for remainder in ("clamp", "peel")]
    assert all("sum_kept[" in text for text in variants)
    names = ", ".join(f"variant{number}" for number in range(len(variants)))
    main = MAIN.replace("TYPE", "int").replace("VARIANTS", names).replace("SIZES", SIZES)
    compile_and_run(tmp_path, together(WAITING, variants, main))


BRANCHES = """void survey(int n, int m, unsigned char z[][40][2])
{
    for (int i = 0; i < n; i++)
        if (i < m)
            for (int j = 0; j < n; j++)
                z[i][j][0] += 1 + z[i][j][1]++;
        else
            for (int j = 0; j < m; j++)
                z[i][j][0] += 2 + z[i][j][1]++;
}
"""


def test_branches_that_go_different_ways_keep_their_condition(tmp_path: Path) -> None:
    plans = ["j@5 i", "i:4 j@5 i", "j@5:4 i j@5 j@8", "j@8 i", "j@8:4 i j@8 j@5"]
    variants = [case_of(tmp_path, BRANCHES).variant(plan, remainder=remainder).text
                for plan in plans for remainder in ("clamp", "peel")]
    names = ", ".join(f"variant{number}" for number in range(len(variants)))
    main = MAIN.replace("TYPE", "int").replace("VARIANTS", names).replace("SIZES", SIZES)
    compile_and_run(tmp_path, together(BRANCHES, variants, main), optimize="-O0")


ASKED = """void survey(int n, int m, unsigned char z[][40][2])
{
    for (int i = 0; i < n; i++)
        if (z[i][39][0] % 2 == m % 2)
            for (int j = 0; j < 30; j++)
                z[i][j][1] += 1;
        else
            for (int j = 0; j < 30; j++)
                z[i][j][1] += 2;
}
"""


def test_branches_under_data_are_taken_apart(tmp_path: Path) -> None:
    separate = ASKED.replace("unsigned char z[][40][2]", "unsigned char z[][40][2], const unsigned char *restrict key") \
        .replace("z[i][39][0]", "key[i]")
    text = case_of(tmp_path, separate).variant("j@5 i", trust=True).nest_text
    assert "if (key[i] % 2 == m % 2) {" in text and "if (!(key[i] % 2 == m % 2)) {" in text


# The condition is asked again for every piece that the plan takes out of its branch: its data must not have changed.
CONDITIONS = {
    "the loop changes what was asked": ("z[i][20][0] > 2", "j = 0; j < m", "z[i][j][0] += 1;", "", "j i", False),
    "the loop starts behind what was asked": ("z[i][0][0] > 2", "j = 1; j < m", "z[i][j][0] += 1;", "", "j i", True),
    "nothing moves": ("z[i][20][0] > 2", "j = 0; j < m", "z[i][j][0] += 1;", "", "i j", True),
    "the other branch changes it": ("z[i][0][0] > 2", "j = 1; j < m", "z[i][j][0] += 1;",
                                    "else\n            for (int j = 0; j < m; j++)\n                z[i][j][0] -= 1;",
                                    "j@8 i", False),
    "neither branch changes it": ("z[i][0][0] > 2", "j = 1; j < m", "z[i][j][0] += 1;",
                                  "else\n            for (int j = 1; j < m; j++)\n                z[i][j][0] -= 1;",
                                  "j@5 j@8 i", True),
    "another row is asked": ("z[i + 1][0][0] > 2", "j = 0; j < m", "z[i][j][0] += 1;", "", "j i", False),
}


@pytest.mark.parametrize(("asked", "loop", "body", "otherwise", "plan", "legal"), CONDITIONS.values(), ids=CONDITIONS.keys())
def test_a_condition_is_asked_before_its_data_change(asked: str, loop: str, body: str, otherwise: str, plan: str,
                                                    legal: bool, tmp_path: Path) -> None:
    text = (f"void survey(int n, int m, unsigned char z[][40][2])\n{{\n    for (int i = 0; i < n; i++)\n        if ({asked})\n"
            f"            for (int {loop}; j++)\n                {body}\n        {otherwise}\n}}\n")
    case = case_of(tmp_path, text)
    judgement = judge(case.nest, analyse(case.nest), parse_plan(plan, case.nest))
    assert (judgement.verdict is Verdict.LEGAL) is legal, judgement
    if legal:
        main = MAIN.replace("TYPE", "int").replace("VARIANTS", "variant0").replace("SIZES", SIZES) \
            .replace("memset(one, 0, sizeof one);", "memset(one, 0, sizeof one); for (int r = 0; r < N; r++) one[r][0][0] = r * 7 % 5;") \
            .replace("memset(two, 0, sizeof two);", "memcpy(two, one, sizeof two);")
        compile_and_run(tmp_path, together(text, [case.variant(plan).text], main), optimize="-O0")


# A loop that the plan moves out of one that makes no round: with these bounds alone it would never end.
ENDLESS = {
    "largest int": ("int", "j = 0; j <= m; j++", "INT_MAX", "m < 2147483647"),
    "largest unsigned char": ("unsigned char", "j = 0; j <= m; j++", "255", "m < 255"),
    "largest size_t": ("size_t", "j = 0; j <= m; j++", "SIZE_MAX", "m < 18446744073709551615U"),
    "smallest int": ("int", "j = 5; j >= m; j--", "INT_MIN", "m >= -2147483647"),
    "two steps": ("int", "j = 0; j < m; j += 2", "INT_MAX", ""),
    "two steps, inclusive": ("int", "j = 1; j <= m; j += 2", "INT_MAX", "m <= 2147483646"),
    "behind its end": ("int", "j = 0; j != m; j++", "-1", "m >= 0"),
}


@pytest.mark.parametrize(("type", "header", "bound", "condition"), ENDLESS.values(), ids=ENDLESS.keys())
def test_a_loop_that_never_ran_still_ends(type: str, header: str, bound: str, condition: str, tmp_path: Path) -> None:
    text = (f"#include <stddef.h>\nvoid survey(int n, {type} m, unsigned char z[][64])\n{{\n    for (int i = 0; i < n; i++)\n"
            f"        for ({type} {header})\n            z[i][j & 63] += 1;\n}}\n")
    variants = [case_of(tmp_path, text).variant(plan).text for plan in ("j i", "j:64 i j")]
    assert f"if ({condition}" in variants[0]
    main = ("static unsigned char one[9][64], two[9][64];\nint main(void) {\n    variant0(0, " + bound + ", two);\n"
            "    for (int n = 0; n < 9; n++) for (int m = 0; m < 200; m++) {\n"
            f"        original(n, ({type})m, one); variant0(n, ({type})m, two); variant1(n, ({type})m, one); original(n, ({type})m, two);\n"
            "        if (memcmp(one, two, sizeof one)) return 1;\n    }\n    return 0;\n}\n")
    if type == "unsigned char":
        main = main.replace("m < 200", "m < 250")
    compile_and_run(tmp_path, together(text, variants, main))
