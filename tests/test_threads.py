"""Iterations that threads share: what is legal, what is private, and that results are the same for any number of threads."""

from __future__ import annotations

import os
import subprocess
import sys
import textwrap

import pytest
from rewriting import compilers

from retile import open_file
from retile.model import RetileError, Verdict
from retile.plan import build_tree
from retile.questions import free_of_races

SWATH = """\
void swath(int beams, int samples, const double *restrict echoes, const double *restrict gain, double *restrict out)
{
    int b, s;
    double level;
    for (b = 0; b < beams; b++) {
        level = gain[b];
        for (s = 0; s < samples; s++)
            out[s] += level * echoes[b * samples + s];
    }
}
"""
TIDES = """\
void tides(int n, const double a[restrict n][n], double c[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j <= i; j++) {
            double sum = 0;
            for (int k = 0; k < n; k++)
                sum += a[i][k] * a[j][k];
            c[i][j] = sum;
        }
}
"""
COUNTS = """\
void counts(int n, const int *restrict key, unsigned *restrict total)
{
    for (int i = 0; i < n; i++)
        total[0] += key[i];
}
"""
STEPS = """\
void steps(int n, double z[n][n])
{
    for (int i = 1; i < n; i++)
        for (int j = 1; j < n; j++)
            z[i][j] = z[i - 1][j] + z[i][j - 1];
}
"""


def nest_of(folder, text):
    path = folder / "survey.c"
    path.write_text(text)
    line = next(number for number, row in enumerate(text.splitlines(), 1) if row.lstrip().startswith("for"))
    return open_file(str(path)).nest(line)


@pytest.mark.parametrize("text, plan, verdict", [
    (SWATH, "s:8 b s; threads at s:8", Verdict.LEGAL),
    (SWATH, "b s; threads at b", Verdict.ILLEGAL),
    (SWATH, "b s; threads at s", Verdict.LEGAL),
    (TIDES, "i:4 i j k; threads at i:4", Verdict.LEGAL),
    (TIDES, "i j k; threads at k", Verdict.ILLEGAL),
    (COUNTS, "i:8 i", Verdict.LEGAL),
    (COUNTS, "i:8 i; threads at i:8", Verdict.ILLEGAL),  # the order of updates is free, but two at once lose one
    (COUNTS, "i:8 i; threads at i:8, reassociate yes", Verdict.ILLEGAL),
    (STEPS, "i j; threads at i", Verdict.ILLEGAL),
    (STEPS, "i j; threads at j", Verdict.ILLEGAL),
    (STEPS, "(i+j) i; threads at i", Verdict.LEGAL),  # a wavefront: Lamport, "The parallel execution of DO loops", 1974
])
def test_what_threads_may_share(tmp_path, text, plan, verdict):
    judgement = nest_of(tmp_path, text).check(plan)
    assert judgement.verdict is verdict, judgement


def test_races_are_found_in_the_tree_too(tmp_path):
    from retile.values import replace

    nest = nest_of(tmp_path, TIDES)
    plan = nest.check("i:4 i j k; threads at i:4").plan
    tree = build_tree(nest.nest, plan)
    assert free_of_races(tree, nest.dependences) == []
    wrong = build_tree(nest.nest, replace(nest.check("i:4 i j k").plan, threaded=3))
    assert any("race" in flaw.text for flaw in free_of_races(wrong, nest.dependences))


def test_private_variables_are_named(tmp_path):
    text = nest_of(tmp_path, SWATH).rewrite("s:8 b s; threads at s:8").text
    assert "#pragma omp parallel for private(b, s, level)" in text


def test_uneven_work_is_dealt_out_as_threads_get_free(tmp_path):
    nest = nest_of(tmp_path, TIDES)
    assert "schedule(dynamic)" in nest.rewrite("i:4 i j k; threads at i:4").text
    assert "schedule" not in nest_of(tmp_path, SWATH).rewrite("s:8 b s; threads at s:8").text


def test_a_loop_that_openmp_does_not_take_is_a_message(tmp_path):
    text = "void down(unsigned n, float *z)\n{\n    for (unsigned i = n; i-- > 0; )\n        z[i] = 1;\n}\n"
    with pytest.raises(RetileError, match="OpenMP wants a loop that counts"):
        nest_of(tmp_path, text).rewrite("i; threads at i")


RUN = """\
    import ctypes, sys
    import numpy as np
    n, name, arrays = int(sys.argv[2]), sys.argv[3], int(sys.argv[4])
    random = np.random.default_rng(3)
    data = [random.random((n, n)) for _ in range(arrays)]
    sizes = [n] * (2 if name == "swath" else 1)
    getattr(ctypes.CDLL(sys.argv[1]), name)(*sizes, *(ctypes.c_void_p(array.ctypes.data) for array in data))
    print([array.tobytes().hex() for array in data])
"""


@pytest.mark.parametrize("text, name, arrays, plan", [
    (SWATH, "swath", 3, "s:8 b s; threads at s:8"),
    (TIDES, "tides", 2, "i:4 j:4 k:8 i j k; threads at i:4"),
    (TIDES, "tides", 2, "i:8 j:4 i:2 k j i; threads at i:8, unroll i"),
    (STEPS, "steps", 1, "(i+j) i; threads at i"),
])
def test_results_are_the_same_for_any_number_of_threads(tmp_path, text, name, arrays, plan):
    variant = nest_of(tmp_path, text).rewrite(plan).text
    outputs = set()
    for number, (code, threads) in enumerate([(text, 1), (variant, 1), (variant, 2), (variant, 3)]):
        file, library = tmp_path / f"{number}.c", tmp_path / f"{number}.so"
        file.write_text(code)
        subprocess.run(["gcc", "-Wall", "-Wextra", "-Werror", "-O2", "-ffp-contract=off", "-fopenmp", "-shared", "-fPIC", str(file),
                        "-o", str(library)], check=True)
        for size in ("19", "40"):
            done = subprocess.run([sys.executable, "-c", textwrap.dedent(RUN), str(library), size, name, str(arrays)],
                                  env={**os.environ, "OMP_NUM_THREADS": str(threads)}, capture_output=True, text=True,
                                  check=True)
            outputs.add((size, done.stdout))
    assert len(outputs) == 2


@pytest.mark.parametrize("compiler", compilers())
def test_without_openmp_there_are_no_warnings(tmp_path, compiler):
    file = tmp_path / "variant.c"
    file.write_text(nest_of(tmp_path, SWATH).rewrite("s:8 b s; threads at s:8").text)
    done = subprocess.run([compiler, "-Wall", "-Wextra", "-Werror", "-c", str(file), "-o", str(tmp_path / "out.o")],
                          check=False, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
