"""The whole way: plans of the samples, rewritten, built and run beside the original."""

from dataclasses import replace

import pytest

from retile.library import OpenFile
from retile.model import Verdict
from retile.source import open_source
from retile.trial import Settings, measure, verify_all

PLANS = {
    ("swath_transpose.c", 16): ["beam ping", "ping:5 beam:3 ping beam", "beam:7 ping beam; remainder peel"],
    ("depth_smooth.c", 35): ["c r", "r:4 c:6 r c"],
    ("banded_solve.c", 11): ["p:5 i k p"],
    ("drift.c", 38): ["x t", "x:6 t x"],
    ("prefix_depth.c", 22): ["c:3 r:2 c r"],
    ("track_match.c", 16): ["i:4 j:3 i j"],
    ("swath_mosaic.c", 26): ["r c", "r:8 c:8 c r"],
    ("echo_filter.c", 35): ["s:100 p s"],
    ("tidal_factor.c", 15): ["j:4 k i@16 i@18 j", "k:4 k i@18 j; reassociate yes"],
    ("tidal_factor.c", 40): ["k:4 i:4 s k i; reassociate yes"],
    ("beamform.c", 40): ["b:8 s:8 p:8 b p s"],
    ("drift.c", 23): ["(2*t+y@24):5 t y@24 x@25 y@29 x@30"],
}


@pytest.mark.parametrize("file, line", PLANS)
def test_legal_plans_leave_the_same_bytes(file, line):
    nest = OpenFile(open_source(f"samples_c/{file}")).nest(line)
    plans = [plan for plan in PLANS[file, line] if nest.check(plan).verdict is Verdict.LEGAL]
    assert plans == PLANS[file, line]
    variants = [nest.rewrite(plan) for plan in plans]
    for plan, found in zip(plans, verify_all(nest.source, nest.nest, variants, Settings()), strict=True):
        assert found.verified, (plan, found.difference, found.failure)
        assert found.cases


def test_an_illegal_order_gives_other_results():
    """The order that the verdict forbids is not only forbidden on paper: written by hand, it is told apart."""
    nest = OpenFile(open_source("samples_c/relax.c")).nest(27)
    assert nest.check("j i").verdict is Verdict.ILLEGAL
    legal = nest.rewrite("i j")
    text = legal.nest_text
    swapped = text.replace("int i = 1; i < n - 1; i++", "?").replace(
        "int j = 1; j < m - 1; j++", "int i = 1; i < n - 1; i++"
    )
    swapped = swapped.replace("?", "int j = 1; j < m - 1; j++")
    assert swapped != text
    (found,) = verify_all(nest.source, nest.nest, [replace(legal, nest_text=swapped)], Settings(sanitize=False))
    assert not found.verified and found.difference.array == "z"


@pytest.mark.benchmark
def test_a_product_of_matrices_is_six_times_faster(tmp_path, capsys):
    """A textbook product in the order i j k, n = 1000.

    Golub & Van Loan, "Matrix Computations", section 1.1, discuss the six orders and their strides."""
    path = tmp_path / "product.c"
    path.write_text(
        "void product(int n, double c[n][n], double a[n][n], double b[n][n])\n{\n"
        "    for (int i = 0; i < n; i++)\n        for (int j = 0; j < n; j++)\n"
        "            for (int k = 0; k < n; k++)\n                c[i][j] += a[i][k] * b[k][j];\n}\n"
    )
    nest = OpenFile(open_source(str(path))).nest(3)
    variants = [nest.rewrite(plan) for plan in ("i k j", "k:64 j:256 i k j")]
    campaign = measure(nest.source, nest.nest, variants, {"n": 1000}, Settings(seconds=10))
    with capsys.disabled():
        for trial in campaign.trials:
            print(f"\n{trial.plan:20} {trial.seconds.median:.3f} s  {trial.speedup.median:.2f} times faster")
        print(*campaign.notes, sep="\n")
    assert campaign.best.speedup.median >= 6
