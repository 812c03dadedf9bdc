"""Parts of arrays in locals or packed, full chunks written out: the question about them, the text, and what it computes."""

from __future__ import annotations

import ctypes
import subprocess
import textwrap
from dataclasses import replace

import numpy as np
import pytest
from rewriting import WARNINGS, case_of, compilers, without_remark

from retile import open_file
from retile.affine import Affine
from retile.model import RetileError, Verdict
from retile.plan import build_tree
from retile.reached import cells_reached
from retile.trial import Settings, verify_all
from retile.tree import Guard, Held, Kept, Loop, Move, Node

BEAMS = """\
void form_beams(int n, const double weights[n][n], const double echoes[n][n], double beams[n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * echoes[k][j];
}
"""
SUMS = """\
#define ECHO(p, s) echoes[(size_t)(p) * ld + (s)]
#include <stddef.h>
void sum_beams(int nb, int ns, int np, int ld, const float *restrict weights, const float *restrict echoes,
               float *restrict beams)
{
    for (int b = 0; b < nb; b++) {
        for (int s = 0; s < ns; s++) {
            float sum = 0.0f;  /* of one beam */
            for (int p = 0; p < np; ++p)
                sum += weights[b * np + p] * ECHO(p, s);
            beams[b * ns + s] = sum;
        }
    }
}
"""
GRAM = """\
void gram(unsigned n, unsigned m, const double a[restrict n][m], double c[restrict n][n])
{
    for (unsigned i = 0; i < n; i++)
        for (unsigned j = 0; j <= i; j++)
            for (unsigned k = 0; k < m; k++)
                c[i][j] += a[i][k] * a[j][k];
}
"""
FLIP = """\
void flip(int n, int m, double to[n][m], double from[m][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            to[i][j] = from[j][i];
}
"""
DOWN = """\
void down(int n, double a[n][n], double b[n][n], double c[n][n])
{
    for (int i = n - 1; i >= 0; i--)
        for (int j = n; j-- > 0;) {
            c[i][j] = 1;
            for (int k = 0; k < n; k += 2)
                c[i][j] += a[i][k] * b[k][j];
        }
}
"""
GRID = """\
struct grid { int n; double depth[48][48]; };
void mix(struct grid *g, const struct grid *h)
{
    for (int i = 0; i < g->n; i++)
        for (int j = 0; j < 48; j++)
            for (int k = 0; k < 8; k++)
                g->depth[i][j] += h->depth[k][j] * h->depth[i][k];
}
"""
CHOSEN = """\
void choose(int n, short *restrict out, const short *restrict in, const int *restrict mask)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            if (mask[j])
                out[i * n + j] = in[j * n + i];
}
"""
SHIFTED = """\
void smooth(int n, double z[n][n])
{
    for (int i = 1; i < n; i++)
        for (int j = 0; j < n; j++)
            z[i][j] += z[i - 1][j];
}
"""
ROWS = """\
void rows(int n, const double *restrict a, double *restrict c)
{
    for (int i = 0; i < n; i++) {
        double *row = c + i * n;
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                row[j] += a[i * n + k];
    }
}
"""
TWICE = """\
#define TWICE(x) ((x) + (x))
void twice(int n, const double *restrict a, double *restrict c)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            c[i * n + j] = TWICE(a[j * n + i]);
}
"""
BLOCKS = "j:16 k:8 i:8 j:4 i:2 k j i; pack echoes at k:8, pack weights at i:8, hold beams across k, unroll i"


def nest_of(folder, text):
    path = folder / "survey.c"
    path.write_text(text)
    line = next(number for number, row in enumerate(text.splitlines(), 1) if row.lstrip().startswith("for"))
    return open_file(str(path)).nest(line)


# ---------------------------------------------------------------- what it computes

LEGAL = [
    (BEAMS, BLOCKS),
    (BEAMS, "j:4 i:3 k j i; hold beams across k, unroll i, unroll j"),
    (BEAMS, "i:4 j:4 k:4 i j k; hold beams across i, pack echoes at k:4"),
    (BEAMS, "k:5 i k j; pack echoes at k:5"),
    (SUMS, "b:4 s:8 p b s"),
    (SUMS, "b:8 s:16 p:8 s:4 b:4 p s b; unroll b, pack echoes at p:8, pack weights at p:8"),
    (SUMS, "b:8 s:16 p:8 s:4 b:4 p s b; unroll b, hold sum across p, pack weights at p:8"),
    (SUMS, "b:96 s:96 p:8 s:3 b:2 p b s; hold sum across p, unroll s"),
    (GRAM, "j:8 i:4 k j i; hold c across k, unroll i"),
    (GRAM, "i:8 j:8 k:16 i:4 j:4 k i j; hold c across k, unroll i, pack a[i][k] at k:16"),
    (FLIP, "i:8 j:8 i j; pack to at j:8"),
    (FLIP, "i:8 j:8 j i; pack to at j:8, pack from at j:8, unroll j"),
    (DOWN, "i:4 j:4 k i j; hold c across k, unroll i"),
    (DOWN, "i:4 j:4 k i j; hold c across k, unroll j"),
    (BEAMS, "i:4 j:4 i j k; hold beams across k, unroll j"),
    (GRID, "j:8 i:4 k j i; hold g->depth across k, unroll i"),
    (GRID, "j:8 i:4 k:4 k j i; pack h->depth[k][j] at k:4"),
]


@pytest.mark.parametrize("text, plan", [case for case in LEGAL if "k:5" not in case[1]], ids=lambda value: value[:50])
def test_variants_are_identical_under_the_sanitizers(tmp_path, text, plan):
    nest = nest_of(tmp_path, text)
    variant = nest.rewrite(plan)
    (found,) = verify_all(nest.source, nest.nest, [variant], Settings())
    assert found.verified, (found.difference, found.failure, variant.text)


@pytest.mark.parametrize("compiler", compilers())
def test_blocks_compile_without_warnings(tmp_path, compiler):
    for number, (text, plan) in enumerate([(BEAMS, BLOCKS), (SUMS, LEGAL[6][1]), (SUMS, LEGAL[7][1]), (DOWN, LEGAL[12][1])]):
        file = tmp_path / f"variant{number}.c"
        file.write_text(nest_of(tmp_path, text).rewrite(plan).text)
        done = subprocess.run([compiler, *WARNINGS, "-O2", "-c", str(file), "-o", str(tmp_path / "out.o")],
                              check=False, capture_output=True, text=True)
        assert done.returncode == 0, done.stderr


def test_a_blocked_product_is_that_of_numpy(tmp_path):
    # A general-purpose library as the reference; the sums are exact in double for these small integers.
    (tmp_path / "variant.c").write_text(nest_of(tmp_path, BEAMS).rewrite(BLOCKS).text)
    library = tmp_path / "variant.so"
    subprocess.run(["cc", "-O2", "-shared", "-fPIC", str(tmp_path / "variant.c"), "-o", str(library)], check=True)
    run = ctypes.CDLL(str(library)).form_beams
    random = np.random.default_rng(7)
    for n in (1, 2, 15, 16, 17, 33, 50):
        weights, echoes = (random.integers(-9, 9, (n, n)).astype(float) for _ in range(2))
        beams = np.zeros((n, n))
        run(n, *(ctypes.c_void_p(array.ctypes.data) for array in (weights, echoes, beams)))
        assert (beams == weights @ echoes).all()


# ---------------------------------------------------------------- what is refused


@pytest.mark.parametrize("text, plan, reason", [
    (CHOSEN, "i:8 j:8 i j; pack in at j:8", "might not touch"),
    (CHOSEN, "i:8 j:8 i j; pack out at j:8", "might not write"),
    (SHIFTED, "i:4 j:4 i j; pack z[i-1][j] at j:4", "does not see another access"),
    (ROWS, "j:4 i:4 i k j; hold c across k", "a variable that the nest changes"),
    (TWICE, "i:4 j:4 i j; pack a at j:4", "comes out of a macro"),
])
def test_buffers_that_would_not_serve_are_refused(tmp_path, text, plan, reason):
    judgement = nest_of(tmp_path, text).check(plan)
    assert judgement.verdict is Verdict.REFUSED
    assert reason in judgement.refusals[0].reason


@pytest.mark.parametrize("text, plan, reason", [
    (BEAMS, "i j k; hold beams across j", "put chunks of j further out"),
    (BEAMS, "i:4 j:6 k:3 i j:4 j k; hold beams across i", "do not cut chunks of 6"),
    (BEAMS, "i:4 j k i; unroll j", "no chunk with a number"),
    (BEAMS, "i:400 j k i; unroll i", "too many to write out"),
    (BEAMS, "i:4 j k i; unroll i, remainder clamp", "only full chunks"),
    (BEAMS, "i:4 j k i; hold beams across i:4", "not such a term"),
    (BEAMS, "i:4 j k i; pack beams at i", "not such a term"),
    (BEAMS, "i:4 j k i; pack tides at i:4", "no array 'tides'"),
    (BEAMS, "i:4 j:4 k:4 i j k; pack beams at j:4, hold beams across k", "has a buffer already"),
    (GRAM, "i:4 j:4 k:4 i j k; pack a at k:4", "reached in several ways"),
    (BEAMS, "j:N_CHUNK k:8 i k j; pack echoes at k:8", "have no number"),
])
def test_buffers_that_cannot_be_made_are_wrong_plans(tmp_path, text, plan, reason):
    with pytest.raises(RetileError, match="wrong plan"):
        try:
            nest_of(tmp_path, text).check(plan)
        except RetileError as problem:
            assert reason in str(problem)
            raise


# ---------------------------------------------------------------- the question about them


def with_moves(nodes: tuple[Node, ...], change) -> tuple[Node, ...]:
    """The tree with each move, and the loops over moves, changed or left out."""
    found: list[Node] = []
    for node in nodes:
        if isinstance(node, Move):
            found += change(node)
        elif isinstance(node, Loop | Guard | Kept | Held):
            inner = with_moves(node.body, change)
            if inner or not node.body:
                found.append(replace(node, body=inner))
        else:
            found.append(node)
    return tuple(found)


def with_buffer(nodes: tuple[Node, ...], change) -> tuple[Node, ...]:
    """The tree with each buffer changed."""
    found: list[Node] = []
    for node in nodes:
        if isinstance(node, Move):
            node = replace(node, buffer=change(node.buffer))
        elif isinstance(node, Held):
            node = replace(node, buffer=change(node.buffer), body=with_buffer(node.body, change))
        elif isinstance(node, Loop | Guard | Kept):
            node = replace(node, body=with_buffer(node.body, change))
        found.append(node)
    return tuple(found)


def shifted(buffer):
    return replace(buffer, index=(buffer.index[0] + 1, *buffer.index[1:]))


FAULTS = [
    ("nothing is fetched", lambda tree: with_moves(tree, lambda move: [move] if move.store else []), "not fetched"),
    ("nothing is put back", lambda tree: with_moves(tree, lambda move: [] if move.store else [move]), "give back"),
    ("no room for the last", lambda tree: with_buffer(tree, lambda b: replace(b, shape=(b.shape[0], b.shape[1] - 1))), "no room"),
    ("numbers one too high", lambda tree: with_buffer(tree, shifted), "no room"),
    ("one cell for several", lambda tree: with_buffer(tree, lambda b: replace(b, index=(b.index[0], Affine()))), "one cell for two"),
    ("numbers that change", lambda tree: with_buffer(tree, lambda b: replace(b, index=(Affine.of("k").mod(2), b.index[1]))),
     "for one of the program"),
]


@pytest.mark.parametrize("fault, text", [(fault, text) for _, fault, text in FAULTS], ids=[name for name, _, _ in FAULTS])
def test_wrong_buffers_are_noticed(tmp_path, fault, text):
    nest = nest_of(tmp_path, BEAMS)
    tree = build_tree(nest.nest, nest.plan("i:2 j:4 k i j; hold beams across k"))
    context = nest.dependences.context
    assert cells_reached(tree, nest.nest, context) == []
    assert any(text in flaw.text for flaw in cells_reached(fault(tree), nest.nest, context))


# ---------------------------------------------------------------- the text


def test_a_held_block_reads_like_this(tmp_path):
    case = case_of(tmp_path, SUMS)
    text = without_remark(case.variant("b:2 s:4 p s b; unroll b").nest_text)
    full = text[text.rindex("\n", 0, text.index("float sum_kept_0")) + 1:text.index("} else {")]
    assert textwrap.dedent(full.rstrip(" ")) == textwrap.dedent("""\
            float sum_kept_0[4], sum_kept_1[4];
            for (int s = s_from; s < s_from + 4; s++) {
                {
                    float sum = 0.0f;  /* of one beam */
                    sum_kept_0[s - s_from] = sum;
                }
                {
                    float sum = 0.0f;
                    sum_kept_1[s - s_from] = sum;
                }
            }
            for (int p = 0; p < np; ++p)
                for (int s = s_from; s < s_from + 4; s++) {
                    {
                        float sum = sum_kept_0[s - s_from];
                        sum += weights[b_from * np + p] * ECHO(p, s);
                        sum_kept_0[s - s_from] = sum;
                    }
                    {
                        float sum = sum_kept_1[s - s_from];
                        sum += weights[(b_from + 1) * np + p] * ECHO(p, s);
                        sum_kept_1[s - s_from] = sum;
                    }
                }
            for (int s = s_from; s < s_from + 4; s++) {
                {
                    float sum = sum_kept_0[s - s_from];
                    beams[b_from * ns + s] = sum;
                }
                {
                    float sum = sum_kept_1[s - s_from];
                    beams[(b_from + 1) * ns + s] = sum;
                }
            }
""")


def test_a_macro_that_uses_the_iterator_keeps_it(tmp_path):
    text = """\
#define HERE out[i * n + j]
void copy(int n, double *restrict out, const double *restrict in)
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            HERE = in[j * n + i];
}
"""
    nest = nest_of(tmp_path, text)
    variant = nest.rewrite("i:2 j i; unroll i")
    assert "const int i = i_from + 1;" in variant.text
    assert verify_all(nest.source, nest.nest, [variant], Settings())[0].verified


def test_the_older_c_gets_the_older_allocation(tmp_path):
    path = tmp_path / "survey.c"
    path.write_text(BEAMS)
    for standard, call in (("-std=c99", "malloc(64 * sizeof *echoes_packed)"), ("-std=c11", "aligned_alloc(64, 64 * sizeof")):
        nest = open_file(str(path), flags=(standard,)).nest(3)
        text = nest.rewrite("j:64 k:64 i k j:4 j; pack echoes at k:64").text
        assert call in text
        assert "free(echoes_packed);" in text and "#include <stdlib.h>" in text
