"""``continue``: the rest of an iteration, read as what an ``if`` guards.

    if (c) continue;          if (!(c)) {
    rest;                         rest;
                              }

The same for ``if (c) { ...; continue; } else ...``.  Where both branches may go on, the rest has a guard of its own.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from pycparser import c_ast

from .scopes import children

_LOOPS = (c_ast.For, c_ast.While, c_ast.DoWhile)


def skips(node: Any) -> bool:
    """True if a ``continue`` of the loop around stands in a statement."""
    if isinstance(node, c_ast.Continue):
        return True
    return node is not None and not isinstance(node, _LOOPS) and any(skips(child) for child in children(node))


def surely_skips(node: Any) -> bool:
    """True if a statement never goes on to the next one, because a ``continue`` ends it."""
    if isinstance(node, c_ast.Compound):
        return bool(node.block_items) and surely_skips(node.block_items[-1])
    if isinstance(node, c_ast.If):
        return surely_skips(node.iftrue) and surely_skips(node.iffalse)
    return isinstance(node, c_ast.Continue)


def items_of(node: Any) -> tuple[Any, ...]:
    """The statements of a block, or the one statement that stands in its place; none of None."""
    if isinstance(node, c_ast.Compound):
        return tuple(node.block_items or ())
    return () if node is None else (node,)


def runs_on(items: Iterable[Any]) -> bool:
    """True if there is something among the statements that could run."""
    return any(not isinstance(item, (c_ast.EmptyStatement, c_ast.Continue)) for item in items)
