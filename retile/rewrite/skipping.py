"""Pieces of text with a ``continue``, where something is printed behind them.

A ``continue`` in the user's text skips the rest of its piece.  Where a piece is the last thing that a printed loop
does, it still does that; elsewhere the piece gets a loop of its own that runs once:

    do {
        if (depth[i] < 0)
            continue;
        depth[i] = 1;
    } while (0);
"""

from __future__ import annotations

from collections.abc import Iterator

from ..tree import Loop, Node, Verbatim, children
from .layout import NestText


def apart(layout: NestText) -> frozenset[int]:
    """The identities of the pieces of the printed tree that need a loop of their own."""
    return frozenset(id(piece) for piece in _not_last(layout.tree, False) if layout.skips(piece))


def _not_last(nodes: tuple[Node, ...], ends: bool) -> Iterator[Verbatim]:
    """The pieces behind which a loop may do more; ``ends``: the nodes are the last that a loop runs."""
    for at, node in enumerate(nodes):
        last = ends and at == len(nodes) - 1
        if isinstance(node, Verbatim):
            if not last:
                yield node
        else:
            own = isinstance(node, Loop) and not node.unrolled
            yield from _not_last(children(node), own or last)
