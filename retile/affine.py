"""Affine forms over named integers: the language that all rooms share.

A form is a sum of integer multiples of symbols and a constant.  A symbol is the name of an iterator or parameter (any
text, ``g->n`` too), or the floor of another form divided by a positive constant, so that strides, ``t % 2`` and
``n / 2`` stay exact (quasi-affine forms: Maydan, Hennessy & Lam, "Efficient and exact data dependence analysis", 1991).
A formula is a constraint on such forms, or a conjunction or disjunction of formulas.  Everything here is an immutable
value; nothing knows of C or of integer sets.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import lru_cache

from .values import dataclass


@dataclass(frozen=True)
class Floor:
    """``floor(numerator / divisor)`` with a divisor > 0, used as a symbol of a form."""

    numerator: Affine
    divisor: int


Symbol = str | Floor


def _symbol_key(symbol: Symbol) -> tuple[int, str]:
    return (0, symbol) if isinstance(symbol, str) else _floor_key(symbol)


@lru_cache(maxsize=4096)
def _floor_key(floor: Floor) -> tuple[int, str]:
    return 1, repr(floor)


@dataclass(frozen=True)
class Affine:
    """``constant + sum(coefficient * symbol)``; terms are sorted and never have coefficient 0."""

    terms: tuple[tuple[Symbol, int], ...] = ()
    constant: int = 0

    @staticmethod
    def of(value: Affine | Symbol | int) -> Affine:
        """The form of a name, a floor, an integer, or a form as it is."""
        if isinstance(value, Affine):
            return value
        if isinstance(value, int):
            return Affine((), value)
        return Affine(((value, 1),), 0)

    @staticmethod
    def build(coefficients: Mapping[Symbol, int], constant: int = 0) -> Affine:
        """The form with these coefficients; zeros are dropped, the order of the mapping does not matter."""
        terms = sorted(((s, c) for s, c in coefficients.items() if c), key=lambda term: _symbol_key(term[0]))
        return Affine(tuple(terms), constant)

    def coefficient(self, symbol: Symbol) -> int:
        """The coefficient of ``symbol``, 0 where it does not occur."""
        return next((c for s, c in self.terms if s == symbol), 0)

    def names(self) -> frozenset[str]:
        """All names in the form, those inside floors too."""
        found: set[str] = set()
        for symbol, _ in self.terms:
            found |= {symbol} if isinstance(symbol, str) else symbol.numerator.names()
        return frozenset(found)

    @property
    def is_constant(self) -> bool:
        """True if no symbol occurs."""
        return not self.terms

    def __add__(self, other: Affine | Symbol | int) -> Affine:
        other = Affine.of(other)
        coefficients = dict(self.terms)
        for symbol, coefficient in other.terms:
            coefficients[symbol] = coefficients.get(symbol, 0) + coefficient
        return Affine.build(coefficients, self.constant + other.constant)

    def __mul__(self, factor: int) -> Affine:
        return Affine.build({s: c * factor for s, c in self.terms}, self.constant * factor)

    def __neg__(self) -> Affine:
        return self * -1

    def __sub__(self, other: Affine | Symbol | int) -> Affine:
        return self + -Affine.of(other)

    __radd__ = __add__
    __rmul__ = __mul__

    def __rsub__(self, other: Symbol | int) -> Affine:
        return Affine.of(other) - self

    def floor_div(self, divisor: int) -> Affine:
        """``floor(self / divisor)`` for a divisor > 0; exact divisions and constants stay plain forms."""
        if divisor == 1:
            return self
        if all(c % divisor == 0 for _, c in self.terms):
            return Affine.build({s: c // divisor for s, c in self.terms}, self.constant // divisor)
        return Affine.of(Floor(self, divisor))

    def mod(self, divisor: int) -> Affine:
        """``self - divisor * floor(self / divisor)``, in ``0 .. divisor-1``."""
        return self - self.floor_div(divisor) * divisor

    def substitute(self, values: Mapping[str, Affine]) -> Affine:
        """Replace names by forms, inside floors too; names not in ``values`` stay."""
        result = Affine((), self.constant)
        for symbol, coefficient in self.terms:
            if isinstance(symbol, str):
                part = values.get(symbol, Affine.of(symbol))
            else:
                part = symbol.numerator.substitute(values).floor_div(symbol.divisor)
            result = result + part * coefficient
        return result

    def evaluate(self, values: Mapping[str, int]) -> int:
        """The value of the form; raises KeyError for a name without a value."""
        total = self.constant
        for symbol, coefficient in self.terms:
            if isinstance(symbol, str):
                total += coefficient * values[symbol]
            else:
                total += coefficient * (symbol.numerator.evaluate(values) // symbol.divisor)
        return total

    def __str__(self) -> str:
        parts: list[str] = []
        for symbol, coefficient in self.terms:
            name = symbol if isinstance(symbol, str) else f"floor(({symbol.numerator}) / {symbol.divisor})"
            body = name if abs(coefficient) == 1 else f"{abs(coefficient)}*{name}"
            parts.append(("- " if coefficient < 0 else "+ ") + body)
        if self.constant or not parts:
            parts.append(("- " if self.constant < 0 else "+ ") + str(abs(self.constant)))
        text = " ".join(parts)
        return text[2:] if text.startswith("+ ") else "-" + text[2:]


@dataclass(frozen=True)
class Extremum:
    """The smallest (``min``) or largest (``max``) of two or more bounds."""

    kind: str
    bounds: tuple[Bound, ...]


Bound = Affine | Extremum


def bound_names(bound: Bound) -> frozenset[str]:
    """All names in a bound."""
    if isinstance(bound, Affine):
        return bound.names()
    return frozenset().union(*(bound_names(b) for b in bound.bounds))


def map_bound(bound: Bound, change: Callable[[Affine], Affine]) -> Bound:
    """The bound with every form in it replaced by ``change(form)``, which must be monotone."""
    if isinstance(bound, Affine):
        return change(bound)
    return Extremum(bound.kind, tuple(map_bound(b, change) for b in bound.bounds))


@dataclass(frozen=True)
class Constraint:
    """``form >= 0``, or ``form == 0`` when ``equality``."""

    form: Affine
    equality: bool = False


@dataclass(frozen=True)
class AllOf:
    """Conjunction; true when empty."""

    parts: tuple[Formula, ...] = ()


@dataclass(frozen=True)
class AnyOf:
    """Disjunction; false when empty."""

    parts: tuple[Formula, ...] = ()


Formula = Constraint | AllOf | AnyOf


def less(a: Affine | int, b: Affine | int) -> Constraint:
    """``a < b`` over the integers."""
    return Constraint(Affine.of(b) - a - 1)


def at_most(a: Affine | int, b: Affine | int) -> Constraint:
    """``a <= b``."""
    return Constraint(Affine.of(b) - a)


def equal(a: Affine | int, b: Affine | int) -> Constraint:
    """``a == b``."""
    return Constraint(Affine.of(a) - b, equality=True)


def negate(formula: Formula) -> Formula:
    """The formula that holds exactly where this one does not."""
    if isinstance(formula, AllOf):
        return AnyOf(tuple(negate(part) for part in formula.parts))
    if isinstance(formula, AnyOf):
        return AllOf(tuple(negate(part) for part in formula.parts))
    below = Constraint(-formula.form - 1)
    return AnyOf((below, Constraint(formula.form - 1))) if formula.equality else below


def at_least_bound(value: Affine, bound: Bound) -> Formula:
    """``value >= bound``: all of them for a max, one of them for a min."""
    if isinstance(bound, Affine):
        return at_most(bound, value)
    parts = tuple(at_least_bound(value, b) for b in bound.bounds)
    return AllOf(parts) if bound.kind == "max" else AnyOf(parts)


def at_most_bound(value: Affine, bound: Bound) -> Formula:
    """``value <= bound``: all of them for a min, one of them for a max."""
    if isinstance(bound, Affine):
        return at_most(value, bound)
    parts = tuple(at_most_bound(value, b) for b in bound.bounds)
    return AllOf(parts) if bound.kind == "min" else AnyOf(parts)


def map_formula(formula: Formula, change: Callable[[Affine], Affine]) -> Formula:
    """The formula with every form in it replaced by ``change(form)``."""
    if isinstance(formula, Constraint):
        return Constraint(change(formula.form), formula.equality)
    return type(formula)(tuple(map_formula(part, change) for part in formula.parts))


def formula_names(formula: Formula) -> frozenset[str]:
    """All names in a formula."""
    if isinstance(formula, Constraint):
        return formula.form.names()
    return frozenset().union(*(formula_names(part) for part in formula.parts))
