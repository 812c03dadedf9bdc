"""Loop bounds: forms, or the smaller or larger of several, as conditional expressions give them."""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..affine import Affine, Bound, Extremum, at_most, map_bound, negate
from ..model import CType
from .conditions import Conditions
from .context import Context
from .setting import Setting


class Bounds:
    """Reads bounds in one setting."""

    def __init__(self, setting: Setting, conditions: Conditions) -> None:
        self._setting = setting
        self._conditions = conditions

    def read(self, node: Any, context: Context, type_: CType | None) -> Bound | None:
        """The bound after conversion to a type; None if it is neither affine nor an extremum, or may change."""
        if isinstance(node, c_ast.TernaryOp):
            mark = self._setting.mark()
            found = self._extremum(node, context, type_)
            if found is None:
                self._setting.rewind(mark)
            return found if found is not None else self._setting.expressions.affine(node, context, type_)
        if isinstance(node, c_ast.Cast) and isinstance(node.expr, c_ast.TernaryOp):
            return self.read(node.expr, context, type_)
        if isinstance(node, c_ast.ID):
            binding = self._setting.names.of(node)
            definition = None if binding is None else self._setting.definition(binding, context)
            if definition is not None and binding is not None:
                own = self._setting.type_of_binding(binding)
                with self._setting.at(definition):
                    return self.read(definition.expression, definition.context, own) if isinstance(own, CType) else None
        shifted = self._shifted(node, context, type_)
        return shifted if shifted is not None else self._setting.expressions.affine(node, context, type_)

    def _shifted(self, node: Any, context: Context, type_: CType | None) -> Bound | None:
        """``(a < b ? a : b) + c`` with a signed result, where nothing can wrap."""
        if not isinstance(node, c_ast.BinaryOp) or node.op not in "+-":
            return None
        own = self._setting.type_of(node)
        if not isinstance(node.left, c_ast.TernaryOp) or not isinstance(own, CType) or not own.signed:
            return None
        left = self.read(node.left, context, own)
        right = self._setting.expressions.affine(node.right, context, own)
        if left is None or right is None:
            return None
        return map_bound(left, lambda form: form + right if node.op == "+" else form - right)

    def _extremum(self, node: Any, context: Context, type_: CType | None) -> Bound | None:
        """``c ? x : y`` is min(x, y) where c implies x <= y and its opposite implies y <= x; likewise max.

        ``i > w ? i - w : 0`` is max(i - w, 0); ``i > 9 ? 0 : 1`` is neither.
        """
        condition = self._conditions.known(node.cond, context)
        if condition is None:
            return None
        yes, no = context.where(condition), context.where(negate(condition))
        own = self._setting.type_of(node) if type_ is None else type_
        own = own if isinstance(own, CType) else None
        left, right = self.read(node.iftrue, yes, own), self.read(node.iffalse, no, own)
        if left is None or right is None:
            return None
        for kind in ("min", "max"):
            if self._chosen(kind, left, right, yes) and self._chosen(kind, right, left, no):
                return flat(kind, left, right)
        return None

    def _chosen(self, kind: str, chosen: Bound, other: Bound, context: Context) -> bool:
        return self._ordered(chosen, other, context) if kind == "min" else self._ordered(other, chosen, context)

    def _ordered(self, small: Bound, large: Bound, context: Context) -> bool:
        """True if ``small <= large`` everywhere here."""
        if isinstance(small, Extremum):
            tests = [self._ordered(part, large, context) for part in small.bounds]
            return any(tests) if small.kind == "min" else all(tests)
        if isinstance(large, Extremum):
            tests = [self._ordered(small, part, context) for part in large.bounds]
            return all(tests) if large.kind == "min" else any(tests)
        return self._setting.knowledge.proves(context.formula, at_most(small, large))


def flat(kind: str, *bounds: Bound) -> Bound:
    """The extremum of several bounds, without repetition or nesting of one kind."""
    parts: dict[Bound, None] = {}
    for bound in bounds:
        inner = bound.bounds if isinstance(bound, Extremum) and bound.kind == kind else (bound,)
        parts.update(dict.fromkeys(inner))
    return next(iter(parts)) if len(parts) == 1 else Extremum(kind, tuple(parts))


def scaled(bound: Bound, factor: int, rounding: int) -> Bound:
    """``floor((bound + rounding) / factor)`` for a factor > 0, which keeps the order."""
    return map_bound(bound, lambda form: (form + rounding).floor_div(factor))


def negated(bound: Bound) -> Bound:
    """``-bound``: a min becomes a max."""
    if isinstance(bound, Affine):
        return -bound
    return Extremum("max" if bound.kind == "min" else "min", tuple(negated(part) for part in bound.bounds))
