"""Can the value that a variable has after the nest be seen?  A small walk over the rest of the function.

The text after the nest is followed in order, and around the loops that enclose the nest.  Whatever may read before a
write that surely happens makes the variable live; jumps make writes uncertain, labels make everything live.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..values import dataclass
from .scopes import Binding, FunctionNames, children, descendants

_LOOPS = (c_ast.For, c_ast.While, c_ast.DoWhile)
_JUMPS = (c_ast.Break, c_ast.Continue, c_ast.Return, c_ast.Goto)


@dataclass(frozen=True)
class _Use:
    """What a piece of text does to the value that a variable had before it."""

    reads: bool  # may read it
    kills: bool  # surely overwrites it, where the piece ends normally

    def then(self, other: _Use) -> _Use:
        """Both pieces, one after the other."""
        return _Use(self.reads or (not self.kills and other.reads), self.kills or other.kills)


_NOTHING = _Use(False, False)


def live_after(binding: Binding, nest: Any, names: FunctionNames) -> bool:
    """True unless it is certain that nobody reads the variable's value after the nest."""
    if not binding.automatic or names.address_taken(binding):
        return True
    if any(isinstance(node, (c_ast.Goto, c_ast.Label, c_ast.Switch)) for node in names.nodes):
        return any(True for use in binding.uses if not _inside(use, nest, names))
    return _Reader(binding, names).after(nest)


def _inside(node: Any, piece: Any, names: FunctionNames) -> bool:
    return node is piece or any(one is piece for one in names.ancestors(node))


class _Reader:
    def __init__(self, binding: Binding, names: FunctionNames) -> None:
        self._binding = binding
        self._names = names

    def after(self, node: Any) -> bool:
        """True if the value after a statement may be read."""
        use = _NOTHING
        while (parent := self._names.parent(node)) is not None and not use.kills:
            if isinstance(parent, c_ast.Compound):
                items = list(parent.block_items)
                use = use.then(self._sequence(items[items.index(node) + 1 :]))
            elif isinstance(parent, _LOOPS):
                use = use.then(self._around(parent))
            if use.reads:
                return True
            if any(isinstance(one, (c_ast.Break, c_ast.Continue)) for one in descendants(parent)):
                use = _Use(use.reads, False)
            node = parent
        return use.reads

    def _around(self, loop: Any) -> _Use:
        """From the end of a loop's body: perhaps once more through it, perhaps not."""
        again = _NOTHING
        for part in (getattr(loop, "next", None), loop.cond, loop.stmt):
            again = again.then(self._of(part))
        return _Use(again.reads, self._of(getattr(loop, "next", None)).then(self._of(loop.cond)).kills)

    def _sequence(self, nodes: list[Any]) -> _Use:
        use = _NOTHING
        for node in nodes:
            use = use.then(self._of(node))
            if isinstance(node, c_ast.Return):
                return _Use(use.reads, True)
        return use

    def _of(self, node: Any) -> _Use:
        match node:
            case None:
                return _NOTHING
            case c_ast.Compound():
                return self._weakened(node, self._sequence(list(node.block_items or ())))
            case c_ast.If():
                yes, no = self._of(node.iftrue), self._of(node.iffalse)
                return self._of(node.cond).then(_Use(yes.reads or no.reads, yes.kills and no.kills))
            case c_ast.For():
                start = self._of(node.init).then(self._of(node.cond))
                rest = self._of(node.stmt).then(self._of(node.next))
                return start.then(_Use(rest.reads, False))
            case c_ast.While():
                return self._of(node.cond).then(_Use(self._of(node.stmt).reads, False))
            case c_ast.DoWhile():
                return _Use(self._of(node.stmt).then(self._of(node.cond)).reads, False)
        return self._expression(node)

    @staticmethod
    def _weakened(node: Any, use: _Use) -> _Use:
        """A jump somewhere inside may skip the write."""
        jumps = any(isinstance(one, _JUMPS) for one in descendants(node))
        return _Use(use.reads, use.kills and not jumps)

    def _expression(self, node: Any) -> _Use:
        match node:
            case c_ast.ID():
                return _Use(self._names.of(node) is self._binding, False)
            case c_ast.Assignment(op="=") if isinstance(node.lvalue, c_ast.ID):
                return self._of(node.rvalue).then(_Use(False, self._names.of(node.lvalue) is self._binding))
            case c_ast.Decl() if self._names.of(node) is self._binding and node.init is not None:
                return self._of(node.init).then(_Use(False, True))
            case c_ast.TernaryOp() | c_ast.BinaryOp(op="&&") | c_ast.BinaryOp(op="||"):
                parts = [self._of(part) for part in children(node)]
                return parts[0].then(_Use(any(part.reads for part in parts[1:]), False))
        use = _NOTHING
        for part in children(node):
            use = use.then(self._of(part))
        return use
