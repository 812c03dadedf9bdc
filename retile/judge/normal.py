"""Histories of numbers in which the order of sums and the like does not count.

Additions, multiplications, minima, maxima and bitwise operations may be done in another order where a plan says so, and
anyway where nothing rounds or overflows: in unsigned types, for bitwise operations, for extremes of integers (ISO C11,
6.2.5).  Chains of one operation are compared as multisets of what goes into them; a difference counts as a sum with its
second operand negated.
"""

from __future__ import annotations

from collections import Counter
from typing import Any

from .kinds import Number
from .tags import Book, Operation

_EXTREMES = {"fmax": "max", "fmin": "min"}
_NEUTRAL: dict[str, float] = {"+": 0, "*": 1}


def family(name: str) -> str | None:
    """What an operation accumulates: ``+``, ``*``, ``&``, ``|``, ``^``, ``min`` or ``max``; None for any other."""
    if name in ("+", "-"):
        return "+"
    if name in ("*", "&", "|", "^"):
        return name
    if name[:2] == "a " and name.endswith((" : b", " : a")):
        takes_smaller = (name[2] == "<") == name.endswith("? a : b")
        return "min" if takes_smaller else "max"
    return _EXTREMES.get(name)


class Forms:
    """Normal forms of tags; two tags with one form differ at most in the order of accumulations."""

    def __init__(self, book: Book, reassociate: bool) -> None:
        self.book, self.reassociate = book, reassociate
        self._forms: dict[int, Any] = {}
        self._terms: dict[tuple[int, str], Counter[Any]] = {}
        self._numbers: dict[Any, int] = {}

    def form(self, tag: int) -> int:
        """The number of a tag's normal form."""
        waiting, reached = [tag], set()
        while waiting:
            at = waiting.pop()
            if at not in self._forms and at not in reached:
                reached.add(at)
                waiting += self.book.operands(at)
        for at in sorted(reached):  # operands are older than what is made of them
            key = self._key(at)
            self._forms[at] = self._numbers.setdefault(key, len(self._numbers))
        found: int = self._forms[tag]
        return found

    def _free(self, operation: Operation) -> str | None:
        """The family of an operation whose order does not count."""
        kind, name = operation.kind, family(operation.name)
        if name is None or self.reassociate:
            return name
        whole = not kind.floating
        return name if whole and (not kind.signed or name not in "+*") else None

    def _key(self, tag: int) -> Any:
        operation, operands = self.book.entries[tag]
        parts = self.book.operands(tag)
        if not parts:
            return "leaf", tag
        name = self._free(operation)
        if name is not None:
            return name, operation.kind.name, _multiset(name, self._chain(tag, name, operation.kind))
        if operation.name == "convert" and not operation.kind.signed and not operation.kind.floating:
            inner = self.book.entries[parts[0]][0]
            if self._free(inner) in ("+", "*") and inner.kind.size >= operation.kind.size:
                name = family(inner.name) or "+"
                return name, operation.kind.name, _multiset(name, self._chain(tag, name, operation.kind))
        return operation.name, operation.kind.name, tuple(self._forms[part] for part in parts)

    def _chain(self, tag: int, name: str, kind: Number) -> Counter[Any]:
        """What goes into a chain: how often each form, constants by value."""
        known = self._terms.get((tag, name))
        if known is not None:
            return known
        operation, _ = self.book.entries[tag]
        parts = self.book.operands(tag)
        terms: Counter[Any] = Counter()
        if self._free(operation) == name:
            for number, part in enumerate(parts):
                sign = -1 if number and operation.name == "-" else 1
                for term, count in self._inner(part, name, operation.kind).items():
                    terms[term] += sign * count
        elif parts and self._continues(operation, parts[0], name):
            terms = self._chain(parts[0], name, kind)
        else:
            terms[self._term(tag, name)] += 1
        self._terms[tag, name] = terms
        return terms

    def _inner(self, part: int, name: str, kind: Number) -> Counter[Any]:
        operation, _ = self.book.entries[part]
        parts = self.book.operands(part)
        same = self._free(operation) == name and \
            (operation.kind == kind if kind.floating else operation.kind.size >= kind.size)
        if same or (parts and self._continues(operation, parts[0], name)):
            return self._chain(part, name, kind)
        return Counter([self._term(part, name)])

    def _continues(self, operation: Operation, part: int, name: str) -> bool:
        """A sum that is cut to a narrow unsigned type and goes on counts as one chain, modulo the narrow type."""
        if operation.name != "convert" or operation.kind.signed or operation.kind.floating:
            return False
        inner = self.book.entries[part][0]
        return name in "+*" and self._free(inner) == name and inner.kind.size >= operation.kind.size

    def _term(self, tag: int, name: str) -> Any:
        operation, operands = self.book.entries[tag]
        if operation.name == "constant":
            return "neutral" if operands == _NEUTRAL.get(name) else ("constant", operands)
        return self._forms[tag]


def _multiset(name: str, terms: Counter[Any]) -> frozenset[tuple[Any, int]]:
    """The terms of a chain as a value; constants of a sum are one, repetition in a minimum means nothing."""
    kept = {term: count for term, count in terms.items() if count and term != "neutral"}
    if name in ("min", "max", "&", "|"):
        return frozenset((term, 1) for term in kept)
    if name != "+":
        return frozenset(kept.items())
    total = sum(term[1] * count for term, count in kept.items() if isinstance(term, tuple))
    others = ((term, count) for term, count in kept.items() if not isinstance(term, tuple))
    return frozenset([*others, ("constants", total)])
