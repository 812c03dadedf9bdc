"""Variants called with arguments that break what they test: the result must be the original's, bit for bit.

Every nest stands in one program with its variants; each is called many times under the sanitizers, so that a test that
reads what the original would not read, or computes what it would not compute, shows as well.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from rewriting import HEADERS, SANITIZERS, case_of, compile_and_run, compilers, renamed, together

MEMBERS = """struct node { double w[6]; double v[4]; };
void survey(int n, struct node *t, const double *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < 4; c++)
            t[r].v[c] += from[r + c];
}
"""

MEMBERS_MAIN = """
static double one[220], two[220];
int main(void) {
    for (int n = 0; n < 7; n++)
        for (int at = 0; at < 140; at++) {
            for (int k = 0; k < 220; k++)
                one[k] = two[k] = k * 7 % 31;
            original(n, (struct node *)(one + 40), one + at);
            variant0(n, (struct node *)(two + 40), two + at);
            if (memcmp(one, two, sizeof one)) { printf("differ: %d %d\\n", n, at); return 1; }
        }
    original(0, 0, 0); variant0(0, 0, 0);
    return 0;
}
"""


def test_members_of_structures_in_an_array_lie_as_far_apart_as_the_structures(tmp_path: Path) -> None:
    variant = case_of(tmp_path, MEMBERS).variant("c r").text
    declared = MEMBERS.split("\n")[0] + "\n"
    text = declared + together(MEMBERS.replace(declared, ""), [variant.replace(declared, "")], MEMBERS_MAIN)
    compile_and_run(tmp_path, text, flags=(*SANITIZERS, "-fno-strict-aliasing"))


# The bound that is compared is not the one that ends the loop: its range would wrap around the address space.
LOOSE = """void survey(size_t n, size_t m, size_t reach, double *to, const double *from)
{
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < (m < reach ? m : reach); j++)
            to[j] = from[i + j] + 1;
}
"""

LOOSE_MAIN = """
static double one[64], two[64];
int main(void) {
    static const size_t large[] = { 4, 1000000000000, SIZE_MAX / 16, SIZE_MAX / 8, SIZE_MAX / 8 + 1, SIZE_MAX / 8 + 3,
                                    SIZE_MAX / 4, SIZE_MAX / 2, SIZE_MAX - 1, SIZE_MAX };
    for (size_t n = 0; n < 4; n++)
        for (int l = 0; l < 200; l++)
            for (int shift = -8; shift <= 8; shift++) {
                size_t m = l < 100 ? large[l % 10] : (size_t)(l / 10 % 5), reach = l < 100 ? (size_t)(l / 10 % 5) : large[l % 10];
                if (m > 8 && reach > 8)
                    continue;
                for (int k = 0; k < 64; k++)
                    one[k] = two[k] = k * 7 % 31;
                original(n, m, reach, one + 20, one + 20 + shift);
                variant0(n, m, reach, two + 20, two + 20 + shift);
                if (memcmp(one, two, sizeof one)) { printf("differ: %zu %zu %zu %d\\n", n, m, reach, shift); return 1; }
            }
    return 0;
}
"""


def test_a_range_that_would_wrap_around_is_no_proof(tmp_path: Path) -> None:
    variant = case_of(tmp_path, "#include <stddef.h>\n" + LOOSE).variant("j i")
    compile_and_run(tmp_path, together("#include <stddef.h>\n" + LOOSE, [variant.text], LOOSE_MAIN))


SOLID = """void survey(int n, int m, int p, double to[n][m][p], const double *from)
{
    for (int i = 0; i < n - 1; i++)
        for (int j = 0; j < m - 1; j++)
            for (int k = 0; k < p - 1; k++)
                to[i][j][k] += from[i + 2 * j + k];
}
"""


def test_products_of_sizes_are_computed_in_the_width_of_an_address(tmp_path: Path) -> None:
    main = """
int main(void) {
    static const int sizes[] = { INT_MIN, INT_MIN + 1, -65536, -1, 0, 1, 2, 46341, 65536, INT_MAX - 1, INT_MAX };
    static double to[4], from[4];
    for (int at = 0; at < 1331; at++) {
        int n = sizes[at % 11], m = sizes[at / 11 % 11], p = sizes[at / 121];
        if (n < 2 && n > INT_MIN && m > INT_MIN && p > INT_MIN && m > 0 && p > 0)
            variant0(n, m, p, (void *)to, from);
    }
    return 0;
}
"""
    variant = case_of(tmp_path, SOLID).variant("i:4 j i k")
    assert "* m * p" in variant.nest_text
    compile_and_run(tmp_path, together(SOLID, [variant.text], main))


# Nests that read a bound, a pointer or a quotient inside outer loops: with no round of those, nothing may be read.
# What follows: plans, and calls with which the original reads nothing.  ``nothing`` is a page that must not be touched.
READERS = {
    "a member": ("""void survey(int n, struct grid *g, int *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < g->cols; c++)
            g->depth[r * g->cols + c] += from[c];
}
""", ("c r", "c:8 r c", "r:4 c:3 r c"), ("CALL(0, NULL, NULL)", "CALL(-7, NULL, NULL)", "CALL(INT_MIN, nothing, nothing)")),
    "a member that the outer loops are bounded by": ("""void survey(int n, struct grid *g, struct grid *h)
{
    for (int r = 0; r < g->rows; r++)
        for (int c = 0; c < h->cols; c++)
            h->depth[r * h->cols + c] += 1 + g->depth[r];
}
""", ("c r", "c:8 r c"), ("CALL(0, &empty, NULL)", "CALL(0, &empty, nothing)")),
    "the end of an array": ("""void survey(int n, int *limits, int *restrict to)
{
    for (int r = 0; r < n; r++)
        for (int k = limits[0]; k < limits[1]; k++)
            to[k] = to[k] * 3 + r;
}
""", ("k r", "k:4 r k"), ("CALL(0, NULL, NULL)", "CALL(0, one_cell, nothing)", "CALL(-1, one_cell + 1, NULL)")),
    "behind a condition on sizes": ("""void survey(int n, int *limits, int *to)
{
    for (int r = 0; r < n; r++)
        if (r > 2)
            for (int k = 0; k < limits[1]; k++)
                to[k] = to[k] * 3 + r;
}
""", ("k r", "k:4 r k", "r:4 k:4 r k"), ("CALL(3, NULL, NULL)", "CALL(0, one_cell, NULL)", "CALL(3, one_cell, nothing)")),
    "a bit-field": ("""void survey(int n, struct bits *t, int *to)
{
    for (int r = 0; r < n; r++)
        for (int k = 0; k < t[1].cols; k++)
            to[k] = to[k] * 3 + r;
}
""", ("k r", "k:4 r k"), ("CALL(0, NULL, NULL)", "CALL(0, one_cell, nothing)")),
    "the second of two conditions": ("""void survey(int n, int *limits, int *restrict to)
{
    for (int r = 0; r < 3; r++)
        for (int k = 0; k < n && k < limits[1]; k++)
            to[k] = to[k] * 3 + r;
}
""", ("k r", "k:4 r k"), ("CALL(0, NULL, NULL)", "CALL(-5, one_cell, nothing)")),
    "a pointer behind a pointer": ("""void survey(int n, struct grid *g, int *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < g->next->cols; c++)
            g->next->depth[c] += from[r + c];
}
""", ("c r", "c:8 r c"), ("CALL(0, NULL, NULL)", "CALL(0, nothing, nothing)")),
    "an array in a structure": ("""void survey(int n, struct grid *g, int *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < 6; c++)
            g->row[c] += from[r + c];
}
""", ("c r", "c:4 r c"), ("CALL(0, NULL, NULL)", "CALL(0, nothing, nothing)")),
    "a quotient": ("""void survey(int n, int *per, int *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < 24 / *per; c++)
            from[c] = from[c] * 3 + r;
}
""", ("c r", "c:4 r c"), ("CALL(0, &zero, NULL)", "CALL(0, NULL, NULL)")),
    "a sum that may overflow, under the loop over r": ("""void survey(int n, int *per, int *from)
{
    const int from_row = per[0], rows = per[1];
    for (int r = 0; r < n; r++)
        for (int c = (from_row > 3 ? from_row * 2 : from_row + 5); c < rows; c++)
            from[c] = from[c] * 3 + r;
}
""", ("c r", "c:4 r c"), ("CALL(0, largest, NULL)",)),
    "a row length": ("""void survey(int n, struct grid *g, int *from)
{
    for (int r = 0; r < n; r++)
        for (int c = 0; c < 4; c++)
            from[r * (g->cols + 1) + c] = from[r * (g->cols + 1) + c] * 3 + g->depth[c * g->cols + r];
}
""", ("c r", "c:3 r c"), ("CALL(0, NULL, NULL)", "CALL(0, nothing, nothing)")),
    "two sweeps": ("""void survey(int n, int *limits, int *restrict to)
{
    for (int r = 0; r < n; r++) {
        to[r] = r;
        for (int k = 0; k < limits[1]; k++)
            to[r] = to[r] * 3 + k;
    }
}
""", ("k:4 r k", "k r", "r:3 k:4 r k"), ("CALL(0, NULL, NULL)", "CALL(0, one_cell, nothing)")),
}

READERS_HEAD = """#include <sys/mman.h>
struct bits { unsigned mark : 3; int cols : 5; };
struct grid { int rows, cols, row[8]; int *depth; struct grid *next; };
"""

READERS_MAIN = """
static int one[900], two[900];
static void fill(int *of)
{
    for (int k = 0; k < 900; k++)
        of[k] = k * 7 % 31;
}
int main(void) {
    int zero = 0, largest[2] = { INT_MAX, INT_MAX }, *one_cell = malloc(sizeof(int));
    struct grid empty = { 0, 3, { 0 }, NULL, NULL };
    void *nothing = mmap(NULL, 4096, PROT_NONE, MAP_PRIVATE | MAP_ANONYMOUS, -1, 0);
    *one_cell = 2;
    CALLS
    free(one_cell);
    for (int n = -1; n < 14; n++)
        for (int cols = -1; cols < 9; cols++) {
            SAME
        }
    return 0;
}
"""

# The same call of the original and a variant, on structures or plain numbers in memory of their own.
SAME_GRIDS = """{
            fill(one); fill(two);
            struct grid other = { n, cols, { 9, 8, 7 }, one + 300, NULL }, its = { n, cols, { 9, 8, 7 }, one + 40, &other };
            struct grid other2 = { n, cols, { 9, 8, 7 }, two + 300, NULL }, its2 = { n, cols, { 9, 8, 7 }, two + 40, &other2 };
            ORIGINAL(n, (void *)&its, (void *)(THIRD_ONE)); VARIANT(n, (void *)&its2, (void *)(THIRD_TWO));
            if (memcmp(one, two, sizeof one) || memcmp(its.row, its2.row, sizeof its.row)) { puts("VARIANT"); return 1; }
            }"""
SAME_LIMITS = """{
            int limits[3] = { 1, cols < 1 ? 1 : cols, cols };
            fill(one); fill(two);
            ORIGINAL(n, limits, one); VARIANT(n, limits, two);
            if (memcmp(one, two, sizeof one)) { puts("VARIANT"); return 1; }
            }"""


@pytest.mark.parametrize("compiler", compilers())
def test_nothing_is_read_that_the_original_does_not_read(compiler: str, tmp_path: Path) -> None:
    functions, calls, same = [], [], []
    for number, (text, plans, without) in enumerate(READERS.values()):
        case = case_of(tmp_path, READERS_HEAD + text)
        names = [f"original{number}", *(f"variant{number}_{at}" for at in range(len(plans)))]
        texts = [text, *(case.variant(plan).text for plan in plans)]
        functions += [renamed(one[one.index("void survey"):], "survey", name) for one, name in zip(texts, names, strict=True)]
        for name in names:
            calls += [f'fputs("{name}\\n", stderr);', *(call.replace("CALL", name) + ";" for call in without)]
        third = ("&its", "&its2") if "*h)" in text else ("one + 600", "two + 600")
        pattern = SAME_GRIDS.replace("THIRD_ONE", third[0]).replace("THIRD_TWO", third[1]) if "grid" in text else SAME_LIMITS
        same += [pattern.replace("ORIGINAL", names[0]).replace("VARIANT", name) for name in names[1:]]
    main = READERS_MAIN.replace("CALLS", "\n    ".join(calls)).replace("SAME", "\n".join(same))
    compile_and_run(tmp_path, READERS_HEAD + HEADERS + "\n".join(functions) + main, compiler=compiler, warnings=("-std=gnu11", "-w"))


# Nests of two pointers, called with windows of one buffer at every distance in bytes, and with rows that are too short.
OVERLAPPING = {
    "transposed": ("""void survey(int n, int m, int ld, double *to, const double *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i * ld + j] = from[j * ld + i] + 1;
}
""", ("j i", "i:2 j:2 j i")),
    "backwards": ("""void survey(int n, int m, int ld, double *to, const double *from)
{
    for (int i = n; i-- > 0; )
        for (int j = 0; j < m; j++)
            to[i * ld + (m - 1 - j)] = from[i * ld + j] + 1;
}
""", ("j i", "j:2 i j")),
    "different elements": ("""void survey(int n, int m, int ld, float *to, const short *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[j * ld + i] += from[j * 3 - i];
}
""", ("j i", "j:3 i j")),
    "bytes": ("""void survey(int n, int m, int ld, unsigned char *to, const long *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i * ld + j] = (unsigned char)((from[i] & 255) * 3 + j);
}
""", ("j i", "j:3 i j")),
    "one sum": ("""void survey(int n, int m, int ld, int *to, const int *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[0] += from[i + j * ld] & 255;
}
""", ("j i; reassociate yes", "i:2 j i; reassociate yes")),
    "a bound that stores may change": ("""void survey(int n, int m, int ld, int *to, const int *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < from[1] && j < m; j++)
            to[i * ld + j] = 1 + (j & 1);
}
""", ("j i", "j:3 i j")),
    "a band": ("""void survey(int n, int m, int ld, double *to, const double *from)
{
    for (int i = 0; i < n; i++)
        for (int j = (i > 2 ? i - 2 : 0); j < (m < i + 3 ? m : i + 3); j++)
            to[i * ld + j] = from[j * ld + i] + 1;
}
""", ("j i", "j:3 i j")),
    "unsigned rows that may wrap": ("""void survey(unsigned n, unsigned m, unsigned ld, double *to, const double *from)
{
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = 0; j < m; j++)
            to[i * ld + j] = from[j] + i;
}
""", ("j i", "j:3 i j")),
    "long rows": ("""void survey(long n, long m, long ld, double *to, const double *from)
{
    for (long i = 0; i < n; i++)
        for (long j = 0; j <= m; j++)
            to[i * (ld + 1) + j] += from[j] + i;
}
""", ("j i", "j:3 i j")),
    "members": ("""void survey(int n, int m, int ld, struct echo *to, const int *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i].late[j & 1] = (to[i].late[j & 1] & 1023) * 3 + (from[j + ld] & 1023);
}
""", ("i:2 j i", "i:2 i j")),
    "columns that a mask chooses": ("""void survey(int n, int m, int ld, int *to, const int *from)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            if (from[j] & 1)
                to[j * ld + i] = (from[j] & 1023) + i;
}
""", ("j i", "j:2 i j")),
}
OVERLAPPING_HEAD = "struct echo { short mark; int early, late[2]; };\n"

# The caller's values may break every assumption, but the original must stay inside the buffer.
OVERLAPPING_MAIN = """
enum { SIZE = 1400, MIDDLE = 600 };
static unsigned char one[SIZE], two[SIZE], three[SIZE];
int main(void) {
    static const int sizes[] = { -2, 0, 1, 2, 3, 5 };
    for (int k = 0; k < SIZE; k++)
        three[k] = k * 37 % 11;
    long calls = 0;
    for (int s = 0; s < 36; s++)
        for (int ld = -1; ld < 7; ld += 1 + (ld > 2))
            for (int shift = -230; shift <= 230; shift += 1 + (shift < -40 || shift > 40)) {
                const int n = sizes[s / 6], m = sizes[s % 6];
                CALLS
            }
    return calls > 100000 ? 0 : 3;
}
"""
OVERLAPPING_CALL = """
                memcpy(one, three, SIZE);
                ORIGINAL(n, m, ld, (void *)(one + MIDDLE), (const void *)(one + MIDDLE + shift));
                VARIANTS"""
OVERLAPPING_COMPARED = """
                memcpy(two, three, SIZE); calls++;
                NAME(n, m, ld, (void *)(two + MIDDLE), (const void *)(two + MIDDLE + shift));
                if (memcmp(one, two, SIZE)) { printf("differ: NAME %d %d %d %d\\n", n, m, ld, shift); return 1; }"""


@pytest.mark.parametrize("compiler", compilers())
def test_overlaps_at_every_distance_give_what_the_original_gives(compiler: str, tmp_path: Path) -> None:
    functions, calls = [], []
    for number, (text, plans) in enumerate(OVERLAPPING.values()):
        case = case_of(tmp_path, OVERLAPPING_HEAD + text)
        names = [f"original{number}", *(f"variant{number}_{at}" for at in range(len(plans)))]
        texts = [text, *(case.variant(plan).text for plan in plans)]
        functions += [renamed(one[one.index("void survey"):], "survey", name) for one, name in zip(texts, names, strict=True)]
        compared = "".join(OVERLAPPING_COMPARED.replace("NAME", name) for name in names[1:])
        inside = "n >= 0 && m >= 0 && ld >= 0" if "unsigned n" in text else "1"
        calls.append(f"if ({inside}) {{{OVERLAPPING_CALL.replace('ORIGINAL', names[0]).replace('VARIANTS', compared)}\n}}")
    main = OVERLAPPING_MAIN.replace("CALLS", "".join(calls))
    # windows that start inside an element are read all the same
    compile_and_run(tmp_path, OVERLAPPING_HEAD + HEADERS + "\n".join(functions) + main, compiler=compiler,
                    warnings=("-std=gnu11", "-w"), flags=(*SANITIZERS, "-fno-sanitize=alignment", "-fno-strict-aliasing"))


EXTREME_MAIN = """
enum { SIZE = 1400, MIDDLE = 600 };
static unsigned char one[SIZE], two[SIZE], three[SIZE];
int main(void) {
    static const int small[] = { INT_MIN + 1, -1, 0, 1 };
    static const long long rows[] = { INT_MIN, INT_MIN + 1, -65536, -2, -1, 0, 1, 2, 46341, 65536, INT_MAX / 2, INT_MAX - 1,
                                      INT_MAX, UINT_MAX / 2 + 1, UINT_MAX - 1, UINT_MAX };
    for (int k = 0; k < SIZE; k++)
        three[k] = k * 37 % 11;
    long calls = 0;
    for (int s = 0; s < 16; s++)
        for (int at = 0; at < 16; at++)
            for (int shift = -32; shift <= 32; shift += 4) {
                const int n = small[s / 4], m = small[s % 4];
                const long long ld = rows[at];
                CALLS
            }
    return calls > 10000 ? 0 : 3;
}
"""


@pytest.mark.parametrize("compiler", compilers())
def test_rows_of_any_length_that_nothing_reaches_compute_nothing_undefined(compiler: str, tmp_path: Path) -> None:
    functions, calls = [], []
    for number, (text, plans) in enumerate(OVERLAPPING.values()):
        if "j + ld" in text:
            continue  # a subscript, not the length of a row
        case = case_of(tmp_path, OVERLAPPING_HEAD + text)
        names = [f"original{number}", *(f"variant{number}_{at}" for at in range(len(plans)))]
        texts = [text, *(case.variant(plan).text for plan in plans)]
        functions += [renamed(one[one.index("void survey"):], "survey", name) for one, name in zip(texts, names, strict=True)]
        compared = "".join(OVERLAPPING_COMPARED.replace("NAME", name).replace("%d %d\\n", "%lld %d\\n") for name in names[1:])
        inside = "n >= 0 && m >= 0 && ld >= 0" if "unsigned n" in text else "ld <= INT_MAX || n <= 0 && m <= 0"
        inside = inside if "unsigned n" in text or "long ld" in text else "ld <= INT_MAX"
        calls.append(f"if ({inside}) {{{OVERLAPPING_CALL.replace('ORIGINAL', names[0]).replace('VARIANTS', compared)}\n}}")
    main = EXTREME_MAIN.replace("CALLS", "".join(calls))
    compile_and_run(tmp_path, OVERLAPPING_HEAD + HEADERS + "\n".join(functions) + main, compiler=compiler,
                    warnings=("-std=gnu11", "-w"), flags=(*SANITIZERS, "-fno-sanitize=alignment", "-fno-strict-aliasing"))
