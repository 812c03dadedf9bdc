"""Tests, when the function is called, of the facts that a variant rests on.

Two storages do not overlap if one's last touched byte lies before the other's first.  The touched subscripts are
projected from the nest's instances onto the parameters (the box that they need), and addresses are compared as
integers: pointers are only converted, never moved, and sums of ``uintptr_t`` cannot be undefined.  If the nest makes no
round, it touches nothing, and either answer is right.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from ..affine import Affine, AllOf, Constraint, Floor, equal
from ..model import (
    Access,
    Assumption,
    AssumptionCode,
    CType,
    Nest,
    RetileError,
    Statement,
    Storage,
)
from ..sets import Region
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
        if assumption.code in (AssumptionCode.NO_OVERLAP, AssumptionCode.UNCHANGED) and len(assumption.storages) == 2:
            conditions.append(ranges.apart(*assumption.storages, assumption))
        elif assumption.condition is not None:
            parts = assumption.condition.parts if isinstance(assumption.condition, AllOf) else (assumption.condition,)
            for part in parts:
                if not scope.implies(part):
                    conditions.append(condition(part, scope).text)
                    scope = scope.knowing(part)
    return Tests(tuple(ranges.declarations), (*ranges.signs, *dict.fromkeys(conditions)))


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
            word = "_".join(re.findall(r"\w+", name))
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
        if isinstance(storage.element, str) and re.fullmatch(r"(?:(?:struct|union|enum) )?[A-Za-z_]\w*", storage.element):
            return f"sizeof({storage.element})"
        return str(storage.element_bytes)

    def _extent(self, storage: Storage, assumption: Assumption) -> tuple[str, str]:
        """First touched element and the one behind the last, as sums of uintptr_t."""
        if storage.element_bytes is None and not isinstance(storage.element, CType):
            raise self._untestable(storage, assumption)
        uses = [(statement, access) for statement in self._nest.statements for access in statement.accesses
                if access.storage == storage.name]
        if not storage.shape and all(access.subscripts == () for _, access in uses):
            return "0", "1"
        if any(access.subscripts is None for _, access in uses) or not uses:
            return "0", self._whole(storage, assumption)
        dimensions = len(uses[0][1].subscripts or ())
        lows, highs = [], []
        for dimension in range(dimensions):
            low, high = self._span(uses, dimension)
            if low is None or high is None:
                raise self._untestable(storage, assumption)
            lows.append(low)
            highs.append(high)
        strides = self._strides(storage, dimensions, assumption)
        highs[-1] = highs[-1] + 1
        if dimensions > 1 and self._is_extent(highs[-1], strides[-2]):  # whole rows: (n - 1) * m + m
            highs[-2:] = [highs[-2] + 1, Affine()]
        return self._linear(lows, strides), self._linear(highs, strides)

    def _is_extent(self, form: Affine, stride: Expression | None) -> bool:
        """True if a form is the row length that a stride's text says."""
        return stride is not None and len(form.terms) == 1 and self._sum(form) == stride.text

    def _untestable(self, storage: Storage, assumption: Assumption) -> RetileError:
        return RetileError(f"{self._nest.address}: which cells of '{storage.name}' the nest touches is not known, so that "
                           f"'{assumption.text}' cannot be tested when the function is called.\n"
                           "Declare the pointers 'restrict', or give --trust if you know that it holds.")

    def _whole(self, storage: Storage, assumption: Assumption) -> str:
        if not storage.shape or any(extent is None for extent in storage.shape):
            raise self._untestable(storage, assumption)
        return " * ".join(self._modular(extent) for extent in storage.shape if extent is not None)

    def _span(self, uses: list[tuple[Statement, Access]], dimension: int) -> tuple[Affine | None, Affine | None]:
        """A lower and an upper bound of a subscript over all instances, in parameters."""
        parameters = [parameter.symbol for parameter in self._nest.parameters]
        values = Region.union(
            (self._scope.region & Region.where(statement.domain, equal(Affine.of("~v"), access.subscripts[dimension])))
            .only([*parameters, "~v"]) for statement, access in uses if access.subscripts is not None)
        lows, highs = [], []
        for piece in values.hull().relative_to(self._scope.region).pieces() + values.hull().pieces():
            for constraint in piece:
                factor = constraint.form.coefficient("~v")
                rest = constraint.form - Affine.of("~v") * factor
                if not factor or "~v" in rest.names():
                    continue
                if factor > 0 or constraint.equality:
                    lows.append(_divided(-rest if factor > 0 else rest, abs(factor), up=True))
                if factor < 0 or constraint.equality:
                    highs.append(_divided(rest if factor < 0 else -rest, abs(factor), up=False))
        return _simplest(lows), _simplest(highs)

    def _strides(self, storage: Storage, dimensions: int, assumption: Assumption) -> list[Expression | None]:
        """The distance in elements between two values of each subscript; None for 1."""
        if storage.strides:
            return [self._stride(text) for text in storage.strides]
        extents = storage.shape[len(storage.shape) - dimensions + 1:] if dimensions > 1 else ()
        strides: list[Expression | None] = [None]
        factors: list[str] = []
        for extent in reversed(extents):
            if extent is None:
                raise self._untestable(storage, assumption)
            text = self._sum(extent)
            factors.insert(0, text if len(extent.terms) + bool(extent.constant) == 1 else f"(uintptr_t)({text})")
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
        sum_of = re.fullmatch(r"(.+?)\s*([+-])\s*(\d+)", text)
        if sum_of is not None and sum_of[1] in {p.text for p in self._nest.parameters}:
            return Expression(f"(uintptr_t){sum_of[1]} {sum_of[2]} {sum_of[3]}", ADDRESS, PRODUCT)
        return written(text, ADDRESS)

    def _linear(self, subscripts: list[Affine], strides: list[Expression | None]) -> str:
        """``sum(subscript * stride)``; its first operand is converted, so that all of it is unsigned."""
        parts: list[str] = []
        for subscript, stride in zip(subscripts, strides, strict=True):
            if subscript == Affine():
                continue
            if stride is not None and subscript == Affine((), 1):
                parts.append(stride.text if stride.text.startswith("(uintptr_t)") else f"(uintptr_t){stride.at(UNARY)}")
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


def _divided(form: Affine, by: int, up: bool) -> Affine:
    return (form + by - 1).floor_div(by) if up else form.floor_div(by)


def _simplest(forms: list[Affine]) -> Affine | None:
    """Any of the bounds is right; the one with the fewest names is the easiest to read."""
    return min(forms, key=lambda form: (len(form.names()), len(form.terms), str(form)), default=None)
