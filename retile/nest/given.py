"""Facts that the user gives: relations between sizes, and storages that do not overlap.

A given fact settles what the code leaves open.  Where it can be tested when the function is called it becomes a test
like any other assumption; where it cannot (rows of a ``T **``) it is taken at the user's word, and said to be.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from ..affine import Affine, AllOf, AnyOf, Constraint, Formula, at_most, equal, less, negate
from ..model import Assumption, AssumptionCode, Nest, RetileError
from ..sets import Region
from ..values import replace

_COMPARISONS = {"<": less, "<=": at_most, "==": equal, ">": lambda a, b: less(b, a), ">=": lambda a, b: at_most(b, a),
                "!=": lambda a, b: negate(equal(a, b))}


def with_given(nest: Nest, relations: Iterable[str] = (), distinct: Iterable[str] = ()) -> Nest:
    """The nest with facts added: relations such as ``lda >= n``, and names such as ``a,b`` that do not overlap.

    ``distinct`` takes two names that share no byte, or one name whose rows share none.  Raises RetileError if a text is
    not understood, names nothing of the nest, or contradicts what is already known.
    """
    assumptions = list(nest.assumptions)
    for text in relations:
        assumptions.append(Assumption(AssumptionCode.RELATION, text, _relation(nest, text), given=True))
    for text in distinct:
        assumptions = _distinct(nest, assumptions, text)
    conditions = [a.condition for a in assumptions if a.condition is not None]
    if Region.where(*nest.facts, *conditions).is_empty():
        raise RetileError(f"{nest.address}: the given facts contradict each other or the code: "
                          f"{'; '.join(relations)}.\nLeave out the one that does not hold.")
    return replace(nest, assumptions=tuple(assumptions))


def _relation(nest: Nest, text: str) -> Formula:
    from pycparser import c_parser

    try:
        unit = c_parser.CParser().parse("void given(void) { (" + text + "); }")
        return _formula(unit.ext[0].body.block_items[0], _Reader(nest))
    except (c_parser.ParseError, AttributeError, IndexError, TypeError, _NotUnderstood) as error:
        reason = f" ({error})" if isinstance(error, _NotUnderstood) else ""
        raise RetileError(f"'{text}' is not a relation between sizes of the nest at {nest.address}{reason}.\n"
                          f"Write a comparison such as \"{_example(nest)}\", joined by && where needed; sizes here: "
                          f"{', '.join(p.text for p in nest.parameters) or 'none'}.") from None


def _example(nest: Nest) -> str:
    names = [parameter.text for parameter in nest.parameters]
    return f"{names[1]} >= {names[0]}" if len(names) > 1 else f"{names[0]} >= 1" if names else "n >= 1"


class _NotUnderstood(Exception):
    """Part of a relation that is not affine in the nest's parameters."""


class _Reader:
    """Looks up the nest's parameters by their C text."""

    def __init__(self, nest: Nest) -> None:
        from pycparser import c_generator

        self._written = c_generator.CGenerator().visit
        self._symbols = {"".join(p.text.split()): p.symbol for p in nest.parameters}

    def affine(self, node: Any) -> Affine:
        """An affine expression; _NotUnderstood if it is another one."""
        kind = type(node).__name__
        if kind == "Constant" and node.type.replace("unsigned ", "").replace("long ", "") in ("int", "long"):
            return Affine.of(int(node.value.rstrip("uUlL"), 0))
        symbol = self._symbols.get("".join(self._written(node).split()))
        if symbol is not None:
            return Affine.of(symbol)
        if kind == "UnaryOp" and node.op in "+-":
            return self.affine(node.expr) * (1 if node.op == "+" else -1)
        if kind == "BinaryOp" and node.op in ("+", "-", "*"):
            return _combined(node.op, self.affine(node.left), self.affine(node.right))
        raise _NotUnderstood(f"'{self._written(node)}' is no size of the nest")


def _combined(op: str, left: Affine, right: Affine) -> Affine:
    if op in "+-":
        return left + right if op == "+" else left - right
    if left.is_constant or right.is_constant:
        return right * left.constant if left.is_constant else left * right.constant
    raise _NotUnderstood("a product of two sizes")


def _formula(node: Any, reader: _Reader) -> Formula:
    op = getattr(node, "op", None)
    if op in ("&&", "||"):
        parts = (_formula(node.left, reader), _formula(node.right, reader))
        return AllOf(parts) if op == "&&" else AnyOf(parts)
    if op == "!":
        return negate(_formula(node.expr, reader))
    if op not in _COMPARISONS:
        raise _NotUnderstood("there is no comparison")
    found: Constraint | Formula = _COMPARISONS[op](reader.affine(node.left), reader.affine(node.right))
    return found


def _distinct(nest: Nest, assumptions: list[Assumption], text: str) -> list[Assumption]:
    names = [name.strip() for name in text.split(",")]
    known = {storage.name for storage in nest.storages}
    missing = [name for name in names if name not in known and f"{name}[]" not in known]
    if len(names) not in (1, 2) or missing or len(set(names)) != len(names):
        what = f"'{missing[0]}' is not stored to or read in the nest" if missing else "it takes one name or two"
        raise RetileError(f"wrong --distinct {text}: {what}.\nNames here: {', '.join(sorted(known))}.")
    settled = [replace(a, given=True) if _are_named(a, names) else a for a in assumptions]
    if settled == assumptions:
        raise RetileError(f"--distinct {text} settles nothing at {nest.address}: no assumption is about that.")
    return settled


def _are_named(assumption: Assumption, names: list[str]) -> bool:
    """A name stands for what it points to, rows behind rows included: ``to`` for ``to`` and ``to[]``."""
    if len(assumption.storages) == 1 and assumption.code is not AssumptionCode.OTHER:
        return assumption.storages == tuple(names)
    return {name.removesuffix("[]") for name in assumption.storages} == {name.removesuffix("[]") for name in names}
