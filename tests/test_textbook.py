"""Worked examples from the literature: the dependences and what they forbid.

The author, title and year stand beside each example.  Those marked "from memory" were written down without the book at
hand: the loop may differ from the printed one in names or bounds, and the expected answer follows from the loop as it
stands here.  Every verdict is also held against brute force at small sizes, so no answer rests on memory alone.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import pytest
from asked import ask
from examination import aligned_of

from oracle import TooLong, Undefined, verdict_at

LINE = 2


def survey(parameters: str, nest: str) -> str:
    """A file whose nest starts on line 2."""
    return f"void survey({parameters}) {{\n{nest.strip(chr(10))}\n}}\n"


def contradicted(text: str, plan: str, names: str, largest: int = 6) -> bool:
    """True if some small sizes show that the plan changes a result."""
    values, judgement = range(largest + 1), ask(text, LINE).check(plan)
    names_of = names.split()
    for sizes in itertools.product(values, repeat=len(names_of)):
        named = dict(zip(names_of, sizes, strict=True))
        try:
            outcome = verdict_at(text, "survey", LINE, plan, named, steps=4000, aligned=aligned_of(judgement, named))
        except (Undefined, TooLong):
            continue
        if outcome.contradicts_legal:
            return True
    return False


@dataclass(frozen=True)
class Example:
    """A loop nest with its source, and what is known of it."""

    source: str
    text: str
    edges: frozenset = frozenset()
    legal: tuple[str, ...] = ()
    illegal: tuple[str, ...] = ()
    sizes: str = "n"
    largest: int = 6


def edge(kind: str, array: str, source: str, target: str, carried: str | None, distance: tuple | None,
         direction: str) -> tuple:
    return kind, array, source, target, carried, distance, direction


EXAMPLES = {
    "interchange forbidden": Example(
        "Allen & Kennedy, Optimizing Compilers for Modern Architectures, 2001, ch. 5 (loop interchange); also Wolfe, "
        "High Performance Compilers for Parallel Computing, 1996, ch. 9. From memory.",
        survey("int n, double a[n + 1][n + 1]", """
    for (int i = 1; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i][j] = a[i - 1][j + 1];"""),
        frozenset({edge("flow", "a", "4", "4", "i", (1, -1), "<>")}),
        legal=("i j", "i:2 i j", "i j:2 j", "(i+j):2 i j", "i (i+j)", "(i+j) i", "i:2 (i+j):3 i j"),
        illegal=("j i", "j:2 i j", "i:2 j:2 i j")),
    "interchange allowed": Example(
        "Allen & Kennedy, 2001, ch. 5: direction (<, =) lets the loops change places. From memory.",
        survey("int n, double a[n + 1][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i + 1][j] = a[i][j] + 1.0;"""),
        frozenset({edge("flow", "a", "4", "4", "i", (1, 0), "<=")}),
        legal=("j i", "i:2 j:2 i j", "j:3 i:2 j i")),
    "strong SIV": Example(
        "Goff, Kennedy & Tseng, Practical Dependence Testing, 1991, sec. 4.2.1 (strong SIV). From memory.",
        survey("int n, double a[n + 2][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i + 2][j] = a[i][j];"""),
        frozenset({edge("flow", "a", "4", "4", "i", (2, 0), "<=")}), legal=("j i", "i:3 j:2 i j")),
    "strong SIV, distance not an integer": Example(
        "Goff, Kennedy & Tseng, 1991: the difference of the constants must be a multiple of the coefficient.",
        survey("int n, double *a", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[2 * i] = a[2 * i + 1] + j;"""),
        legal=("j i",)),
    "strong SIV, symbolic distance beyond the bounds": Example(
        "Goff, Kennedy & Tseng, 1991, on symbolic constants: a[i + n] = a[i] has distance n, larger than any i.",
        survey("int n, double *a", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i + n] = a[i] * 0.5;"""), legal=("j i", "j:2 i:2 j i")),
    "weak-zero SIV": Example(
        "Goff, Kennedy & Tseng, 1991, sec. 4.2.2: the loop of tomcatv, y[i] = y[first] + y[last]. From memory.",
        survey("int n, int m, double y[m][n]", """
    for (int j = 0; j < m; j++)
        for (int i = 0; i < n; i++)
            y[j][i] = y[j][0] + y[j][n - 1];"""),
        frozenset({edge("flow", "y", "4", "4", "i", None, "=<"), edge("anti", "y", "4", "4", "i", None, "=<")}),
        legal=("i j", "j:2 i:2 j i"), sizes="n m", largest=4),
    "weak-crossing SIV": Example(
        "Goff, Kennedy & Tseng, 1991, sec. 4.2.3: a[i] and a[n - i] cross at n/2 (loop of Callahan, Dongarra & Levine, "
        "Vectorizing Compilers: a Test Suite, 1988). From memory.",
        survey("int n, int m, double a[n + 1]", """
    for (int j = 0; j < m; j++)
        for (int i = 0; i <= n; i++)
            a[i] = a[n - i] * 0.5;"""),
        legal=("j i", "j i:2 i"), illegal=("i j", "j:2 i:2 j i", "i:2 j i"), sizes="n m", largest=4),
    "weak-crossing SIV, one side only": Example(
        "Goff, Kennedy & Tseng, 1991: bounds that stop before the crossing point leave no dependence.",
        survey("int n, double a[2 * n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i] = a[2 * n - i] + 1.0;"""), legal=("j i", "i:2 j:2 i j")),
    "GCD": Example(
        "Banerjee, Dependence Analysis for Supercomputing, 1988 (GCD test): 4i + 2 = 6j + 1 has no integer solution.",
        survey("int n, double *a, double *b", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[4 * i + 2] = a[6 * j + 1] + 1.0;"""), illegal=(), legal=("j:2 i:2 j i",)),
    "GCD that does not help": Example(
        "Banerjee, 1988: 4i + 2 = 6j has solutions, i = 1, j = 1 the first.",
        survey("int n, double *a", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[4 * i + 2] = a[6 * j] + 1.0;"""), legal=("i j",), illegal=("j i",)),
    "Banerjee bounds, out of reach": Example(
        "Banerjee, 1988 (inequality test): 0 <= i < 100 keeps i and i + 100 apart.",
        survey("double a[200][8]", """
    for (int i = 0; i < 100; i++)
        for (int j = 0; j < 8; j++)
            a[i][j] = a[i + 100][7 - j];"""), legal=("j i", "i:7 j:3 i j"), sizes=""),
    "Banerjee bounds, just in reach": Example(
        "Banerjee, 1988: one more iteration and the first and the last meet.",
        survey("double a[201][8]", """
    for (int i = 0; i <= 100; i++)
        for (int j = 0; j < 8; j++)
            a[i][j] = a[i + 100][7 - j];"""),
        frozenset({edge("anti", "a", "4", "4", "i", None, "<!=")}), illegal=("j i",), legal=("i j:3 j",), sizes=""),
    "coupled subscripts, contradictory": Example(
        "Goff, Kennedy & Tseng, 1991, sec. 5 (Delta test): a[i + 1][i] = a[i][i + 1] would need distance 1 and -1.",
        survey("int n, double a[n + 1][n + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i + 1][i] = a[i][i + 1] + 1.0;"""),
        legal=("j i", "j:2 i:2 i j")),
    "transposition in place": Example(
        "Goff, Kennedy & Tseng, 1991 (coupled RDIV subscripts a[i][j], a[j][i]). From memory.",
        survey("int n, double a[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i][j] = a[j][i];"""),
        frozenset({edge("flow", "a", "4", "4", "i", None, "<>"), edge("anti", "a", "4", "4", "i", None, "<>")}),
        legal=("i j:2 j", "i:2 j:2 i j"), illegal=("j i", "i:3 j:2 i j")),
    "triangle of a transposition": Example(
        "Maydan, Hennessy & Lam, Efficient and Exact Data Dependence Analysis, 1991, on triangular bounds: "
        "below the diagonal a[i][j] never meets a[j][i]. From memory.",
        survey("int n, double a[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < i; j++)
            a[i][j] = a[j][i];"""), legal=("j i", "i:2 j:2 i j", "j:3 i:2 j i")),
    "ten by ten": Example(
        "Maydan, Hennessy & Lam, 1991, sec. 3 (extended GCD and bounds): 1 <= i, j <= 10. From memory.",
        survey("double a[32][32]", """
    for (int i = 1; i <= 10; i++)
        for (int j = 1; j <= 10; j++)
            a[i][j] = a[j + 10][i + 9];"""), legal=("j i", "j:3 i:4 j i"), sizes=""),
    "eleven i plus thirteen j": Example(
        "Pugh, A Practical Algorithm for Exact Array Dependence Analysis (the Omega test), 1992: 27 <= 11x + 13y <= "
        "45, -10 <= 7x - 9y <= 4 has real points but no integer one.",
        survey("double *a", """
    for (int x = -20; x < 20; x++)
        for (int y = -20; y < 20; y++)
            if (11 * x + 13 * y >= 27 && 11 * x + 13 * y <= 45 && 7 * x - 9 * y >= -10 && 7 * x - 9 * y <= 4)
                a[x + 3 * y] = a[y] + 1.0;"""), legal=("y x", "x:3 y:4 y x"), sizes=""),
    "eleven i plus thirteen j, wider": Example(
        "The same with one bound moved: integer points appear, and with them dependences.",
        survey("double *a", """
    for (int x = -20; x < 20; x++)
        for (int y = -20; y < 20; y++)
            if (11 * x + 13 * y >= 0 && 11 * x + 13 * y <= 85 && 7 * x - 9 * y >= -30 && 7 * x - 9 * y <= 44)
                a[x + y] = a[x - y] + 1.0;"""), illegal=("y x",), legal=("x y",), sizes=""),
    "relaxation in one dimension": Example(
        "Wolf & Lam, A Data Locality Optimizing Algorithm, 1991 (SOR, skewing makes the nest fully permutable).",
        survey("int n, int m, double a[m + 2]", """
    for (int t = 0; t < n; t++)
        for (int i = 1; i <= m; i++)
            a[i] = 0.333 * (a[i - 1] + a[i] + a[i + 1]);"""),
        frozenset({
            edge("flow", "a", "4", "4", "i", (0, 1), "=<"), edge("anti", "a", "4", "4", "i", (0, 1), "=<")}),
        legal=("t i", "t:2 (t+i):3 t i", "(t+i):3 t i", "t (t+i)", "(t+i) t", "(2*t+i):2 t:2 t i"),
        illegal=("i t", "t:2 i:2 t i", "i:2 t i", "(2*t-i):2 t i"), sizes="n m", largest=5),
    "relaxation in two dimensions": Example(
        "Wolf & Lam, 1991; Wolfe, More Iteration Space Tiling, 1989: Gauss-Seidel sweeps need both inner loops skewed.",
        survey("int steps, int n, double a[n + 2][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = 1; i <= n; i++)
            for (int j = 1; j <= n; j++)
                a[i][j] = 0.2 * (a[i][j] + a[i - 1][j] + a[i + 1][j] + a[i][j - 1] + a[i][j + 1]);"""),
        legal=("t j i", "t i:2 j:2 i j", "t:2 (t+i):2 (t+j):2 t i j", "(t+i):2 (t+j):3 t i j"),
        illegal=("i t j", "t:2 i:2 j:2 t i j", "t:2 (t+i):2 j:2 t i j"), sizes="steps n", largest=4),
    "supernodes along the axes": Example(
        "Irigoin & Triolet, Supernode Partitioning, 1988: hyperplanes with normals h cut legal blocks if h . d >= 0 for "
        "every distance d; here d = (1, 0), (0, 1) and the axes will do. From memory.",
        survey("int n, int m, double a[n + 1][m + 1]", """
    for (int i = 1; i <= n; i++)
        for (int j = 1; j <= m; j++)
            a[i][j] = 0.5 * (a[i - 1][j] + a[i][j - 1]);"""),
        frozenset({edge("flow", "a", "4", "4", "i", (1, 0), "<="), edge("flow", "a", "4", "4", "j", (0, 1), "=<")}),
        legal=("i:2 j:3 i j", "(i+j):2 i:2 i j", "(2*i+j):3 j:2 j i"),
        illegal=("(i-j):2 i:2 i j", "(j-i):2 i j"), sizes="n m", largest=5),
    "rhombic supernodes": Example(
        "Irigoin & Triolet, 1988: d = (1, -1), (1, 0), (1, 1) lie in the cone between the normals (1, 1) and (1, -1), so "
        "that both families cut at once, while (0, 1) . (1, -1) < 0. From memory.",
        survey("int steps, int n, double a[steps + 1][n + 2]", """
    for (int t = 0; t < steps; t++)
        for (int i = 1; i <= n; i++)
            a[t + 1][i] = 0.25 * (a[t][i - 1] + 2.0 * a[t][i] + a[t][i + 1]);"""),
        frozenset({edge("flow", "a", "4", "4", "t", (1, shift), f"<{sign}") for shift, sign in ((-1, ">"), (0, "="), (1, "<"))}),
        legal=("(t+i):3 (t-i):2 t i", "(t-i):2 (t+i):2 t i", "t:2 (t+i):3 t i"),
        illegal=("t:2 i:2 t i", "i:3 t:2 t i", "(i-t):2 (t+i):2 t i", "(t-2*i):2 t i"), sizes="steps n", largest=5),
    "wave front": Example(
        "Wolfe, Loop Skewing: The Wavefront Method Revisited, 1986: a five-point relaxation; i + j is the wave. From memory.",
        survey("int n, int m, double a[n + 2][m + 2]", """
    for (int i = 1; i <= n; i++)
        for (int j = 1; j <= m; j++)
            a[i][j] = 0.2 * (a[i - 1][j] + a[i][j - 1] + a[i][j] + a[i + 1][j] + a[i][j + 1]);"""),
        frozenset({edge(kind, "a", "4", "4", *rest) for kind in ("flow", "anti")
                   for rest in (("i", (1, 0), "<="), ("j", (0, 1), "=<"))}),
        legal=("j i", "(i+j) i", "(i+j) j", "(i+j):3 i j", "i (i+j)", "i:2 j:2 i j"),
        illegal=("(i-j) i", "(j-i) j", "(i-j):2 i j"), sizes="n m", largest=5),
    "unimodular double loop": Example(
        "Banerjee, Unimodular Transformations of Double Loops, 1990: distances (1, -2), (0, 1) and (2, -1); the wave "
        "(3, 1) makes all inner iterations independent. From memory.",
        survey("int n, int m, double a[n + 3][m + 3]", """
    for (int i = 2; i < n; i++)
        for (int j = 1; j < m; j++)
            a[i][j] = a[i - 1][j + 2] + a[i][j - 1] + a[i - 2][j + 1];"""),
        frozenset({edge("flow", "a", "4", "4", "i", (1, -2), "<>"), edge("flow", "a", "4", "4", "j", (0, 1), "=<"),
                   edge("flow", "a", "4", "4", "i", (2, -1), "<>")}),
        legal=("(3*i+j) i", "(3*i+j):2 i j", "i (3*i+j)", "i:2 (2*i+j):3 i j"),
        illegal=("j i", "(i+j) i", "(i+j):2 i j"), sizes="n m", largest=6),
    "vector code for four statements": Example(
        "Allen & Kennedy, Automatic Translation of Fortran Programs to Vector Form, 1987 (the worked example; the column "
        "N is the last one here, subscripts begin at 0). From memory.",
        survey("int n, double x[n], double y[2 * n], double a[n + 1][n], double b[n], double c[n][n]", """
    for (int i = 0; i < n; i++) {
        x[i] = y[i] + 10.0;
        for (int j = 0; j < n; j++) {
            b[j] = a[j][n - 1];
            for (int k = 0; k < n; k++)
                a[j + 1][k] = b[j] + c[j][k];
            y[i + j] = a[j + 1][n - 1];
        }
    }"""),
        frozenset({
            edge("anti", "y", "3", "8", None, (0,), "="), edge("flow", "y", "8", "3", "i", None, "<"),
            edge("flow", "b", "5", "7", None, (0, 0), "=="), edge("flow", "a", "7", "8", None, (0, 0), "=="),
            edge("flow", "a", "7", "5", "j", (0, 1), "=<"), edge("output", "a", "7", "7", "i", None, "<=="),
            edge("output", "y", "8", "8", "i", None, "<>"), edge("output", "b", "5", "5", "i", None, "<=")}),
        legal=("i j k", "i j k:2 k", "i:2 i j k"),
        illegal=("i k j", "j:2 i j k", "i:2 j:2 i j k"), largest=4),
    "a row of the last line": Example(
        "Pugh, 1992, on symbolic constants: a[i][j + 1] = a[n][j] depends only where i reaches n. From memory.",
        survey("int n, int m, double a[n + 1][m + 1]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            a[i][j + 1] = a[n][j];"""), legal=("j i", "j:2 i:2 j i"), sizes="n m", largest=4),
    "a row of the last line, reached": Example(
        "The same with i = n in the loop: only then the lines meet, and only in the last iteration of i.",
        survey("int n, int m, double a[n + 1][m + 1]", """
    for (int i = 0; i <= n; i++)
        for (int j = 0; j < m; j++)
            a[i][j + 1] = a[n][j];"""),
        frozenset({edge("flow", "a", "4", "4", "j", (0, 1), "=<"), edge("anti", "a", "4", "4", "i", None, "<>")}),
        legal=("i j:2 j",), illegal=("j i", "j:2 i j"), sizes="n m", largest=4),
    "ten apart": Example(
        "Maydan, Hennessy & Lam, 1991, introduction: a[i] = a[i + 10] over ten values has no dependence. From memory.",
        survey("double a[20][4]", """
    for (int i = 0; i < 10; i++)
        for (int j = 0; j < 4; j++)
            a[i][j] = a[i + 10][3 - j] + 3.0;"""), legal=("j i", "i:3 j:2 i j"), sizes=""),
    "one apart": Example(
        "Maydan, Hennessy & Lam, 1991, introduction: a[i + 1] = a[i] depends from each iteration to the next. From memory.",
        survey("double a[20][4]", """
    for (int i = 0; i < 10; i++)
        for (int j = 0; j < 4; j++)
            a[i + 1][j] = a[i][3 - j] + 3.0;"""),
        frozenset({edge("flow", "a", "4", "4", "i", None, "<!=")}), legal=("i j:2 j", "i j"), illegal=("j i",), sizes=""),
    "matrix product": Example(
        "Wolf & Lam, 1991; Golub & Van Loan, Matrix Computations, ch. 1: all six loop orders and every blocking.",
        survey("int n, double c[n][n], double a[n][n], double b[n][n]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                c[i][j] += a[i][k] * b[k][j];"""),
        frozenset(edge(kind, "c", "5", "5", "k", None, "==<") for kind in ("flow", "anti", "output")),
        legal=(*(" ".join(order) for order in itertools.permutations("ijk")), "k:2 j:2 i k j", "i:4 k:2 j:3 j k i",
               "k:4 k:2 j i k"), largest=4),
    "two arrays, two sweeps": Example(
        "Jacobi relaxation as in Wolfe, 1996, ch. 9 and most textbooks: a sweep and a copy in one time loop.",
        survey("int steps, int n, double a[n + 2], double b[n + 2]", """
    for (int t = 0; t < steps; t++) {
        for (int i = 1; i <= n; i++)
            b[i] = 0.5 * (a[i - 1] + a[i + 1]);
        for (int i = 1; i <= n; i++)
            a[i] = b[i];
    }"""),
        legal=("t i@3 i@5", "t:2 t i@3 i@5", "t i@3:2 i@3 i@5", "t i@5 i@3"),
        illegal=("i@3 t i@5", "t:2 i@3:2 t i@3 i@5", "i@5 i@3 t"), sizes="steps n", largest=4),
    "LU decomposition": Example(
        "Golub & Van Loan, Matrix Computations, sec. 3.2 (outer product LU without pivoting).",
        survey("int n, double a[n][n]", """
    for (int k = 0; k < n; k++) {
        for (int i = k + 1; i < n; i++)
            a[i][k] = a[i][k] / a[k][k];
        for (int i = k + 1; i < n; i++)
            for (int j = k + 1; j < n; j++)
                a[i][j] = a[i][j] - a[i][k] * a[k][j];
    }"""),
        legal=("k i@3 i@5 j", "k j i@5", "k j:2 i@5:2 j i@5", "k i@5:2 j:3 i@5 j", "i@5 k i@3 j"),
        illegal=(), largest=6),
    "Cholesky decomposition": Example(
        "Golub & Van Loan, sec. 4.2 (right-looking Cholesky, square roots left out).",
        survey("int n, double a[n][n]", """
    for (int k = 0; k < n; k++)
        for (int j = k + 1; j < n; j++)
            for (int i = j; i < n; i++)
                a[i][j] -= a[i][k] * a[j][k];"""),
        legal=("k i j", "k j:2 i:2 j i", "j k i", "j i k", "j:2 k:2 j k i"), illegal=(), largest=6),
    "prefix sums": Example(
        "Blelloch, Prefix Sums and Their Applications, 1990: along the sums nothing moves, across them all does.",
        survey("int n, int m, double s[n][m]", """
    for (int i = 0; i < n; i++)
        for (int j = 1; j < m; j++)
            s[i][j] += s[i][j - 1];"""),
        frozenset({edge("flow", "s", "4", "4", "j", (0, 1), "=<")}),
        legal=("j i", "i:2 j:2 i j", "j:2 i j"), sizes="n m", largest=5),
    "summed areas": Example(
        "Crow, Summed-Area Tables for Texture Mapping, 1984: distances (1,0), (0,1), (1,1), all permutable.",
        survey("int n, int m, double s[n][m]", """
    for (int i = 1; i < n; i++)
        for (int j = 1; j < m; j++)
            s[i][j] += s[i - 1][j] + s[i][j - 1] - s[i - 1][j - 1];"""),
        frozenset({edge("flow", "s", "4", "4", "i", (1, 0), "<="), edge("flow", "s", "4", "4", "i", (1, 1), "<<"),
                   edge("flow", "s", "4", "4", "j", (0, 1), "=<")}),
        legal=("j i", "i:2 j:2 i j", "(i+j) i", "(i+j):2 j i"), illegal=("(i-j) i", "(i-j):2 i j"), sizes="n m",
        largest=5),
    "hyperplanes": Example(
        "Lamport, The Parallel Execution of DO Loops, 1974: time t = 2i + j + k orders this relaxation. From memory.",
        survey("int n, double u[n + 2][n + 2], int l", """
    for (int t = 0; t < l; t++)
        for (int i = 1; i <= n; i++)
            for (int j = 1; j <= n; j++)
                u[i][j] = 0.25 * (u[i + 1][j] + u[i][j + 1] + u[i - 1][j] + u[i][j - 1]);"""),
        legal=("(2*t+i+j) t i", "(2*t+i+j):2 t i j", "(t+i+j) t i"),
        illegal=("(i+j) t i", "(i+j):2 t i j", "(t+i) j i"),
        sizes="n l", largest=3),
    "sum of products": Example(
        "Kernighan & Ritchie-style dot product; reordering a sum is a reassociation and not allowed by default "
        "(Goldberg, What Every Computer Scientist Should Know About Floating-Point Arithmetic, 1991).",
        survey("int n, int m, double *s, double a[n][m]", """
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            s[0] += a[i][j];"""),
        legal=("i j", "i j:2 j", "i:2 i j"), illegal=("j i", "j:2 i j", "i:2 j:2 i j"), sizes="n m", largest=4),
}


@pytest.mark.parametrize("name", EXAMPLES)
def test_edges(name):
    example = EXAMPLES[name]
    missing = example.edges - ask(example.text, LINE).edges()
    assert not missing, f"{example.source}\nfound {ask(example.text, LINE).edges()}"


@pytest.mark.parametrize("name", [n for n in EXAMPLES if EXAMPLES[n].legal])
def test_legal_plans(name):
    example = EXAMPLES[name]
    for plan in example.legal:
        assert ask(example.text, LINE).verdict(plan) == "legal", (plan, example.source)
        assert not contradicted(example.text, plan, example.sizes, example.largest), (plan, example.source)


@pytest.mark.parametrize("name", [n for n in EXAMPLES if EXAMPLES[n].illegal])
def test_illegal_plans(name):
    example = EXAMPLES[name]
    for plan in example.illegal:
        judgement = ask(example.text, LINE).check(plan)
        assert judgement.verdict.value == "illegal" and judgement.violations, (plan, example.source)
        assert contradicted(example.text, plan, example.sizes, example.largest), (plan, example.source)


INDEPENDENT = ["strong SIV, symbolic distance beyond the bounds", "weak-crossing SIV, one side only",
               "coupled subscripts, contradictory", "triangle of a transposition", "ten by ten",
               "eleven i plus thirteen j", "Banerjee bounds, out of reach", "GCD",
               "strong SIV, distance not an integer", "a row of the last line", "ten apart"]


@pytest.mark.parametrize("name", INDEPENDENT)
def test_no_flow_or_anti_dependence(name):
    found = [e for e in ask(EXAMPLES[name].text, LINE).edges() if e[0] != "output"]
    assert not found, EXAMPLES[name].source


@pytest.mark.parametrize("name", ["interchange forbidden", "relaxation in one dimension", "summed areas", "prefix sums",
                                  "transposition in place", "weak-zero SIV", "interchange allowed", "strong SIV",
                                  "wave front", "rhombic supernodes", "unimodular double loop",
                                  "a row of the last line, reached"])
def test_edges_are_those_of_a_real_execution(name):
    """Every pair of iterations that shares a cell belongs to an edge of its kind and direction, and no edge is idle."""
    example = EXAMPLES[name]
    sizes = {size: 5 for size in example.sizes.split()}
    seen = _pairs_of_an_execution(example.text, sizes)
    told = {(e.kind, e.direction) for e in ask(example.text, LINE).opened.dependences.edges}
    assert {kind for kind, _ in seen} == {kind for kind, _ in told}
    for kind, signs in seen:
        assert any(k == kind and _allows(direction, signs) for k, direction in told), (kind, signs)
    for kind, direction in told:
        assert any(k == kind and _allows(direction, signs) for k, signs in seen), (kind, direction)


def _pairs_of_an_execution(text: str, sizes: dict[str, int]) -> set[tuple[str, str]]:
    instances = verdict_at(text, "survey", LINE, "", sizes).instances
    found = set()
    for at, second in enumerate(instances):
        for first in instances[:at]:
            signs = "".join("<" if b.iteration > a.iteration else "=" if b.iteration == a.iteration else ">"
                            for a, b in zip(first.loops, second.loops, strict=True))
            for obj, offset, writes in first.accesses:
                for other, place, also in second.accesses:
                    if obj is other and offset == place and obj.kind == "caller" and (writes or also):
                        found.add(("output" if writes and also else "flow" if writes else "anti", signs))
    return found


def _allows(direction: tuple[str, ...], signs: str) -> bool:
    allowed = {"<=": "<=", ">=": ">=", "!=": "<>", "*": "<=>"}
    return all(sign in allowed.get(word, word) for word, sign in zip(direction, signs, strict=True))


NORMALS = {"i": (1, 0), "j": (0, 1), "(i+j)": (1, 1), "(i-j)": (1, -1), "(2*i+j)": (2, 1), "(j-i)": (-1, 1)}


@pytest.mark.parametrize("distances", [((1, 0),), ((1, -1),), ((1, -1), (0, 1)), ((2, -1), (1, 1)), ((3, -2), (1, 0))])
def test_the_condition_on_supernodes(distances):
    """Irigoin & Triolet, 1988: blocks between hyperplanes may be run one after the other if h . d >= 0 for all of them.

    For two families, ``h:2 g:3``, also where h . d >= 2: then every pair lies in different blocks of the first.
    """
    reads = " + ".join(f"a[i + {4 - di}][j + {4 - dj}]" for di, dj in distances)
    text = survey("int n, double a[n + 8][n + 8]", f"""
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            a[i + 4][j + 4] = {reads};""")
    for (first, h), (second, g) in itertools.permutations(NORMALS.items(), 2):
        ahead = [(h[0] * di + h[1] * dj, g[0] * di + g[1] * dj) for di, dj in distances]
        kept = all(x >= 0 and (y >= 0 or x >= 2) for x, y in ahead)
        assert ask(text, LINE).verdict(f"{first}:2 {second}:3 i j") == ("legal" if kept else "illegal"), (first, second)
