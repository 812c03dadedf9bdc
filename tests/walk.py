"""Runs a loop tree with plain Python integers: what it executes, in which order.  No integer sets."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from retile.affine import Affine, AllOf, Bound, Constraint, Formula
from retile.tree import Copy, Guard, Leaf, Loop, Node, Verbatim

Run = tuple[str, tuple[tuple[str, int], ...]]


def value(bound: Bound, values: Mapping[str, int]) -> int:
    if isinstance(bound, Affine):
        return bound.evaluate(values)
    return (max if bound.kind == "max" else min)(value(b, values) for b in bound.bounds)


def holds(formula: Formula, values: Mapping[str, int]) -> bool:
    if isinstance(formula, Constraint):
        got = formula.form.evaluate(values)
        return got == 0 if formula.equality else got >= 0
    return (all if isinstance(formula, AllOf) else any)(holds(part, values) for part in formula.parts)


def runs(nodes: tuple[Node, ...], values: Mapping[str, int]) -> Iterator[Run]:
    """The instances that a tree executes, in order; guards on data count as true.

    Copies of kept scalars are runs of the statements ``store`` and ``fetch``, with the scalar's name and the cell.
    """
    for node in nodes:
        if isinstance(node, Leaf):
            yield node.statement, tuple((name, form.evaluate(values)) for name, form in node.instance)
        elif isinstance(node, Loop):
            for x in iterations(node, values):
                yield from runs(node.body, {**values, node.symbol: x})
        elif isinstance(node, Guard):
            if node.condition is None or holds(node.condition, values):
                yield from runs(node.body, values)
        elif isinstance(node, Copy):
            yield "store" if node.store else "fetch", ((node.scalar, 0), *(
                (str(at), form.evaluate(values)) for at, form in enumerate(node.index)))
        else:
            yield from runs(node.content if isinstance(node, Verbatim) else node.body, values)


def iterations(loop: Loop, values: Mapping[str, int]) -> list[int]:
    low, high, origin = value(loop.lower, values), value(loop.upper, values), loop.origin.evaluate(values)
    found = [x for x in range(low, high + 1) if (x - origin) % loop.length.evaluate(values) == 0]
    return found if loop.step > 0 else found[::-1]
