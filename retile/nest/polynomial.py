"""Integer polynomials over iterators and parameters: what a subscript is before its rows and columns are told apart.

A product of sizes, ``(i*n + j)*m + k``, is no affine form, but becomes several once the array is seen as rows. A
symbol is a name or a floor, as in affine forms.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping

from ..affine import Affine, Floor, Symbol
from ..values import dataclass

Monomial = tuple[Symbol, ...]  # factors, sorted; the empty one is the constant


def symbol_names(symbol: Symbol) -> frozenset[str]:
    """The names in a symbol."""
    return frozenset((symbol,)) if isinstance(symbol, str) else symbol.numerator.names()


def _order(symbol: Symbol) -> tuple[int, str]:
    return (0, symbol) if isinstance(symbol, str) else (1, repr(symbol))


def monomial(factors: Collection[Symbol]) -> Monomial:
    """The product of these symbols."""
    return tuple(sorted(factors, key=_order))


def quotient(of: Monomial, by: Monomial) -> Monomial | None:
    """``of / by`` where ``by`` divides it; None otherwise."""
    rest = list(of)
    for factor in by:
        if factor not in rest:
            return None
        rest.remove(factor)
    return tuple(rest)


@dataclass(frozen=True)
class Poly:
    """A sum of integer multiples of monomials; sorted, without zeros."""

    terms: tuple[tuple[Monomial, int], ...] = ()

    @staticmethod
    def build(coefficients: Mapping[Monomial, int]) -> Poly:
        """The polynomial with these coefficients."""
        kept = [(m, c) for m, c in coefficients.items() if c]
        return Poly(tuple(sorted(kept, key=lambda term: (len(term[0]), [_order(s) for s in term[0]]))))

    @staticmethod
    def of(value: Poly | Affine | Symbol | int) -> Poly:
        """A polynomial from a form, a symbol or an integer."""
        if isinstance(value, Poly):
            return value
        if isinstance(value, int):
            return Poly.build({(): value})
        if isinstance(value, (str, Floor)):
            return Poly((((value,), 1),))
        return Poly.build({**{(s,): c for s, c in value.terms}, (): value.constant})

    def __add__(self, other: Poly | int) -> Poly:
        total = dict(self.terms)
        for factors, coefficient in Poly.of(other).terms:
            total[factors] = total.get(factors, 0) + coefficient
        return Poly.build(total)

    def __mul__(self, other: Poly | int) -> Poly:
        total: dict[Monomial, int] = {}
        for left, a in self.terms:
            for right, b in Poly.of(other).terms:
                factors = monomial(left + right)
                total[factors] = total.get(factors, 0) + a * b
        return Poly.build(total)

    def __neg__(self) -> Poly:
        return self * -1

    def __sub__(self, other: Poly | int) -> Poly:
        return self + -Poly.of(other)

    def names(self) -> frozenset[str]:
        """All names in the polynomial."""
        return frozenset().union(*(symbol_names(s) for factors, _ in self.terms for s in factors))

    @property
    def constant(self) -> int | None:
        """Its value if it is a constant; None otherwise."""
        if not self.terms:
            return 0
        return self.terms[0][1] if len(self.terms) == 1 and not self.terms[0][0] else None

    def affine(self) -> Affine | None:
        """The polynomial as an affine form; None where a product of symbols remains."""
        if any(len(factors) > 1 for factors, _ in self.terms):
            return None
        form = {factors[0]: c for factors, c in self.terms if factors}
        return Affine.build(form, dict(self.terms).get((), 0))

    def replace(self, values: Mapping[Symbol, Poly]) -> Poly:
        """Replace plain symbols by polynomials; floors stay as they are."""
        total = Poly()
        for factors, coefficient in self.terms:
            product = Poly.of(coefficient)
            for symbol in factors:
                product = product * values.get(symbol, Poly.of(symbol))
            total = total + product
        return total
