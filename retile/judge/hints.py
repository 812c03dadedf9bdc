"""Where it is worth to look for faults of a variant, from what its maker knows; findings rest on the texts alone."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from .arithmetic import COMPARE, exact
from .examine import Allowed, Task
from .kinds import LONG, Undefined

if TYPE_CHECKING:
    from ..model import Assumption, Nest, Variant

_LARGEST = 300  # chunks beyond that are not worth their time


def task_of(nest: Nest, variant: Variant, flags: Sequence[str] = (), trust: bool = False) -> Task:
    """The task of judging a variant; with ``trust`` only at sizes at which what it assumes holds."""
    plan, assumptions = variant.plan, variant.judgement.assumptions
    chunks = {_chunk(term.chunk, variant.text, flags) for term in plan.terms if term.chunk is not None}
    pairs = [] if trust else [pair for a in assumptions if (pair := _pointers(nest, a)) and not a.given]
    allowed: Allowed = _holding(nest, assumptions) if trust else (lambda sizes: True)
    return Task(variant.text, tuple(sorted(chunk for chunk in chunks if 1 < chunk <= _LARGEST)),
                dict(plan.options).get("reassociate") == "yes", tuple(pairs), allowed)


def _chunk(chunk: int | str, text: str, flags: Sequence[str]) -> int:
    """A chunk's size; 0 for a name whose value is not found."""
    if isinstance(chunk, int):
        return chunk
    for flag in reversed(flags):
        if flag.startswith(f"-D{chunk}="):
            value = flag[len(chunk) + 3 :]
            return int(value) if value.isdecimal() else 0
    match = re.search(rf"^[ \t]*#[ \t]*define[ \t]+{re.escape(chunk)}[ \t]+(\d+)\b", text, re.MULTILINE)
    return int(match[1]) if match else 0


def _pointers(nest: Nest, assumption: Assumption) -> tuple[str, str] | None:
    """The two pointers of an assumption that they do not lead to the same memory."""
    if len(assumption.storages) != 2:
        return None
    known = {storage.name: storage.object for storage in nest.storages}
    one, other = (known.get(name, name).removesuffix("[]") for name in assumption.storages)
    return (one, other) if one != other else None


def _holding(nest: Nest, assumptions: Sequence[Assumption]) -> Allowed:
    """Whether the assumptions about sizes hold at given ones; not where that cannot be told."""
    from ..affine import formula_names
    from ..sets import Region

    conditions = [a.condition for a in assumptions if a.condition is not None]
    needed = {name for condition in conditions for name in formula_names(condition)}
    texts = {p.symbol: p.text for p in nest.parameters if p.symbol in needed}

    def holds(sizes: Mapping[str, int]) -> bool:
        try:
            values = {symbol: _computed(text, sizes) for symbol, text in texts.items()}
        except (KeyError, Undefined):
            return False
        return not Region.where(*conditions).at(values).is_empty()

    return holds if conditions else lambda sizes: True


def _computed(text: str, sizes: Mapping[str, int]) -> int:
    """The value of a C expression of sizes, in long integers; KeyError if it has anything else in it."""
    if text in sizes:
        return sizes[text]
    from ..source.lex import spellings
    from ..source.parse import parse_expression

    return _value(parse_expression([spelling for kind, spelling in spellings(text) if kind != "blank"], []), sizes)


def _value(node: Any, sizes: Mapping[str, int]) -> int:
    match node:
        case c_ast.ID():
            return sizes[node.name]
        case c_ast.Constant(type="int" | "long int" | "unsigned int" | "unsigned long int"):
            return int(node.value.rstrip("uUlL"), 0)
        case c_ast.UnaryOp(op="-" | "+"):
            return _value(node.expr, sizes) * (-1 if node.op == "-" else 1)
        case c_ast.TernaryOp():
            return _value(node.iftrue if _value(node.cond, sizes) else node.iffalse, sizes)
        case c_ast.BinaryOp(op="<" | ">" | "<=" | ">=" | "==" | "!="):
            return int(COMPARE[node.op](_value(node.left, sizes), _value(node.right, sizes)))
        case c_ast.BinaryOp(op="+" | "-" | "*" | "/" | "%"):
            return exact(node.op, _value(node.left, sizes), _value(node.right, sizes), LONG)
    raise KeyError(node)
