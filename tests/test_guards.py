"""Variants called with arguments that break what they test: the result must be the original's, bit for bit.

Every nest stands in one program with its variants; each is called many times under the sanitizers, so that a test that
reads what the original would not read, or computes what it would not compute, shows as well.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from rewriting import SANITIZERS, case_of, compile_and_run, compilers, together

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
