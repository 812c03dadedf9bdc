"""C conditions as formulas."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pycparser import c_ast

from ..affine import Affine, AllOf, AnyOf, Formula, at_most, equal, less, negate
from ..model import CType
from .context import Context
from .setting import Setting

_SWAPPED = {"<": ">", "<=": ">=", ">": "<", ">=": "<=", "==": "==", "!=": "!="}
NEGATED = {"<": ">=", "<=": ">", ">": "<=", ">=": "<", "==": "!=", "!=": "=="}


class Conditions:
    """Reads conditions in one setting."""

    def __init__(self, setting: Setting) -> None:
        self._setting = setting

    def known(self, node: Any, context: Context) -> Formula | None:
        """The condition as a formula over iterators and parameters; None if it depends on data."""
        if self._setting.reads_stored(node):
            return None
        mark = self._setting.mark()
        found = self._known(node, context)
        if found is None:
            self._setting.rewind(mark)
        return found

    def known_part(self, node: Any, context: Context) -> Formula | None:
        """What is known wherever a condition on data holds; None if nothing is.

        ``i > 0 && a[i] > x`` implies ``i > 0``.  A part that would need memory to keep its value is taken for data.
        """
        found: list[Formula] = []
        for part in _conjuncts(node):
            mark = self._setting.mark()
            formula = self.known(part, context)
            if formula is not None and self._setting.needs_nothing_since(mark):
                found.append(formula)
                context = context.where(formula)
            else:
                self._setting.rewind(mark)
        return AllOf(tuple(found)) if found else None

    def _known(self, node: Any, context: Context) -> Formula | None:
        match node:
            case c_ast.BinaryOp(op="&&") | c_ast.BinaryOp(op="||"):
                return self._joined(node, context)
            case c_ast.UnaryOp(op="!"):
                inner = self.known(node.expr, context)
                return None if inner is None else negate(inner)
            case c_ast.BinaryOp() if node.op in _SWAPPED:
                return self._comparison(node, context)
            case c_ast.Cast():
                return None
        form = self._setting.expressions.affine(node, context)
        return None if form is None else negate(equal(form, 0))

    @staticmethod
    def opposite(formula: Formula) -> Formula:
        """Where the formula does not hold."""
        return negate(formula)

    def _joined(self, node: Any, context: Context) -> Formula | None:
        left = self.known(node.left, context)
        if left is None:
            return None
        right = self.known(node.right, context.where(left if node.op == "&&" else negate(left)))
        if right is None:
            return None
        return AllOf((left, right)) if node.op == "&&" else AnyOf((left, right))

    def _comparison(self, node: Any, context: Context) -> Formula | None:
        sides = self.sides(node, context)
        return None if sides is None else relation(node.op, *sides)

    def sides(self, node: Any, context: Context) -> tuple[Affine, Affine] | None:
        """Both sides of a comparison after the usual conversions; None if one depends on data."""
        left, right = self._setting.type_of(node.left), self._setting.type_of(node.right)
        if not isinstance(left, CType) or not isinstance(right, CType) or left.floating or right.floating:
            return None
        common = self._setting.types.common(left, right)
        a = self._setting.expressions.affine(node.left, context, common)
        b = self._setting.expressions.affine(node.right, context, common) if a is not None else None
        return None if a is None or b is None else (a, b)


def _conjuncts(node: Any) -> Iterator[Any]:
    if isinstance(node, c_ast.BinaryOp) and node.op == "&&":
        yield from _conjuncts(node.left)
        yield from _conjuncts(node.right)
    else:
        yield node


def relation(op: str, left: Affine, right: Affine) -> Formula:
    """A comparison of two forms."""
    match op:
        case "<":
            return less(left, right)
        case "<=":
            return at_most(left, right)
        case ">":
            return less(right, left)
        case ">=":
            return at_most(right, left)
        case "==":
            return equal(left, right)
    return negate(equal(left, right))
