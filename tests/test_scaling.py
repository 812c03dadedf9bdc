"""How the cost of an answer grows with the nest: printed, not judged (``pytest -m benchmark tests/test_scaling.py -s``)."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import pytest
from hand_nests import ZERO, A, chain, n

from retile.dependence import analyse
from retile.model import Nest
from retile.plan import build_tree, judge, parse_plan
from retile.questions import order_kept, same_instances


def statements(count: int) -> Nest:
    """Two loops, and statements that each read what the one before wrote."""
    i, j = A("i"), A("j")
    return chain([("i", A(1), n - 1, 1), ("j", A(1), n - 1, 1)],
                 [[(f"a{at}", True, (i, j)), (f"a{at - 1}", False, (i - 1, j)), (f"a{at}", False, (i, j - 1))]
                  for at in range(1, count + 1)])


def depth(count: int) -> Nest:
    """One statement under this many loops, with a uniform dependence."""
    names = "ijklmpq"[:count]
    return chain([(name, A(1), A("n") - 1, 1) for name in names],
                 [[("c", True, tuple(A(x) for x in names)), ("c", False, tuple(A(x) - 1 for x in names))]])


def stencil() -> Nest:
    """A seven-point relaxation in place, over time."""
    t, i, j, k = (A(x) for x in "tijk")
    near = [(i, j, k), *((i + d, j, k) for d in (-1, 1)), *((i, j + d, k) for d in (-1, 1)),
            *((i, j, k + d) for d in (-1, 1))]
    return chain([("t", ZERO, A("m") - 1, 1), *((x, A(1), n - 2, 1) for x in "ijk")],
                 [[("a", True, (i, j, k)), *(("a", False, cell) for cell in near)]], "n m")


def chunks(names: str) -> str:
    return " ".join([*(f"{name}:8" for name in names), *names])


CASES = [(f"{count} statements", statements(count), chunks("ij")) for count in (1, 2, 4, 8, 16, 32, 64)] + \
        [(f"{count} loops", depth(count), chunks("ijklmpq"[:count])) for count in range(2, 8)] + \
        [("stencil over time", stencil(), "t:4 (t+i):8 (t+j):8 (t+k):8 t i j k")]


@pytest.mark.benchmark
def test_cost_of_an_answer() -> None:
    print(f"\n{'nest':20}{'edges':>7}{'depend':>9}{'judge':>9}{'tree':>9}{'question 1':>12}{'question 2':>12}   (ms)")
    for name, nest, text in CASES:
        spent: list[float] = []

        def timed(step: Callable[[], Any], spent: list[float] = spent) -> Any:
            start = time.perf_counter()
            result = step()
            spent.append(1000 * (time.perf_counter() - start))
            return result

        dependences = timed(lambda: analyse(nest))
        judgement = timed(lambda: judge(nest, dependences, parse_plan(text, nest)))
        tree = timed(lambda: build_tree(nest, judgement.plan))
        assert not timed(lambda: same_instances(tree, nest, dependences.context))
        assert not timed(lambda: order_kept(tree, dependences))
        print(f"{name:20}{len(dependences.edges):7}" + "".join(f"{s:{9 if at < 3 else 12}.0f}" for at, s in enumerate(spent)))
