"""Offsets of cells as C text, in arithmetic that nothing can overflow.

``sum(subscript * stride)``, computed modulo the address space or, to see whether that wraps, in ``double``.  One operand
of every product and the first one of every sum is converted, and products stand in one chain, so that no part is
computed in a narrower type:

    ((uintptr_t)n - 1) * m * p + (uintptr_t)k * 2
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from types import MappingProxyType

from ..affine import Affine, Floor
from ..model import CType, Storage
from ..values import dataclass
from .expression import UNARY, Scope, express, written

ADDRESS = CType("uintptr_t", 64, False)
_ATOM = re.compile(r"[\w.\[\]]+(?:->[\w.\[\]]+)*\Z")


@dataclass(frozen=True)
class Arithmetic:
    """Writes offsets in one type; ``texts``: how parts of the user's texts are written instead."""

    scope: Scope
    type: str = ADDRESS.spelling
    texts: Mapping[str, str] = MappingProxyType({})

    # ------------------------------------------------------------ strides

    def strides(self, storage: Storage, dimensions: int) -> list[str | None]:
        """The distance in elements between two values of each subscript, as a product of factors; None for 1."""
        if storage.strides:
            return [None if text.strip() in ("", "1") else self.factors(text) for text in storage.strides]
        extents = storage.shape[len(storage.shape) - dimensions + 1:] if dimensions > 1 else ()
        found: list[str | None] = [None]
        factors: list[str] = []
        for extent in reversed(extents):
            assert extent is not None
            single = len(extent.terms) + bool(extent.constant) == 1
            factors.insert(0, self.added(extent) if single else self.whole(extent))
            found.insert(0, " * ".join(factors))
        return found

    def factors(self, text: str) -> str:
        """A product that the nest's reader wrote, ``ld * (m + 1)``, as factors of a chain."""
        parts = split(text, "*")
        return " * ".join(self._factor(sign_less) for _, sign_less in parts)

    def _factor(self, text: str) -> str:
        text = text.strip()
        if _ATOM.match(text):
            return self.replaced(text)
        inner = text[1:-1] if text.startswith("(") and _closes_last(text) else text
        if inner == text or re.match(r"\((?:unsigned )?long long\)", inner):
            return f"({self.type})({self.replaced(inner)})"
        terms = split(inner, "+-")
        if len(terms) == 1 and len(split(inner, "*")) == 1:
            return f"({self.type})({self.replaced(inner)})"
        return f"({self._terms(terms)})"

    def _terms(self, terms: Sequence[tuple[str, str]]) -> str:
        text = ""
        for sign, term in terms:
            product = self.factors(term)
            if not text:
                product = product if product.startswith("(") else f"({self.type}){product}"
                text = product if sign != "-" else f"({self.type})0 - {product}"
            else:
                cast = "" if len(split(term, "*")) == 1 else f"({self.type})"
                text += f" {sign} {cast}{product}"
        return text

    def replaced(self, text: str) -> str:
        """The text with its parts as they are written here."""
        for old, new in self.texts.items():
            text = re.sub(rf"(?<![\w.>]){re.escape(old)}(?!\w)", new, text)
        return text

    # ------------------------------------------------------------ sums

    def linear(self, subscripts: Sequence[Affine], strides: Sequence[str | None]) -> str:
        """``sum(subscript * stride)``; its first operand is converted."""
        parts: list[str] = []
        for subscript, stride in zip(subscripts, strides, strict=True):
            if subscript == Affine():
                continue
            if stride is not None and subscript == Affine((), 1):
                parts.append(stride if stride.startswith(f"({self.type})") or stride.startswith(f"(({self.type})")
                             else f"({self.type}){stride}")
            elif stride is not None:
                parts.append(f"{self.whole(subscript)} * {stride}")
            else:
                parts.append(self.added(subscript) if parts else self._bare(subscript))
        return " + ".join(parts) if parts else "0"

    def _bare(self, form: Affine) -> str:
        text = self.whole(form)
        return text.removeprefix("(").removesuffix(")") if text.startswith("((") else text

    def whole(self, form: Affine) -> str:
        """A form as a factor: its first operand is converted, so that all of it is."""
        text = self.added(form)
        if form.is_constant and form.constant >= 0:
            return f"({self.type}){text}"
        converted = text if text.startswith(f"({self.type})") else f"({self.type}){text}"
        return f"({converted})" if " " in text else converted

    def added(self, form: Affine) -> str:
        """A form as a sum behind ``x +`` or behind a conversion."""
        form = form.substitute(self.scope.meanings)
        if any(isinstance(symbol, Floor) for symbol, _ in form.terms):
            return f"({express(form, self.scope).text})"
        text = ""
        for symbol, factor in sorted(form.terms, key=lambda term: term[1] < 0):
            assert isinstance(symbol, str)
            operand = self.operand(symbol)
            product = operand if abs(factor) == 1 else f"({self.type}){operand} * {abs(factor)}"
            text += (" - " if factor < 0 else " + ") + product if text else (product if factor > 0 else f"0 - {product}")
        if form.constant or not text:
            text += f" {'-' if form.constant < 0 else '+'} {abs(form.constant)}" if text else str(form.constant)
        return text

    def operand(self, symbol: str) -> str:
        """A parameter's text."""
        known = self.scope.operands[symbol]
        replaced = self.replaced(known.text)
        return (known if replaced == known.text else written(replaced, known.type)).at(UNARY)


def split(text: str, signs: str) -> list[tuple[str, str]]:
    """The operands between these signs outside brackets, each with the sign before it."""
    found, depth, start, sign = [], 0, 0, ""
    for at, character in enumerate(text):
        depth += (character in "([") - (character in ")]")
        if depth == 0 and character in signs and text[at:at + 2] != "->":
            if text[start:at].strip():
                found.append((sign, text[start:at].strip()))
            start, sign = at + 1, character
    return [*found, (sign, text[start:].strip())]


def _closes_last(text: str) -> bool:
    depth = 0
    for at, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0:
            return at == len(text) - 1
    return False
