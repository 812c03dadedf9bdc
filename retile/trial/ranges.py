"""Between which values an expression lies, from the values of what it reads (Moore, "Interval Analysis", 1966).

Used for subscripts that are looked up in other arrays: how far they reach when those arrays hold given values.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

from ..model import RetileError
from .declared import Scope, walk
from .memory import path_of

Range = tuple[float, float]


@dataclass
class Ranges:
    """Answers for the expressions of one nest."""

    scope: Scope
    nest: Any  # the For node
    known: dict[str, Range]  # iterators, sizes and all else that has a value, by plain name
    cells: Callable[[str], Range]  # what the cells of this plain name are filled with
    reads: set[str]  # is given the plain names of all cells that were asked for

    def of(self, node: Any, depth: int = 0) -> Range:
        """The range of an expression; RetileError if it holds something that cannot be bounded."""
        if depth > 40:
            raise RetileError(
                "a looked-up subscript feeds on itself; a trial cannot find values that keep it in range"
            )
        below = depth + 1
        if isinstance(node, c_ast.Constant):
            return _constant(node)
        if isinstance(node, c_ast.ID | c_ast.ArrayRef | c_ast.StructRef):
            return self._object(node, below)
        if isinstance(node, c_ast.Cast):
            return self._cast(node, below)
        if isinstance(node, c_ast.UnaryOp) and node.op in "+-!":
            low, high = self.of(node.expr, below)
            return {"+": (low, high), "-": (-high, -low), "!": (0, 1)}[node.op]
        if isinstance(node, c_ast.UnaryOp) and node.op == "*":
            return self._object(node, below)
        if isinstance(node, c_ast.TernaryOp):
            return _join(self.of(node.iftrue, below), self.of(node.iffalse, below))
        if isinstance(node, c_ast.BinaryOp):
            return _binary(node.op, lambda: self.of(node.left, below), lambda: self.of(node.right, below))
        raise RetileError(
            "a trial cannot find out how far a looked-up subscript reaches "
            f"({type(node).__name__} in it, line {getattr(node.coord, 'line', '?')})"
        )

    def _cast(self, node: Any, depth: int) -> Range:
        low, high = self.of(node.expr, depth)
        return math.trunc(low), math.trunc(high)

    def _object(self, node: Any, depth: int) -> Range:
        if isinstance(node, c_ast.ID) and node.name in self.known:
            return self.known[node.name]
        found = path_of(self.scope, node)
        name = found[0].replace("*", "") if found else None
        if name is not None and name in self.known:
            return self.known[name]
        if isinstance(node, c_ast.ID):
            given = self._given(node.name, depth)
            if given is not None:
                return given
            if node.name in self.scope.constants:
                return self.of(self.scope.constants[node.name], depth)
        if name is None:
            raise RetileError("a looked-up subscript uses something that a trial cannot fill")
        self.reads.add(name)
        return self.cells(name)

    def _given(self, name: str, depth: int) -> Range | None:
        """The range of all that the nest assigns to a scalar; None if it assigns nothing."""
        found: Range | None = None
        for node in walk(self.nest):
            value = None
            if isinstance(node, c_ast.Decl) and node.name == name:
                value = node.init
            elif (
                isinstance(node, c_ast.Assignment)
                and isinstance(node.lvalue, c_ast.ID)
                and node.lvalue.name == name
            ):
                if node.op != "=":
                    raise RetileError(f"the subscript {name} adds up in the loop; a trial cannot bound it")
                value = node.rvalue
            if value is not None:
                part = self.of(value, depth)
                found = part if found is None else _join(found, part)
        return found


def _constant(node: Any) -> Range:
    text = node.value
    if node.type == "char" and len(text) == 3:
        return ord(text[1]), ord(text[1])
    try:
        value: float = int(text.rstrip("uUlL"), 0)
    except ValueError:
        try:
            value = float(text.rstrip("fFlL"))
        except ValueError:
            raise RetileError(f"a looked-up subscript holds the constant {text}") from None
    return value, value


def _join(a: Range, b: Range) -> Range:
    return min(a[0], b[0]), max(a[1], b[1])


def _binary(op: str, left: Callable[[], Range], right: Callable[[], Range]) -> Range:
    if op in ("<", ">", "<=", ">=", "==", "!=", "&&", "||"):
        return 0, 1
    a, b = left(), right()
    if op == "+":
        return a[0] + b[0], a[1] + b[1]
    if op == "-":
        return a[0] - b[1], a[1] - b[0]
    if op == "*":
        corners = [x * y for x in a for y in b]
        return min(corners), max(corners)
    if op == "/" and (b[0] > 0 or b[1] < 0):
        corners = [x / y for x in a for y in b]
        return math.floor(min(corners)), math.ceil(max(corners))
    if op == "%" and b[0] > 0:
        return (0 if a[0] >= 0 else -(b[1] - 1)), b[1] - 1
    if op == "&" and (b[0] >= 0 or a[0] >= 0):
        return 0, min(x[1] for x in (a, b) if x[0] >= 0)
    if op == ">>" and b[0] == b[1] and a[0] >= 0:
        return int(a[0]) >> int(b[0]), int(a[1]) >> int(b[0])
    if op == "<<" and b[0] == b[1] and a[0] >= 0:
        return int(a[0]) << int(b[0]), int(a[1]) << int(b[0])
    raise RetileError(f"a trial cannot bound a looked-up subscript with the operator {op}")
