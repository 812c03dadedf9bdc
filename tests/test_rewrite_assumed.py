"""Tests of assumptions when the function is called, and iterators that are looked at after the nest."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from rewriting import case_of, compile_and_run, together

from retile.dependence import analyse
from retile.model import Verdict
from retile.nest.given import with_given
from retile.plan import is_legal, judge, parse_plan

FLAT = """#include <stddef.h>
void survey(int n, int m, int ld, double *to, const double *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i * ld + j] = from[j * ld + i] + 1;
}
"""

# Every overlap of the two windows: the variant must give what the original gives, by whichever loops.
OVERLAPS = """
static double one[400], two[400];
int main(void) {
    static const int sizes[] = { 0, 1, 5, 8, 9 };
    for (int s = 0; s < 25; s++)
        for (int ld = 9; ld < 12; ld++)
            for (int shift = -150; shift <= 150; shift += 1) {
                int n = sizes[s / 5], m = sizes[s % 5];
                for (int k = 0; k < 400; k++)
                    one[k] = two[k] = k * 7 % 31;
                original(n, m, ld, one + 150 + (shift < 0 ? 0 : shift), one + 150 - (shift < 0 ? shift : 0));
                variant0(n, m, ld, two + 150 + (shift < 0 ? 0 : shift), two + 150 - (shift < 0 ? shift : 0));
                if (memcmp(one, two, sizeof one)) { printf("differ: %d %d %d %d\\n", n, m, ld, shift); return 1; }
            }
    original(INT_MIN, 3, 9, one, two); variant0(INT_MIN, 3, 9, one, two);
    original(3, INT_MIN, -9, one, two); variant0(3, INT_MIN, -9, one, two);
    original(0, INT_MAX, INT_MAX, 0, 0); variant0(0, INT_MAX, INT_MAX, 0, 0);
    return 0;
}
"""


@pytest.mark.parametrize("plan", ["j i", "i:4 j:4 j i"])
def test_overlapping_windows_run_the_original(plan: str, tmp_path: Path) -> None:
    variant = case_of(tmp_path, FLAT).variant(plan)
    original = FLAT[FLAT.index("    for"):FLAT.rindex("}")]
    assert "    } else {\n" + "".join(f"    {line}" for line in original.splitlines(True)) + "    }" in variant.nest_text
    compile_and_run(tmp_path, together(FLAT, [variant.text], OVERLAPS))


MANY_LINES = """void survey(int n, int ld, double *to, const double *from, const char **word)
{
\tfor (int i = 0; i < n; i++) {
\t\t/* turned:
\t\t   rows first */
\t\tfor (int j = 0; j < n; j++) {
\t\t\tto[i * ld + j] = from[j * ld + i] + sizeof "a \\
b";

/* at the edge
  of the page */
\t\t\tto[i * ld + j] -= \\
\t\t\t\t2;
\t\t}
\t}
\t(void)word;
}
"""


def test_the_original_moves_by_whole_lines(tmp_path: Path) -> None:
    """Lines of a string stay; a comment moves if all of it can."""
    text = case_of(tmp_path, MANY_LINES).variant("i:8 j:8 i j").nest_text
    fallback = text[text.index("else {\n") + len("else {\n"):text.rindex("\n\t}")]
    want = [line if line.startswith(("b\"", "/* at", "  of")) or not line else "\t" + line
            for line in MANY_LINES[MANY_LINES.index("\tfor"):MANY_LINES.index("\n\t(void)")].split("\n")]
    assert fallback.split("\n") == want


def test_windows_that_lie_apart_run_the_variant(tmp_path: Path) -> None:
    """A store in the variant alone shows which loops ran."""
    variant = case_of(tmp_path, FLAT).variant("j i")
    marked = variant.text.replace("+ 1;", "+ 2;", 1)  # the variant stands first, the original behind its else
    main = """
static double field[200];
int main(void) {
    variant0(4, 4, 10, field, field + 100);
    if (field[0] != 2) return 1;      /* apart: the variant ran */
    field[0] = 0;
    variant0(4, 4, 10, field, field + 34);
    if (field[0] != 2) return 2;      /* touching */
    field[33] = 0; field[0] = 0;
    variant0(4, 4, 10, field, field + 33);
    return field[0] != 1 ? 3 : 0;     /* one cell shared: the original ran */
}
"""
    compile_and_run(tmp_path, together(FLAT, [marked], main))


def test_trust_says_the_assumption_and_leaves_the_test_out(tmp_path: Path) -> None:
    variant = case_of(tmp_path, FLAT).variant("j i", trust=True)
    assert "Assumed: " in variant.nest_text and "do not overlap" in variant.nest_text
    assert "uintptr_t" not in variant.text and "if (" not in variant.nest_text and variant.includes == ()
    assert "--trust" in variant.nest_text


def test_a_member_behind_a_pointer_is_tested_against_the_stores(tmp_path: Path) -> None:
    text = """struct grid { int rows, cols; int *depth; };
void survey(struct grid *g, const int *from)
{
    for (int r = 0; r < g->rows; r++)
        for (int c = 0; c < g->cols; c++)
            g->depth[r * g->cols + c] = from[c * g->rows + r];
}
"""
    variant = case_of(tmp_path, text).variant("c r")
    main = """
static int apart[64], from[64];
static union { struct { int cells[18]; struct grid grid; } at; int cells[64]; } one, two;
int main(void) {
    struct grid plain = { 5, 7, apart };
    for (int k = 0; k < 64; k++)
        from[k] = k;
    variant0(&plain, from);
    for (int r = 0; r < 5; r++)
        for (int c = 0; c < 7; c++)
            if (apart[r * 7 + c] != c * 5 + r) return 1;
    for (int k = 0; k < 64; k++)
        from[k] = 3;
    one.at.grid = (struct grid){ 4, 5, one.cells };   /* the last stores change the number of rows and columns */
    two.at.grid = (struct grid){ 4, 5, two.cells };
    original(&one.at.grid, from);
    variant0(&two.at.grid, from);
    if (one.at.grid.rows != 3 || one.at.grid.cols != 3) return 3;
    one.at.grid.depth = two.at.grid.depth = 0;
    return memcmp(&one, &two, sizeof one) ? 2 : 0;
}
"""
    both = together(text, [variant.text], main)
    declaration = "struct grid { int rows, cols; int *depth; };"
    head, _, tail = both.partition(declaration)
    compile_and_run(tmp_path, head + declaration + tail.replace(declaration, ""), flags=("-fno-strict-aliasing",))
    assert "g_begin" in variant.nest_text and "do not change" in variant.nest_text


LIVE = """void survey(int n, int m, int z[][24], int *last)
{
    int i = -7, j = -8;
    (void)m;
    HEADERS
            z[i][j] += i + j;
    last[0] = i;
    last[1] = j;
}
"""

LIVE_MAIN = """
static int one[25][24], two[25][24];
int main(void) {
    for (int n = -3; n < 20; n++)
        for (int m = -3; m < 20; m++) {
            memset(one, 0, sizeof one); memset(two, 0, sizeof two);
            original(n, m, one, one[24]);
            CALLS
        }
    return 0;
}
"""


@pytest.mark.parametrize("headers", [
    ("for (i = 0; i < n; i++)", "for (j = 0; j < m; j++)"),
    ("for (i = 1; i <= n; i += 3)", "for (j = 2; j < m; j += 4)"),
    ("for (i = n - 1; i >= 0; i--)", "for (j = m; j > 1; j -= 2)"),
    ("for (i = 0; i < n; i++)", "for (j = i; j < n; j++)"),
    ("for (i = n; i-- > 0; )", "for (j = m; j-- > 2; )"),
], ids=str)
def test_iterators_end_with_the_originals_values(headers: tuple[str, str], tmp_path: Path) -> None:
    text = LIVE.replace("HEADERS", "\n        ".join(headers))
    case = case_of(tmp_path, text)
    variants = [case.variant(plan).text for plan in ("j:5 i:4 i j", "i:5 i j", "j i")]
    calls = "\n            ".join(f"memset(two, 0, sizeof two); variant{v}(n, m, two, two[24]); "
                                  f"if (memcmp(one, two, sizeof one)) return {v + 1};" for v in range(len(variants)))
    compile_and_run(tmp_path, together(text, variants, LIVE_MAIN.replace("CALLS", calls)))


def test_an_unsigned_iterator_ends_below_zero_as_the_originals_does(tmp_path: Path) -> None:
    text = """void survey(unsigned n, int *z, unsigned *last)
{
    unsigned i;
    for (i = n; i-- > 0; )
        z[i] += 1;
    last[0] = i;
}
"""
    variant = case_of(tmp_path, text).variant("i:8 i")
    main = """
int main(void) {
    for (unsigned n = 0; n < 20; n++) {
        int one[20] = { 0 }, two[20] = { 0 };
        unsigned i, j;
        original(n, one, &i); variant0(n, two, &j);
        if (memcmp(one, two, sizeof one) || i != j) return 1;
    }
    return 0;
}
"""
    compile_and_run(tmp_path, together(text, [variant.text], main))


# A bound that is read from memory which the stores may reach: what follows it, and its text in a call.
HELD = {
    "member of a structure without a tag":
        ("typedef struct { int rows, pad; } limits;", "const limits *g", "g->rows", "sizeof *g"),
    "element of an array": ("", "const int *limits", "limits[1]", "sizeof(int)"),
    "member of an element": ("struct two { int pad, rows; };", "const struct two *t", "t[1].rows", "sizeof(int)"),
}


@pytest.mark.parametrize(("declared", "argument", "bound", "size"), HELD.values(), ids=HELD.keys())
def test_a_bound_in_memory_is_compared_with_what_is_stored(declared: str, argument: str, bound: str, size: str,
                                                           tmp_path: Path) -> None:
    """The stores run over the memory of the bound, cell by cell: the variant must notice wherever it lies."""
    text = f"""void survey({argument}, int m, int ld, int *to)
{{
    for (int r = 0; r < {bound}; r++)
        for (int c = 0; c < m; c++)
            to[r * ld + c] = r + c;
}}
"""
    case = case_of(tmp_path, f"{declared}\n{text}" if declared else text)
    variant = case.variant("c r")
    assert size in variant.nest_text and "do not change" in variant.nest_text
    main = """
static int one[64], two[64];
int main(void) {
    for (int at = 0; at < 40; at++)
        for (int k = 0; k < 8; k++) {
            for (int i = 0; i < 64; i++)
                one[i] = two[i] = 5;
            original((const void *)(one + at), 4, 5, one + 12 + k);
            variant0((const void *)(two + at), 4, 5, two + 12 + k);
            if (memcmp(one, two, sizeof one)) { printf("differ: %d %d\\n", at, k); return 1; }
        }
    return 0;
}
"""
    body = variant.text.replace(declared + "\n", "") if declared else variant.text
    compile_and_run(tmp_path, declared + "\n" + together(text, [body], main), flags=("-fno-strict-aliasing",))


GATHER = """void survey(int n, int m, int ld, double *to, const double *from, const int *at)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < m; c++)
            to[r * ld + c] = from[at[c]];
}
"""


def test_cells_that_nobody_knows_ahead_leave_the_verdict_open(tmp_path: Path) -> None:
    case = case_of(tmp_path, GATHER)
    plan = parse_plan("c r", case.nest)
    judgement = judge(case.nest, analyse(case.nest), plan)
    assert judgement.verdict is Verdict.UNPROVEN and not is_legal(case.nest, analyse(case.nest), plan)
    (open_question,) = judgement.unproven
    assert "--distinct from,to" in open_question.needs and "restrict" in open_question.needs
    same = judge(case.nest, analyse(case.nest), parse_plan("r c", case.nest))
    assert same.verdict is Verdict.LEGAL  # nothing changes places


def test_what_the_user_gives_settles_it(tmp_path: Path) -> None:
    case = case_of(tmp_path, GATHER)
    given = replace(case, nest=with_given(case.nest, (), ("from,to",)))
    text = given.variant("c r").nest_text
    assert "Assumed: from and to do not overlap" in text and "at_end <= to_begin" in text
    assert "from_begin" not in text and "--distinct from,to" in text


CONDITIONAL = """int survey(int n, int m, unsigned char z[][24], const unsigned char *restrict key)
{
    int i, j = 3;
    for (i = 0; i < n; i++)
        if (key[i] > 2)
            for (j = 0; j < m; j++)
                z[i][j] += 1;
    return i;
}
"""


def test_an_iterator_that_data_decides_is_refused_with_its_line(tmp_path: Path) -> None:
    case = case_of(tmp_path, CONDITIONAL.replace("return i", "return j"))
    for plan, verdict in (("j i", Verdict.REFUSED), ("i:4 i j", Verdict.REFUSED), ("i j", Verdict.LEGAL)):
        judgement = judge(case.nest, analyse(case.nest), parse_plan(plan, case.nest))
        assert judgement.verdict is verdict
        assert [(r.line, r.code) for r in judgement.refusals] == [(6, "iterator-after")] * (verdict is Verdict.REFUSED)
    assert "'j' is used after the nest" in judge(case.nest, analyse(case.nest), parse_plan("j i", case.nest)).refusals[0].reason


def test_an_iterator_that_data_decides_may_be_forgotten(tmp_path: Path) -> None:
    variant = case_of(tmp_path, CONDITIONAL).variant("i:4 j i")
    main = """
int main(void) {
    unsigned char one[20][24] = { 0 }, two[20][24] = { 0 }, key[20];
    for (int k = 0; k < 20; k++) key[k] = k * 7 % 5;
    for (int n = 0; n < 20; n++)
        for (int m = 0; m < 20; m++)
            if (original(n, m, one, key) != variant0(n, m, two, key) || memcmp(one, two, sizeof one)) return 1;
    return 0;
}
"""
    compile_and_run(tmp_path, together(CONDITIONAL, [variant.text], main))


def test_ranges_of_whole_rows_are_products_that_cannot_overflow(tmp_path: Path) -> None:
    text = """void survey(int n, int m, int to[n + 1][m + 1], const int *from)
{
    for (int i = 0; i <= n; i++)
        for (int j = 0; j <= m; j++)
            to[i][j] = from[j * (n + 1) + i];
}
"""
    case = case_of(tmp_path, text)
    assert "to_begin + (((uintptr_t)n + 1) * ((uintptr_t)m + 1)) * sizeof(int)" in case.variant("j i").nest_text


def test_a_product_of_64_bits_gets_room_before_it_is_added_to(tmp_path: Path) -> None:
    text = """void survey(unsigned n, unsigned w, const double *restrict depth, double *restrict to)
{
    for (unsigned t = n < 3 ? n : 3; t <= w / 2 + 1; t++)
        to[t] = depth[t * w + 2 * t] * depth[t * w + t];
}
"""
    text_of_variant = case_of(tmp_path, text).variant("t:4 t").nest_text
    assert "<= 1000000000000" in text_of_variant and "} else {" in text_of_variant
