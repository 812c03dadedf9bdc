"""What the header of a ``for`` says, by its text alone."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

from .kinds import Unsupported


@dataclass(frozen=True)
class Counting:
    """A loop that counts."""

    name: str
    step: int | None  # None if it is not a constant
    bound: Any = None  # the expression that the iterator is compared with; None if the condition is another
    inclusive: bool = False
    meets: bool = False  # runs until the iterator has the bound's value


_TURNED = {"<": ">", ">": "<", "<=": ">=", ">=": "<=", "!=": "!="}


def counting(node: c_ast.For, constant: Callable[[Any], int] | None) -> Counting | None:
    """The iterator of a ``for``, its step and bound; None if nothing counts in the header."""
    for part in (node.next, node.cond.left if isinstance(node.cond, c_ast.BinaryOp) else node.cond):
        found = _change(part, constant)
        if found:
            name, step = found
            if part is not node.next or step is None:
                return Counting(name, step)
            return _bounded(node.cond, name, step)
    return None


def _bounded(condition: Any, name: str, step: int) -> Counting:
    if not isinstance(condition, c_ast.BinaryOp) or condition.op not in _TURNED:
        return Counting(name, step)
    if _is(condition.left, name):
        operator, bound = condition.op, condition.right
    elif _is(condition.right, name):
        operator, bound = _TURNED[condition.op], condition.left
    else:
        return Counting(name, step)
    if operator != "!=" and operator[0] != ("<" if step > 0 else ">"):
        return Counting(name, step)
    return Counting(name, step, bound, operator[-1] == "=" and operator != "!=", operator == "!=")


def _is(node: Any, name: str) -> bool:
    return isinstance(node, c_ast.ID) and node.name == name


def _change(node: Any, constant: Callable[[Any], int] | None) -> tuple[str, int | None] | None:
    """The variable that an expression counts up or down, and by how much."""
    if isinstance(node, c_ast.UnaryOp) and node.op in ("++", "p++", "--", "p--") and isinstance(node.expr, c_ast.ID):
        return node.expr.name, 1 if "+" in node.op else -1
    if not isinstance(node, c_ast.Assignment) or not isinstance(node.lvalue, c_ast.ID):
        return None
    name, amount, sign = node.lvalue.name, node.rvalue, 1 if node.op == "+=" else -1
    if node.op == "=" and isinstance(amount, c_ast.BinaryOp) and amount.op in "+-":
        sign = 1 if amount.op == "+" else -1
        if _is(amount.left, name):
            amount = amount.right
        elif _is(amount.right, name) and sign > 0:
            amount = amount.left
        else:
            return name, None
    elif node.op not in ("+=", "-="):
        return None
    try:
        return name, sign * constant(amount) if constant else None
    except Unsupported:
        return name, None


def iterators_in(node: Any) -> frozenset[str]:
    """The names of the variables that the ``for`` loops inside count with."""
    found: set[str] = set()
    waiting = [node]
    while waiting:
        part = waiting.pop()
        if isinstance(part, c_ast.For):
            form = counting(part, None)
            found |= {form.name} if form else set()
        waiting += [child for _, child in part.children()]
    return frozenset(found)


def assigned_in(node: Any, known: dict[int, set[str]] | None = None) -> set[str]:
    """Names of variables that are set somewhere inside, or whose address is taken there.

    ``known`` keeps the answers about loops, for nodes that live as long as it does.
    """
    found: set[str] = set()
    waiting = [node]
    while waiting:
        part = waiting.pop()
        if part is None:
            continue
        if known is not None and part is not node and isinstance(part, c_ast.For):
            inner = known.get(id(part))
            if inner is None:
                inner = known[id(part)] = assigned_in(part, known)
            found |= inner
            continue
        if isinstance(part, c_ast.Assignment) and isinstance(part.lvalue, c_ast.ID):
            found.add(part.lvalue.name)
        elif isinstance(part, c_ast.UnaryOp) and part.op in ("++", "--", "p++", "p--", "&") \
                and isinstance(part.expr, c_ast.ID):
            found.add(part.expr.name)
        elif isinstance(part, c_ast.Decl) and part.name:
            found.add(part.name)
        waiting += [child for _, child in part.children()]
    return found


_PURE = (c_ast.ID, c_ast.Constant, c_ast.BinaryOp, c_ast.TernaryOp, c_ast.Cast, c_ast.Typename, c_ast.TypeDecl,
         c_ast.IdentifierType, c_ast.PtrDecl)


def steady(node: Any, changed: set[str], is_number: Callable[[str], bool]) -> bool:
    """True if an expression surely has the same value in every iteration: of variables that nothing inside sets."""
    if isinstance(node, c_ast.UnaryOp) and node.op in ("-", "+", "~", "!", "sizeof"):
        return steady(node.expr, changed, is_number)
    if not isinstance(node, _PURE):
        return False
    if isinstance(node, c_ast.ID) and (node.name in changed or not is_number(node.name)):
        return False
    return all(steady(child, changed, is_number) for _, child in node.children())
