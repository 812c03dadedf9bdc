"""Tests, when the function is called, of the facts that a variant rests on.

Two storages do not overlap if one's last touched byte lies before the other's first.  The touched subscripts are
projected from the nest's instances onto the parameters (the box that they need), and addresses are compared as
integers: pointers are only converted, never moved, and sums of ``uintptr_t`` cannot be undefined.  If the nest makes no
round, it touches nothing, and either answer is right.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from ..affine import Affine, AllOf, Constraint, Floor, Formula
from ..model import (
    Assumption,
    AssumptionCode,
    CType,
    Nest,
    RetileError,
    Storage,
)
from ..touched import touched
from .expression import (
    PRODUCT,
    UNARY,
    Expression,
    NoRoom,
    Scope,
    condition,
    express,
    written,
)
from .names import Names

ADDRESS = CType("uintptr_t", 64, False)
_NAMED_TYPE = re.compile(r"(?:struct|union|enum) \w+|(?!(?:struct|union|enum|void)\b)[A-Za-z_]\w*")


@dataclass(frozen=True)
class Tests:
    """What a variant has to test: declarations ahead of the ``if``, and its conditions."""

    declarations: tuple[str, ...]
    conditions: tuple[str, ...]


def tests_of(nest: Nest, assumptions: tuple[Assumption, ...], scope: Scope, names: Names) -> Tests:
    """The tests of some assumptions; RetileError if one cannot be tested."""
    ranges = _Ranges(nest, scope, names)
    conditions: list[str] = []
    for assumption in assumptions:
        if assumption.given and not assumption.testable:
            continue
        if assumption.code in (AssumptionCode.NO_OVERLAP, AssumptionCode.UNCHANGED) and len(assumption.storages) == 2:
            conditions.append(ranges.apart(*assumption.storages, assumption))
        elif assumption.condition is not None:
            for part in _parts(assumption):
                if not scope.implies(part):
                    conditions.append(condition(part, scope).text)
                    scope = scope.knowing(part)
    return Tests(tuple(ranges.declarations), (*ranges.signs, *dict.fromkeys(conditions)))


def _parts(assumption: Assumption) -> tuple[Formula, ...]:
    if assumption.condition is None:
        return ()
    return assumption.condition.parts if isinstance(assumption.condition, AllOf) else (assumption.condition,)


class _Ranges:
    def __init__(self, nest: Nest, scope: Scope, names: Names) -> None:
        self._nest = nest
        self._scope = scope
        self._names = names
        self._named: dict[str, tuple[str, str]] = {}
        self.declarations: list[str] = []
        self.signs: list[str] = []

    def apart(self, one: str, other: str, assumption: Assumption) -> str:
        """The condition that two storages' touched bytes lie apart."""
        first, second = self._range(one, assumption), self._range(other, assumption)
        return f"{first[1]} <= {second[0]} || {second[1]} <= {first[0]}"

    def _range(self, name: str, assumption: Assumption) -> tuple[str, str]:
        """The names of the addresses of a storage's first touched byte and of the one behind its last."""
        if name not in self._named:
            storage = self._nest.storage(name)
            low, high = self._extent(storage, assumption)
            word = "_".join(re.findall(r"\w+", name)) + ("_pointer" if name.startswith("&") else "")
            begin, end = self._names.fresh(f"{word}_begin"), self._names.fresh(f"{word}_end")
            base = f"(uintptr_t){written(storage.pointer_text or name, ADDRESS).at(UNARY)}"
            size = self._size(storage)
            start = base if low == "0" else f"{base} + {self._times(low, size)}"
            self.declarations += [f"const uintptr_t {begin} = {start};",
                                  f"const uintptr_t {end} = {begin if low == '0' else base} + {self._times(high, size)};"]
            self._named[name] = (begin, end)
        return self._named[name]

    @staticmethod
    def _times(count: str, size: str) -> str:
        if count == "1":
            return size
        return f"({count}) * {size}" if " + " in count or " - " in count else f"{count} * {size}"

    @staticmethod
    def _size(storage: Storage) -> str:
        if isinstance(storage.element, CType) and storage.element_bytes in (None, storage.element.bits // 8):
            return f"sizeof({storage.element.spelling})"
        if isinstance(storage.element, str) and re.fullmatch(_NAMED_TYPE, storage.element):
            return f"sizeof({storage.element})"
        if not storage.shape and storage.pointer_text:  # a structure without a name, a pointer
            text = storage.pointer_text
            return f"sizeof {text[1:]}" if re.fullmatch(r"&\w+", text) else f"sizeof({text[1:]})" if text.startswith("&") \
                else f"sizeof *{written(text, ADDRESS).at(UNARY)}"
        return str(storage.element_bytes)

    def _extent(self, storage: Storage, assumption: Assumption) -> tuple[str, str]:
        """First touched element and the one behind the last, as sums of uintptr_t."""
        found = touched(self._nest, storage, self._scope.region)
        if found is None:
            raise self._untestable(storage, assumption)
        if not found.lows:
            extents = [extent for extent in storage.shape if extent is not None]
            return "0", " * ".join(map(self._modular, extents)) or "1"
        lows, highs, dimensions = list(found.lows), list(found.highs), len(found.lows)
        strides = self._strides(storage, dimensions)
        highs[-1] = highs[-1] + 1
        if dimensions > 1 and self._is_extent(highs[-1], strides[-2]):  # whole rows: (n - 1) * m + m
            highs[-2:] = [highs[-2] + 1, Affine()]
        return self._linear(lows, strides), self._linear(highs, strides)

    def _is_extent(self, form: Affine, stride: Expression | None) -> bool:
        """True if a form is the row length that a stride's text says."""
        return stride is not None and bool(form.terms) and stride.text in (self._sum(form), self._modular(form))

    def _untestable(self, storage: Storage, assumption: Assumption) -> RetileError:
        return RetileError(f"{self._nest.address}: which cells of '{storage.name}' the nest touches is not known, so that "
                           f"'{assumption.text}' cannot be tested when the function is called.\n"
                           "Declare the pointers 'restrict', or give --distinct if you know that it holds.")

    def _strides(self, storage: Storage, dimensions: int) -> list[Expression | None]:
        """The distance in elements between two values of each subscript; None for 1."""
        if storage.strides:
            return [self._stride(text) for text in storage.strides]
        extents = storage.shape[len(storage.shape) - dimensions + 1:] if dimensions > 1 else ()
        strides: list[Expression | None] = [None]
        factors: list[str] = []
        for extent in reversed(extents):
            assert extent is not None
            text = self._sum(extent)
            factors.insert(0, text if len(extent.terms) + bool(extent.constant) == 1 else self._modular(extent))
            strides.insert(0, Expression(" * ".join(factors), ADDRESS, PRODUCT if len(factors) > 1 else UNARY))
        return strides

    def _stride(self, text: str) -> Expression | None:
        if text.strip() in ("", "1"):
            return None
        parameter = next((p for p in self._nest.parameters if p.text == text), None)
        if parameter is not None and parameter.type.signed and \
                not self._scope.implies(Constraint(Affine.of(parameter.symbol))):
            sign = f"{text} >= 0"
            if sign not in self.signs:
                self.signs.append(sign)
        sum_of = re.fullmatch(r"\(?(.+?)\s*([+-])\s*(\d+)\)?", text)
        if sum_of is not None and sum_of[1] in {p.text for p in self._nest.parameters}:
            return Expression(f"((uintptr_t){sum_of[1]} {sum_of[2]} {sum_of[3]})", ADDRESS)
        return written(text, ADDRESS)

    def _linear(self, subscripts: list[Affine], strides: list[Expression | None]) -> str:
        """``sum(subscript * stride)``; its first operand is converted, so that all of it is unsigned."""
        parts: list[str] = []
        for subscript, stride in zip(subscripts, strides, strict=True):
            if subscript == Affine():
                continue
            if stride is not None and subscript == Affine((), 1):
                parts.append(stride.text if stride.text.startswith(("(uintptr_t)", "((uintptr_t)")) else f"(uintptr_t){stride.at(UNARY)}")
            elif stride is not None:
                value = self._modular(subscript)
                parts.append(f"{value} * {stride.at(UNARY)}")
            else:
                parts.append(self._sum(subscript) if parts else self._modular(subscript).removeprefix("(")
                             .removesuffix(")") if self._modular(subscript).startswith("((") else self._modular(subscript))
        return " + ".join(parts) if parts else "0"

    def _modular(self, form: Affine) -> str:
        """A form in arithmetic modulo the address space, which nothing can overflow; it binds like a factor."""
        text = self._sum(form)
        if form.is_constant and form.constant >= 0:
            return f"(uintptr_t){text}"
        return f"((uintptr_t){text})" if " " in text else f"(uintptr_t){text}"

    def _sum(self, form: Affine) -> str:
        """A form as a sum whose first operand decides its type."""
        form = form.substitute(self._scope.meanings)
        if any(isinstance(symbol, Floor) for symbol, _ in form.terms):
            return f"({self._exact(form)})"
        text = ""
        for symbol, factor in sorted(form.terms, key=lambda term: term[1] < 0):
            assert isinstance(symbol, str)
            operand = self._scope.operands[symbol].at(UNARY)
            product = operand if abs(factor) == 1 else f"{operand} * {abs(factor)}"
            text += (" - " if factor < 0 else " + ") + product if text else (product if factor > 0 else f"0 - {product}")
        if form.constant or not text:
            text += f" {'-' if form.constant < 0 else '+'} {abs(form.constant)}" if text else str(form.constant)
        return text

    def _exact(self, form: Affine) -> str:
        try:
            return express(form, self._scope).text
        except NoRoom:
            raise RetileError(f"{self._nest.address}: the addresses that the nest touches cannot be computed without "
                              "overflow; give --trust, or declare the pointers 'restrict'.") from None
