"""Whether anybody may read what a variable holds after a piece of a function."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

_LOOPS = (c_ast.For, c_ast.While, c_ast.DoWhile)
_JUMPS = (c_ast.Break, c_ast.Continue, c_ast.Return, c_ast.Goto, c_ast.Switch, c_ast.Label)


@dataclass(frozen=True)
class _Fate:
    """What code does with the value that a variable had before: ``read`` perhaps; ``lost`` surely."""

    read: bool = False
    lost: bool = False

    def then(self, other: _Fate) -> _Fate:
        return _Fate(self.read or (not self.lost and other.read), self.lost or other.lost)


def read_later(name: str, path: Sequence[Any], items_after: Sequence[Sequence[Any]]) -> bool:
    """True unless the value of a variable after a piece of a function is surely never read.

    ``path``: the statements around the piece, innermost first; ``items_after``: for each of them what follows in it.
    """
    fate = _Fate()
    for around, after in zip(path, items_after, strict=True):
        for item in after:
            fate = fate.then(_of(item, name))
        if isinstance(around, _LOOPS):
            again = _of(getattr(around, "next", None), name).then(_of(around.cond, name)).then(_of(around.stmt, name))
            fate = fate.then(_Fate(again.read))
        if fate.read:
            return True
        if _jumps(around):
            fate = _Fate()
    return fate.read


def _of(node: Any, name: str) -> _Fate:
    match node:
        case None:
            return _Fate()
        case c_ast.ID():
            return _Fate(read=node.name == name)
        case c_ast.Assignment(op="=") if isinstance(node.lvalue, c_ast.ID) and node.lvalue.name == name:
            return _of(node.rvalue, name).then(_Fate(lost=True))
        case c_ast.Decl() if node.name == name:
            return _Fate(lost=True)  # another variable from here to the end of the block
        case c_ast.Compound():
            fate = _sequence(node.block_items or (), name)
            return _Fate(fate.read, fate.lost and not _jumps(node) and not _declares(node, name))
        case c_ast.If():
            yes, no = _of(node.iftrue, name), _of(node.iffalse, name)
            return _of(node.cond, name).then(_Fate(yes.read or no.read, yes.lost and no.lost))
        case c_ast.For():
            head = _of(node.init, name).then(_of(node.cond, name))
            own = isinstance(node.init, c_ast.DeclList) and any(d.name == name for d in node.init.decls)
            body = _of(node.stmt, name).then(_of(node.next, name))
            return _Fate(head.read) if own else head.then(_Fate(body.read))
        case c_ast.While():
            return _of(node.cond, name).then(_Fate(_of(node.stmt, name).read))
        case c_ast.TernaryOp() | c_ast.BinaryOp(op="&&" | "||"):
            parts = [_of(child, name) for _, child in node.children()]
            return parts[0].then(_Fate(any(part.read for part in parts[1:])))
    fate = _Fate()
    for _, child in node.children():
        fate = fate.then(_of(child, name))
    return fate


def _sequence(items: Sequence[Any], name: str) -> _Fate:
    fate = _Fate()
    for item in items:
        fate = fate.then(_of(item, name))
        if isinstance(item, c_ast.Return):
            return _Fate(fate.read, True)
    return fate


def _declares(block: c_ast.Compound, name: str) -> bool:
    return any(isinstance(item, c_ast.Decl) and item.name == name for item in block.block_items or ())


def _jumps(node: Any) -> bool:
    waiting = [node]
    while waiting:
        part = waiting.pop()
        if isinstance(part, _JUMPS):
            return True
        waiting += [child for _, child in part.children()]
    return False
