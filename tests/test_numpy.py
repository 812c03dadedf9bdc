"""Samples against numpy: original and variants are compiled, called through ctypes and compared with an array library.

The samples' loops and numpy's operations come from different hands; where both add in the same order the results are
equal to the last bit, elsewhere within the bound that holds for any order of a sum (Higham, "Accuracy and Stability of
Numerical Algorithms", 2002, sec. 4.2: n * u * sum |x|).
"""

from __future__ import annotations

import ctypes
import subprocess
from pathlib import Path

import numpy as np
import pytest

import retile

SAMPLES = Path(__file__).parent.parent / "samples_c"
UNIT = np.finfo(np.float64).eps
pointer = ctypes.c_void_p


def first_loop(path: Path, function: str) -> int:
    """The line of the first ``for`` of a function."""
    lines = path.read_text().splitlines()
    start = next(k for k, line in enumerate(lines) if f"{function}(" in line.replace(" (", "("))
    return next(k for k in range(start, len(lines)) if lines[k].strip().startswith("for ")) + 1


def build(text: str, folder: Path) -> ctypes.CDLL:
    """A shared library of a C text; contraction off, so that original and variant round alike."""
    folder.mkdir(exist_ok=True)
    (folder / "f.c").write_text(text)
    command = ["cc", "-std=c11", "-O2", "-ffp-contract=off", "-shared", "-fPIC", "-Wall", "-Werror=implicit",
               "-o", folder / "f.so", folder / "f.c", "-lm"]
    done = subprocess.run(command, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return ctypes.CDLL(str(folder / "f.so"))


def both(sample: str, function: str, plan: str, folder: Path, trust: bool = False):
    """The function of the sample and that of the variant."""
    path = SAMPLES / sample
    variant = retile.open_file(path).nest(first_loop(path, function)).rewrite(plan, trust=trust)
    libraries = build(path.read_text(), folder / "original"), build(variant.text, folder / "variant")
    return [getattr(library, function) for library in libraries]


def invented(*shape: int, seed: int = 7) -> np.ndarray:
    """Invented data."""
    return np.random.default_rng(seed).standard_normal(shape)


PRODUCT_PLANS = ["i k j", "k:64 i k j", "i:16 j:24 k:7 i k j", "j:5 k:3 k i j", "k:8 j:8 i:8 j i k",
                 "k:8 j:8 i k j; remainder peel"]


@pytest.mark.parametrize("plan", PRODUCT_PLANS)
@pytest.mark.parametrize("n", [0, 1, 7, 8, 9, 33, 65])
def test_product(plan, n, tmp_path):
    functions = both("beamform.c", "form_beams", plan, tmp_path)
    weights, echoes = invented(n, n, seed=1), invented(n, n, seed=2)
    results = []
    for function in functions:
        beams = invented(n, n, seed=3)
        function(ctypes.c_int(n), pointer(beams.ctypes.data), pointer(weights.ctypes.data), pointer(echoes.ctypes.data))
        results.append(beams)
    exact = invented(n, n, seed=3) + weights @ echoes
    bound = (n + 1) * UNIT * (np.abs(weights) @ np.abs(echoes) + np.abs(invented(n, n, seed=3)))
    assert np.array_equal(results[0], results[1])
    assert (np.abs(results[1] - exact) <= bound).all()


@pytest.mark.parametrize("plan", ["beam ping", "ping:8 beam:8 ping beam", "beam:16 ping:3 beam ping",
                                  "ping:4 beam:4 beam ping; remainder peel"])
@pytest.mark.parametrize("shape", [(0, 5), (1, 1), (7, 8), (8, 16), (23, 19)])
def test_transposition(plan, shape, tmp_path):
    pings, beams = shape
    swath = invented(pings, beams).astype(np.float32)
    for function in both("swath_transpose.c", "turn_swath", plan, tmp_path):
        turned = np.zeros((beams, pings), dtype=np.float32)
        function(pointer(turned.ctypes.data), pointer(swath.ctypes.data), ctypes.c_size_t(pings),
                 ctypes.c_size_t(beams))
        assert np.array_equal(turned, swath.T)


@pytest.mark.parametrize("plan", ["i k l", "i:32 k l i", "i:16 k:8 l:8 i k l", "k:4 l:4 i:9 k i l"])
@pytest.mark.parametrize("shape", [(0, 3), (1, 1), (40, 9), (33, 17)])
def test_normal_equations(plan, shape, tmp_path):
    readings, terms = shape
    design = invented(readings, terms)
    results = []
    for function in both("tide_normal.c", "tide_normal_matrix", plan, tmp_path):
        normal = np.zeros((terms, terms))
        function(ctypes.c_int(readings), ctypes.c_int(terms), pointer(design.ctypes.data), pointer(normal.ctypes.data))
        results.append(normal)
    bound = (readings + 1) * UNIT * (np.abs(design.T) @ np.abs(design))
    assert np.array_equal(results[0], results[1])
    assert (np.abs(results[1] - np.tril(design.T @ design)) <= bound).all()
    # numpy adding in the program's order gives the program's bits
    ordered = np.zeros((terms, terms))
    for row in design:
        ordered += np.outer(row, row)
    assert np.array_equal(results[1], np.tril(ordered))


@pytest.mark.parametrize("plan", ["c r", "r:8 c:8 r c", "c:5 r c", "r:3 c:7 c r; remainder peel"])
@pytest.mark.parametrize("shape", [(0, 0), (1, 4), (2, 2), (3, 3), (10, 11), (18, 25)])
def test_smoothing(plan, shape, tmp_path):
    rows, columns = shape
    depth = invented(rows, columns)
    expected = np.full((rows, columns), -1.0)
    share = (1.0 - 0.5) / 4.0
    if rows > 2 and columns > 2:
        inner = depth[:-2, 1:-1] + depth[2:, 1:-1] + depth[1:-1, :-2] + depth[1:-1, 2:]
        expected[1:-1, 1:-1] = 0.5 * depth[1:-1, 1:-1] + share * inner
    for function in both("depth_smooth.c", "smooth_rows", plan, tmp_path):
        to = np.full((rows, columns), -1.0)
        function(ctypes.c_int(rows), ctypes.c_int(columns), pointer(to.ctypes.data), pointer(depth.ctypes.data),
                 ctypes.c_double(0.5))
        assert np.array_equal(to, expected)


def test_overlapping_arguments_take_the_original_loops(tmp_path):
    """The variant tests what it rests on: called with one array twice it still does what the original does."""
    readings, terms = 6, 6
    functions = both("swath_transpose.c", "turn_swath", "ping:2 beam:2 ping beam", tmp_path)
    results = []
    for function in functions:
        memory = invented(2 * readings, terms).astype(np.float32)
        function(pointer(memory.ctypes.data), pointer(memory.ctypes.data + 4 * 5), ctypes.c_size_t(readings),
                 ctypes.c_size_t(terms))
        results.append(memory)
    assert np.array_equal(results[0], results[1])


def test_common_practice_about_caches():
    """Common practice, no standard: 64-byte lines hold eight doubles; a 1000 x 1000 grid of doubles is 8 MB.

    That is more than the second-level cache of common processors (256 KiB to 2 MiB), which is why products of that
    size gain from blocking at all.
    """
    host = retile.describe_host()
    if host.line_bytes is not None:
        assert host.line_bytes % np.dtype(np.float64).itemsize == 0
    assert 64 // np.dtype(np.float64).itemsize == 8
    assert np.zeros((1000, 1000)).nbytes == 8_000_000 > 2 * 2**20
