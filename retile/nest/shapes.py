"""Rows and columns of flattened arrays.

``a[(i*n + j)*m + k]`` is a polynomial, no affine form. Its terms are grouped by the products of sizes that multiply
the iterators, here n*m, m and 1; where each divides the one before, they are taken for the strides of a grid with
subscripts (i, j, k). The guess is right if every inner subscript stays inside its row; that is proven from the loop
bounds or becomes an assumption over the sizes. Method: Grosser, Ramanujam, Pouchet, Sadayappan & Pop, "Optimistic
delinearization of parametrically sized arrays", 2015.

All accesses of an array must agree on the strides; ``a[j]`` beside ``a[i*n + j]`` lies in row 0.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from math import gcd
from typing import Any

from ..affine import Affine, AllOf, AnyOf, Symbol, at_most, less
from ..model import AssumptionCode
from ..values import dataclass
from .context import Context
from .knowledge import Obligation
from .polynomial import Monomial, Poly, monomial, quotient, symbol_names
from .setting import Setting

Stride = tuple[int, Monomial]  # a factor and a product of parameters


@dataclass(frozen=True)
class Subscript:
    """One flattened subscript of one access."""

    poly: Poly
    context: Context
    node: object


@dataclass(frozen=True)
class Grid:
    """How a flattened subscript is read."""

    strides: tuple[Stride, ...]  # outermost first; the last is 1
    subscripts: tuple[tuple[Affine, ...] | None, ...]  # one tuple per access; None where it does not fit
    obligations: tuple[Obligation, ...]  # that inner subscripts stay in their rows


def grid_of(setting: Setting, accesses: Sequence[Subscript], storage: str) -> Grid | None:
    """The grid that all accesses agree on; None if there is none."""
    if any(parts_of(setting, access.poly) is None for access in accesses):
        return None
    polys = [access.poly for access in accesses]
    plain = _strides(setting, polys)
    if plain is None:
        return None
    best: Grid | None = None
    for strides in dict.fromkeys((plain, _with_factors(setting, polys, plain))):
        grid = _read(setting, accesses, strides, storage)
        if grid is not None and not grid.obligations:
            return grid
        best = best or grid
    return best


def needs_grid(setting: Setting, poly: Poly) -> bool:
    """True if an iterator is multiplied by sizes."""
    return any(symbol_names(s) & setting.loop_ids for factors, _ in poly.terms if len(factors) > 1 for s in factors)


def parts_of(setting: Setting, poly: Poly) -> list[tuple[Symbol | None, Monomial, int]] | None:
    """Terms as (iterator, sizes, coefficient); None if iterators multiply each other."""
    found: list[tuple[Symbol | None, Monomial, int]] = []
    for factors, coefficient in poly.terms:
        moving = [s for s in factors if symbol_names(s) & setting.loop_ids]
        if len(moving) > 1:
            return None
        sizes = monomial([s for s in factors if s not in moving])
        found.append((moving[0] if moving else None, sizes, coefficient))
    return found


def _strides(setting: Setting, polys: Iterable[Poly]) -> tuple[Stride, ...] | None:
    """The products of sizes beside iterators, largest first; None unless each divides the one before."""
    sizes = {part[1] for poly in polys for part in parts_of(setting, poly) or () if part[0] is not None and part[1]}
    ordered = sorted(sizes, key=lambda m: (-len(m), str(m)))
    for large, small in zip(ordered, ordered[1:], strict=False):
        if len(large) == len(small) or quotient(large, small) is None:
            return None
    return (*((1, m) for m in ordered), (1, ()))


def _with_factors(setting: Setting, polys: Iterable[Poly], strides: tuple[Stride, ...]) -> tuple[Stride, ...]:
    """The same strides with the common factor of their coefficients: ``i*2*n`` are rows of 2*n."""
    found = []
    polys = list(polys)
    for _, sizes in strides[:-1]:
        common = 0
        for poly in polys:
            for moving, product, coefficient in parts_of(setting, poly) or ():
                if moving is not None and product == sizes:
                    common = gcd(common, coefficient)
        found.append((common or 1, sizes))
    return (*found, (1, ()))


def _read(setting: Setting, accesses: Sequence[Subscript], strides: tuple[Stride, ...], storage: str) -> Grid | None:
    lengths = _row_lengths(setting, strides)
    if lengths is None:
        return None
    subscripts: list[tuple[Affine, ...]] = []
    obligations: dict[Obligation, None] = {}
    for access in accesses:
        chosen = _chosen(setting, access, strides, lengths, storage)
        if chosen is None:
            return None
        subscripts.append(chosen[0])
        obligations.update(dict.fromkeys(chosen[1:]))
    return Grid(strides, tuple(subscripts), tuple(obligations))


def _chosen(
    setting: Setting, access: Subscript, strides: tuple[Stride, ...], lengths: list[Affine], storage: str
) -> tuple[Any, ...] | None:
    """The subscripts of one access, followed by the obligation that they need, if any; None if they never fit.

    ``i*m + m - 1 - j`` is column m - 1 - j of row i, although the term m alone could be one row.
    """
    best: tuple[Any, ...] | None = None
    for whole_rows in (True, False):
        found = _subscripts(setting, access.poly, strides, whole_rows)
        if found is None:
            continue
        inside = AllOf(
            tuple(
                part
                for subscript, length in zip(found[1:], lengths, strict=True)
                for part in (at_most(0, subscript), less(subscript, length))
            )
        )
        obligation = Obligation(
            AssumptionCode.ROW_BOUND, inside, access.context.formula, access.context.loops, access.node, (storage,)
        )
        condition = setting.knowledge.condition(obligation)
        if condition is None:
            return (found,)
        if condition != AnyOf() and best is None:
            best = (found, obligation)
    return best


def _row_lengths(setting: Setting, strides: tuple[Stride, ...]) -> list[Affine] | None:
    lengths = []
    for (outer_factor, outer), (inner_factor, inner) in zip(strides, strides[1:], strict=False):
        rest = quotient(outer, inner)
        if rest is None or outer_factor % inner_factor:
            return None
        length = setting.affine(Poly(((rest, outer_factor // inner_factor),)))
        if length is None:
            return None
        lengths.append(length)
    return lengths


def _subscripts(
    setting: Setting, poly: Poly, strides: tuple[Stride, ...], whole_rows: bool
) -> tuple[Affine, ...] | None:
    """The terms of a polynomial divided among the strides; sizes alone are rows only if ``whole_rows``."""
    totals = [Poly() for _ in strides]
    still, poly = _whole_rows(setting, poly, strides) if whole_rows else ({}, poly)
    for at, rows in still.items():
        totals[at] = totals[at] + rows
    for moving, sizes, coefficient in parts_of(setting, poly) or ():
        for at, (factor, product) in enumerate(strides):
            rest = quotient(sizes, product)
            if rest is None or coefficient % factor or (moving is not None and rest):
                continue
            if moving is None and product and not whole_rows:
                continue
            factors = monomial([*rest, *([moving] if moving is not None else [])])
            totals[at] = totals[at] + Poly.build({factors: coefficient // factor})
            break
    forms = [setting.affine(total) for total in totals]
    return None if any(form is None for form in forms) else tuple(form for form in forms if form is not None)


def _whole_rows(setting: Setting, poly: Poly, strides: tuple[Stride, ...]) -> tuple[dict[int, Poly], Poly]:
    """``- m - 1`` beside rows of length ``(m + 1)`` is one row back: written-out lengths become rows again."""
    found: dict[int, Poly] = {}
    for at, (factor, product) in enumerate(strides):
        if factor != 1 or len(product) != 1 or product[0] not in setting.factors:
            continue
        length = setting.expanded(Poly.of(product[0]))
        known = dict(poly.terms)
        leading = [(m, c) for m, c in length.terms if m]
        times = {known.get(m, 0) // c if known.get(m, 0) % c == 0 else 0 for m, c in leading}
        if len(times) == 1 and (count := times.pop()):
            found[at] = Poly.of(count)
            poly = poly - length * count
    return found, poly


def stride_texts(setting: Setting, strides: tuple[Stride, ...]) -> tuple[str, ...]:
    """The strides as C text."""
    return tuple(_text(setting, stride) for stride in strides)


def _text(setting: Setting, stride: Stride) -> str:
    factor, product = stride
    return setting.poly_text(Poly(((product, factor),)))
