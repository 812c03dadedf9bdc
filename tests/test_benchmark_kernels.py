"""Plain loops against tuned libraries: the original, each step, the best plan found, and the reference, side by side.

    pytest -m benchmark -s tests/test_benchmark_kernels.py              all kernels
    python tests/test_benchmark_kernels.py product dots                 some of them, by name

All variants of a kernel and its reference run in turn in one process, three rounds; what counts is the processor time
of the best round.  The reference is OpenBLAS through numpy and scipy on one thread, the copying or reading of the same
memory, or the original.  The best plan is the one that ``measure`` without plans finds; it is verified bit for bit.
"""

from __future__ import annotations

import ctypes
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

import pytest

FLAGS = ("-O3", "-march=native")
ROUNDS = 3
LEAST = 0.05  # seconds of one measurement: short calls are repeated
Arrays = tuple[Any, ...]


@dataclass(frozen=True)
class Kernel:
    """Loops, what they run on, and what they are compared with."""

    text: str
    function: str
    search: dict[str, int]  # the sizes at which a plan is looked for
    sizes: tuple[dict[str, int], ...]
    arrays: Callable[[dict[str, int]], Arrays]
    steps: tuple[str, ...]  # plans that a person would try one after the other
    reference: str
    run_reference: Callable[[Arrays], object] | None  # None: the original
    work: Callable[[dict[str, int]], float]  # operations or bytes of a call
    unit: str
    seconds: float = 20.0


def random(*shape: int, kind: str = "float64") -> Any:
    import numpy as np

    return np.random.default_rng(sum(shape)).standard_normal(shape).astype(kind)


def zeros(*shape: int, kind: str = "float64") -> Any:
    import numpy as np

    return np.zeros(shape, kind)


def product_text(real: str) -> str:
    return f"""\
void form_beams(int n, const {real} weights[n][n], const {real} echoes[n][n], {real} beams[restrict n][n])
{{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            for (int k = 0; k < n; k++)
                beams[i][j] += weights[i][k] * echoes[k][j];
}}
"""


def product(real: str, kind: str) -> Kernel:
    return Kernel(
        product_text(real), "form_beams", {"n": 1000}, ({"n": 1000}, {"n": 1024}, {"n": 1999}),
        lambda s: (*(random(s["n"], s["n"], kind=kind) for _ in range(2)), zeros(s["n"], s["n"], kind=kind)),
        ("i k j", "k:64 i k j"), "OpenBLAS gemm", lambda arrays: arrays[0] @ arrays[1],
        lambda s: 2.0 * s["n"] ** 3, "Gflop/s")


DOTS = """\
void correlate(int n, const double first[restrict n][n], const double second[restrict n][n], double out[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++) {
            double sum = 0;
            for (int k = 0; k < n; k++)
                sum += first[i][k] * second[j][k];
            out[i][j] = sum;
        }
}
"""
GRAM = """\
void normal_matrix(int n, const double design[restrict n][n], double normal[restrict n][n])
{
    for (int k = 0; k < n; k++)
        for (int l = 0; l <= k; l++)
            for (int i = 0; i < n; i++)
                normal[k][l] += design[i][k] * design[i][l];
}
"""
TURN = """\
void turn(int n, const double from[restrict n][n], double to[restrict n][n])
{
    for (int i = 0; i < n; i++)
        for (int j = 0; j < n; j++)
            to[i][j] = from[j][i];
}
"""
COLUMNS = """\
void sums(int n, const double level[restrict n][n], double sum[restrict n])
{
    for (int b = 0; b < n; b++)
        for (int p = 0; p < n; p++)
            sum[b] += level[p][b];
}
"""
RIGHT = """\
void right_side(int n, const double design[restrict n][n], const double level[restrict n], double right[restrict n])
{
    for (int k = 0; k < n; k++) {
        double sum = 0;
        for (int i = 0; i < n; i++)
            sum += design[i][k] * level[i];
        right[k] = sum;
    }
}
"""
SETTLE = """\
void settle(int steps, int n, double load[2][n][n])
{
    for (int t = 0; t < steps; t++)
        for (int y = 1; y < n - 1; y++)
            for (int x = 1; x < n - 1; x++)
                load[(t + 1) % 2][y][x] = 0.2 * (load[t % 2][y][x] + load[t % 2][y - 1][x] + load[t % 2][y + 1][x]
                                                 + load[t % 2][y][x - 1] + load[t % 2][y][x + 1]);
}
"""
RELAX = """\
void relax(int steps, int n, double z[n][n])
{
    for (int s = 0; s < steps; s++)
        for (int i = 1; i < n - 1; i++)
            for (int j = 1; j < n - 1; j++)
                z[i][j] = 0.2 * (z[i][j] + z[i - 1][j] + z[i + 1][j] + z[i][j - 1] + z[i][j + 1]);
}
"""
# Reads all of an array as fast as memory gives it: eight sums that do not wait for each other.
READ = """\
double read_all(long long cells, const double *level)
{
    double sums[32] = {0};
    for (long long i = 0; i + 32 <= cells; i += 32)
        for (int lane = 0; lane < 32; lane++)
            sums[lane] += level[i + lane];
    for (int lane = 1; lane < 32; lane++)
        sums[0] += sums[lane];
    return sums[0];
}
"""


def syrk(arrays: Arrays) -> object:
    """The lower triangle of the product of a transposed matrix and itself; Fortran's order turns rows into columns."""
    from scipy.linalg.blas import dsyrk  # type: ignore[import-untyped]

    return dsyrk(1.0, arrays[0].T, lower=0)


def copy(arrays: Arrays) -> object:
    import numpy as np

    np.copyto(arrays[1], arrays[0])
    return None


def read(arrays: Arrays) -> object:
    return reader()(ctypes.c_longlong(arrays[0].size), ctypes.c_void_p(arrays[0].ctypes.data))


_LOADED: dict[str, Any] = {}


def reader() -> Any:
    if "read" not in _LOADED:
        _LOADED["read"] = load(READ, "read_all", Path(tempfile.gettempdir()))
        _LOADED["read"].restype = ctypes.c_double
    return _LOADED["read"]


def square(n: str = "n", count: int = 1) -> Callable[[dict[str, int]], Arrays]:
    return lambda s: tuple(random(s[n], s[n]) for _ in range(count))


KERNELS = {
    "product": product("double", "float64"),
    "product of floats": product("float", "float32"),
    "dots": Kernel(DOTS, "correlate", {"n": 1000}, ({"n": 1000}, {"n": 1999}),
                   lambda s: (*square(count=2)(s), zeros(s["n"], s["n"])), ("i:32 j:32 k:256 i j k",), "OpenBLAS gemm",
                   lambda arrays: arrays[0] @ arrays[1].T, lambda s: 2.0 * s["n"] ** 3, "Gflop/s"),
    "gram": Kernel(GRAM, "normal_matrix", {"n": 1000}, ({"n": 1000},), lambda s: (*square()(s), zeros(s["n"], s["n"])),
                   ("k i l", "i:256 k i l"), "OpenBLAS syrk", syrk, lambda s: 1.0 * s["n"] ** 3, "Gflop/s"),
    "turn": Kernel(TURN, "turn", {"n": 4096}, ({"n": 4096}, {"n": 4097}),
                   lambda s: (*square()(s), zeros(s["n"], s["n"])), ("i:32 j:32 i j",), "memcpy", copy,
                   lambda s: 16.0 * s["n"] ** 2, "GB/s"),
    "columns": Kernel(COLUMNS, "sums", {"n": 6000}, ({"n": 6000},), lambda s: (*square()(s), zeros(s["n"])),
                      ("p b", "b:512 p b"), "reading", read, lambda s: 8.0 * s["n"] ** 2, "GB/s"),
    "right side": Kernel(RIGHT, "right_side", {"n": 6000}, ({"n": 6000},),
                         lambda s: (*square()(s), random(s["n"]), zeros(s["n"])), ("k:2048 i k",), "reading", read,
                         lambda s: 8.0 * s["n"] ** 2, "GB/s"),
    "settle": Kernel(SETTLE, "settle", {"n": 2500, "steps": 40}, ({"n": 2500, "steps": 100},),
                     lambda s: (random(2, s["n"], s["n"]),), ("t:16 (t+y):64 t y x",), "the original", None,
                     lambda s: 5.0 * s["n"] ** 2 * s["steps"], "Gflop/s"),
    "relax": Kernel(RELAX, "relax", {"n": 2000, "steps": 16}, ({"n": 2000, "steps": 50},),
                    lambda s: (random(s["n"], s["n"]),), ("s:8 (s+i):32 s i j",), "the original", None,
                    lambda s: 5.0 * s["n"] ** 2 * s["steps"], "Gflop/s"),
}


def load(text: str, function: str, folder: Path) -> Any:
    """A function of a C text, built as it would be used."""
    stem = folder / f"variant{time.monotonic_ns()}"
    stem.with_suffix(".c").write_text(text)
    subprocess.run(["cc", *FLAGS, "-w", "-shared", "-fPIC", f"{stem}.c", "-o", f"{stem}.so", "-lm"], check=True)
    loaded = getattr(ctypes.CDLL(f"{stem}.so"), function)
    for suffix in (".c", ".so"):
        stem.with_suffix(suffix).unlink()
    return loaded


def kernel_name() -> str:
    """What OpenBLAS says of the processor that it computes for."""
    import scipy.linalg.blas  # type: ignore[import-untyped]  # noqa: F401

    names = set()
    for line in Path("/proc/self/maps").read_text().splitlines():
        if "openblas" in line:
            library = ctypes.CDLL(line.split()[-1])
            for name in ("scipy_openblas_get_corename64_", "scipy_openblas_get_corename", "openblas_get_corename"):
                if hasattr(library, name):
                    getattr(library, name).restype = ctypes.c_char_p
                    names.add(getattr(library, name)().decode())
    return ", ".join(sorted(names)) or "not known"


def processor_seconds(call: Callable[[], object]) -> float:
    """Processor time of one call."""
    calls, spent = 0, 0.0
    while spent < LEAST:
        start = time.process_time()
        call()
        spent += time.process_time() - start
        calls += 1
    return spent / calls


def compare(kernel: Kernel, sizes: dict[str, int], functions: dict[str, Any]) -> dict[str, float]:
    """The best processor time of each variant and of the reference, taken in turn."""
    arrays = kernel.arrays(sizes)
    before = [array.copy() for array in arrays]
    order = kernel.text.partition("(")[2].partition(")")[0]
    names = [part.split()[-1] for part in order.split(",") if "[" not in part]
    given = [ctypes.c_int(sizes[name]) for name in names] + [ctypes.c_void_p(array.ctypes.data) for array in arrays]
    best: dict[str, float] = {}
    for _ in range(ROUNDS):
        calls: dict[str, Callable[[], object]] = {name: partial(call, *given) for name, call in functions.items()}
        if kernel.run_reference is not None:
            calls[kernel.reference] = partial(kernel.run_reference, arrays)
        for name, call in calls.items():
            for array, content in zip(arrays, before, strict=True):
                array[...] = content
            best[name] = min(best.get(name, float("inf")), processor_seconds(call))
    return best


def report(name: str, kernel: Kernel) -> None:
    """Find a plan, verify it, and print the table."""
    from retile import open_file
    from retile.trial import Settings

    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "survey.c"
        path.write_text(kernel.text)
        line = next(at for at, row in enumerate(kernel.text.splitlines(), 1) if row.lstrip().startswith("for"))
        nest = open_file(str(path)).nest(line)
        start = time.monotonic()
        campaign = nest.search(kernel.search, Settings(verify=False, seconds=kernel.seconds))
        assert campaign is not None and campaign.best is not None
        found = campaign.best.plan + (f"; {campaign.best.options}" if campaign.best.options else "")
        searched = f"{len(campaign.trials)} trials in {time.monotonic() - start:.0f} s"
        verified = nest.verify(nest.rewrite(found)).verified
        plans = dict.fromkeys((*kernel.steps, found))
        functions = {"the original": load(kernel.text, kernel.function, Path(folder)),
                     **{plan: load(nest.rewrite(plan).text, kernel.function, Path(folder)) for plan in plans}}
        for sizes in kernel.sizes:
            best = compare(kernel, sizes, functions)
            shown = ", ".join(f"{key} = {value}" for key, value in sizes.items())
            print(f"\n{name} at {shown}; {searched}, the best {'verified' if verified else 'NOT VERIFIED'}")
            for which, seconds in best.items():
                rate = kernel.work(sizes) / seconds / 1e9
                print(f"  {rate:8.2f} {kernel.unit}  {best[kernel.reference] / seconds:6.2f} of {kernel.reference}"
                      f"  {best['the original'] / seconds:7.2f} x  {which}" + ("  (found)" if which == found else ""))
            sys.stdout.flush()
    assert verified


@pytest.mark.benchmark
@pytest.mark.parametrize("name", KERNELS)
def test_kernel(name: str) -> None:
    """Prints; fails only where the best plan is not verified.  A process of its own keeps OpenBLAS on one thread."""
    pinned = ("OPENBLAS_CORETYPE", "OPENBLAS_L2_SIZE")
    environment = {key: value for key, value in os.environ.items() if key not in pinned}
    environment |= {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}
    done = subprocess.run([sys.executable, __file__, name], env=environment, text=True, capture_output=True)
    print(done.stdout)
    assert done.returncode == 0, done.stderr


if __name__ == "__main__":
    print(f"OpenBLAS computes for: {kernel_name()}; cc {' '.join(FLAGS)}; best of {ROUNDS} rounds, processor time")
    for wanted in sys.argv[1:] or KERNELS:
        report(wanted, KERNELS[wanted])
