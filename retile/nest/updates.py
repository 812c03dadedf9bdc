"""Updates ``x = x op e``: which may be done in another order if the result may round differently, and which anyway.

Additions, multiplications, minima and maxima and the bitwise operators are commutative and associative in arithmetic.
In C they are so to the last bit only where nothing rounds and nothing overflows: bitwise operators, minima and maxima
of integers, and sums and products that wrap around because they are computed in an unsigned type (ISO C11, 6.2.5).  A
signed sum may overflow at an intermediate value in one order and not in another; a floating one rounds differently.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..model import CType
from ..values import dataclass
from .setting import c_text


@dataclass(frozen=True)
class Update:
    """What an update does to its cell."""

    family: str  # ``+``, ``*``, ``&``, ``|``, ``^``, ``min`` or ``max``; updates of one family commute
    exact: bool  # any order gives the same bits


def update(family: str, target: CType | None, work: CType | None) -> Update | None:
    """The update of a cell of type ``target`` computed in type ``work``; None if it is of no family."""
    return Update(family, _is_exact(family, target, work)) if family else None


def _is_exact(family: str, target: CType | None, work: CType | None) -> bool:
    if target is None or work is None or target.floating or work.floating or target.spelling == "_Bool":
        return False
    if family in ("+", "*"):
        return not target.signed and not work.signed and target.bits <= work.bits
    return family in ("&", "|", "^") or target == work


def family(op: str) -> str:
    """The family of a binary operator; additions and subtractions accumulate into one sum; empty for any other."""
    return "+" if op in ("+", "-") else op if op in ("*", "&", "|", "^") else ""


def accumulation(node: Any) -> tuple[str, int]:
    """The family of an assignment and how often it reads its target.

    ``x = x + e`` reads it once, ``x = e > x ? e : x`` twice, ``x = fmax(x, e)`` once.
    """
    value, target = node.rvalue, c_text(node.lvalue)
    if isinstance(value, c_ast.BinaryOp):
        left, right = c_text(value.left) == target, c_text(value.right) == target
        return (family(value.op), 1) if left or (right and value.op != "-") else ("", 0)
    if isinstance(value, c_ast.TernaryOp):
        return _choice(value, target), 2
    if isinstance(value, c_ast.FuncCall) and isinstance(value.name, c_ast.ID):
        arguments = [c_text(one) for one in value.args.exprs] if value.args else []
        extreme = {"fmax": "max", "fmaxf": "max", "fmin": "min", "fminf": "min"}.get(value.name.name, "")
        return (extreme, 1) if arguments.count(target) == 1 else ("", 0)
    return "", 0


def _choice(value: Any, target: str) -> str:
    """``min`` or ``max`` for ``a < b ? a : b`` with ``x`` on one side of both; empty for any other choice."""
    if not isinstance(value.cond, c_ast.BinaryOp) or value.cond.op not in ("<", "<=", ">", ">="):
        return ""
    left, right = c_text(value.cond.left), c_text(value.cond.right)
    chosen, other = c_text(value.iftrue), c_text(value.iffalse)
    if {left, right} != {chosen, other} or left == right or target not in (left, right):
        return ""
    return "max" if (value.cond.op[0] == ">") == (chosen == left) else "min"
