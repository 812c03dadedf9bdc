"""The two questions notice every way in which a tree can be wrong."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hand_nests import BACKWARD, PRODUCT, A, n
from walk import runs

from retile.affine import Extremum
from retile.dependence import analyse
from retile.model import Nest
from retile.plan import build_tree, parse_plan
from retile.questions import order_kept, same_instances
from retile.tree import Loop, Node


def tree_of(nest: Nest, text: str) -> tuple[Node, ...]:
    return build_tree(nest, parse_plan(text, nest))


def changed(nodes: tuple[Node, ...], symbol: str, **fields: object) -> tuple[Node, ...]:
    """The tree with fields of one loop replaced."""
    return tuple(
        replace(node, body=changed(node.body, symbol, **fields), **(fields if node.symbol == symbol else {}))
        if isinstance(node, Loop) else node for node in nodes)


@pytest.mark.parametrize("symbol, fields, text", [
    ("k", {"upper": A("k:4") + 3}, "too much"),  # remainder not clamped
    ("k", {"upper": Extremum("min", (A("k:4") + 2, n - 1))}, "missing"),  # one iteration short
    ("k", {"upper": Extremum("min", (A("k:4") + 4, n - 1))}, "twice"),  # chunks overlap
    ("k:4", {"lower": A(4)}, "missing"),  # first chunk dropped
    ("k:4", {"upper": n - 4}, "missing"),  # remainder dropped
    ("i", {"upper": n}, "too much"),
    ("j", {"step": 2}, "missing"),
    ("k:4", {"origin": A(1)}, "missing"),  # wrong chunk origin
])
def test_wrong_bounds_are_noticed(symbol: str, fields: dict, text: str) -> None:
    tree = tree_of(PRODUCT, "k:4 i k j")
    context = analyse(PRODUCT).context
    assert same_instances(tree, PRODUCT, context) == []
    wrong = changed(tree, symbol, **fields)
    assert any(text in flaw.text for flaw in same_instances(wrong, PRODUCT, context))


def test_twice_printed_tree_is_noticed() -> None:
    tree = tree_of(PRODUCT, "i j k")
    flaws = same_instances((*tree, *tree), PRODUCT, analyse(PRODUCT).context)
    assert [flaw.text for flaw in flaws] == ["an instance runs in two places"]


def test_reversed_loop_is_noticed() -> None:
    dependences = analyse(PRODUCT)
    tree = tree_of(PRODUCT, "i j k")
    assert order_kept(tree, dependences) == []
    assert order_kept(changed(tree, "k", step=-1), dependences)
    assert order_kept(changed(tree, "i", step=-1), dependences) == []  # no dependence is carried by i


def test_split_remainder_passes_and_swapped_remainder_does_not() -> None:
    """First k in 0 .. n-2, then k = n-1, is the original's order; the other way round it is not."""
    dependences = analyse(PRODUCT)
    (whole,) = tree_of(PRODUCT, "k i j")
    head, last = replace(whole, upper=n - 2), replace(whole, lower=Extremum("max", (n - 1, A(0))))
    assert same_instances((head, last), PRODUCT, dependences.context) == []
    assert order_kept((head, last), dependences) == []
    assert order_kept((last, head), dependences)
    assert list(runs((head, last), {"n": 3})) == list(runs((whole,), {"n": 3}))


def test_an_example_is_given() -> None:
    flaws = order_kept(tree_of(BACKWARD, "j i"), analyse(BACKWARD))
    assert dict(flaws[0].example)["n"] >= 3
    assert "reversed" in str(flaws[0])
