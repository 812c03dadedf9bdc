"""Iterators that are looked at after the nest and whose last value nobody can compute.

An iterator that is declared before the nest keeps the value with which its loop's last execution ended.  A variant sets
it anew behind its loops, from the bounds.  Where a condition decides whether the loop runs at all, that is not possible:

    for (i = 0; i < n; i++)         for (i = 0; i < n; i++)
        for (j = 0; j < m; j++)         if (key[i] > 0)
            ...                             for (j = 0; j < m; j++)
    use(j);   fine: m or 0                      ...
                                    use(j);   refused: which i was the last with key[i] > 0?
"""

from __future__ import annotations

from collections.abc import Iterator

from ..model import LoopText, Nest
from ..tree import Guard, Loop, Node


def lost_iterators(nest: Nest) -> Iterator[LoopText]:
    """The loops whose iterators nobody could set after another order of the nest."""
    conditional = set(_under_conditions(nest.tree, False))
    for loop in nest.loops:
        if loop.id in conditional and loop.iterator_live_after and not loop.declared_in_for:
            yield loop


def _under_conditions(nodes: tuple[Node, ...], guarded: bool) -> Iterator[str]:
    for node in nodes:
        if isinstance(node, Loop):
            if guarded:
                yield node.of
            yield from _under_conditions(node.body, guarded)
        elif isinstance(node, Guard):
            yield from _under_conditions(node.body, True)
