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


def update(family: str, target: CType | None, work: CType | None, operand: CType | None = None) -> Update | None:
    """The update of a cell of type ``target`` computed in type ``work``; None if it is of no family.

    ``operand``: the type of what is added or multiplied, if known.
    """
    return Update(family, _is_exact(family, target, work, operand)) if family else None


def _is_exact(family: str, target: CType | None, work: CType | None, operand: CType | None) -> bool:
    if target is None or work is None or target.floating or work.floating or target.spelling == "_Bool":
        return False
    if family in ("+", "*"):
        return not target.signed and (not work.signed or _has_room(family, target, work, operand)) and target.bits <= work.bits
    return family in ("&", "|", "^") or target == work


def _has_room(family: str, target: CType, work: CType, operand: CType | None) -> bool:
    """True if a signed type holds every result before it is converted: ``unsigned char`` values are added as ``int``."""
    if operand is None or operand.floating:
        return False
    needed = target.bits + operand.bits if family == "*" else max(target.bits, operand.bits) + 1
    return needed < work.bits


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


def kept_extreme(node: Any) -> tuple[str, Any]:
    """``min`` or ``max``, and the assignment, for ``if (e > x) x = e;``; empty and None for any other ``if``.

    It is the same as ``x = e > x ? e : x``, but for a store of what is there already.
    """
    inside = node.iftrue
    while isinstance(inside, c_ast.Compound) and inside.block_items and len(inside.block_items) == 1:
        inside = inside.block_items[0]
    if node.iffalse is not None or not isinstance(inside, c_ast.Assignment) or inside.op != "=":
        return "", None
    target = c_text(inside.lvalue)
    found = _extreme(node.cond, c_text(inside.rvalue), target, target)
    return found, inside if found else None


def _choice(value: Any, target: str) -> str:
    """``min`` or ``max`` for ``a < b ? a : b`` with ``x`` on one side of both; empty for any other choice."""
    return _extreme(value.cond, c_text(value.iftrue), c_text(value.iffalse), target)


def _extreme(cond: Any, chosen: str, other: str, target: str) -> str:
    if not isinstance(cond, c_ast.BinaryOp) or cond.op not in ("<", "<=", ">", ">="):
        return ""
    left, right = c_text(cond.left), c_text(cond.right)
    if {left, right} != {chosen, other} or left == right or target not in (left, right):
        return ""
    return "max" if (cond.op[0] == ">") == (chosen == left) else "min"
