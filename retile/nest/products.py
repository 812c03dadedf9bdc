"""Products of unsigned numbers that may wrap in fewer bits than an address has.

``a[i * beams + j]`` with 32-bit unsigned numbers wraps when the array is larger than that. The terms are grouped by
their products of sizes; where each group's factor is not negative, the value is largest where every factor is. The
product of that largest factor and the sizes becomes a parameter, computed in 64 bits, and the sum of these must fit.
"""

from __future__ import annotations

from ..affine import Affine, AllOf, Formula, at_most, equal
from ..model import AssumptionCode, CType
from ..sets import Region
from .context import Context
from .knowledge import Obligation
from .polynomial import Monomial, Poly
from .setting import Setting
from .shapes import parts_of


def product_obligations(setting: Setting) -> tuple[list[Obligation], list[object]]:
    """What the noted products need so as not to wrap, and the syntax nodes of those for which nothing can be said."""
    found: list[Obligation] = []
    hopeless: list[object] = []
    for poly, type_, context, node in tuple(setting.narrow):
        formula = _fits(setting, poly, type_, context)
        if formula is None:
            hopeless.append(node)
        else:
            found.append(Obligation(AssumptionCode.NO_WRAP, formula, context.formula, context.loops, node))
    return found, hopeless


def _fits(setting: Setting, poly: Poly, type_: CType, context: Context) -> Formula | None:
    """A condition under which a polynomial lies in the range of a type throughout a domain."""
    parts: list[Formula] = []
    total = Affine()
    for sizes, factor in _factors(setting, poly).items():
        form = setting.affine(factor)
        top = None if form is None else _upper_form(setting, form, context)
        if form is None or top is None:
            return None
        parts.append(at_most(0, form))
        for size in sizes:
            parts.append(at_most(0, Affine.of(size)))
        if sizes:
            steps = _largest_products(setting, top, sizes)
            parts += [at_most(step, type_.largest) for step in steps]
            top = steps[-1]
        total = total + top
    return AllOf((*parts, at_most(total, type_.largest)))


def _factors(setting: Setting, poly: Poly) -> dict[Monomial, Poly]:
    """The terms grouped by the sizes that multiply iterators; sizes alone count by themselves."""
    found: dict[Monomial, Poly] = {}
    for moving, sizes, coefficient in parts_of(setting, poly) or ():
        found[sizes] = found.get(sizes, Poly()) + Poly((((moving,) if moving is not None else (), coefficient),))
    return found


def _largest_products(setting: Setting, top: Affine, sizes: Monomial) -> list[Affine]:
    """``top * size * size ...`` as parameters, each product exact if the one before is bounded."""
    plain = setting.poly_text(Poly.of(top))
    text, symbol = f"(unsigned long long)({plain})", f"({plain})" if len(top.terms) > 1 or top.constant else plain
    wide = setting.types.arithmetic.named(("unsigned", "long", "long"))
    assert wide is not None
    found = []
    for size in sizes:
        piece = setting.poly_text(Poly.of(size))
        text, symbol = f"{text} * {piece}", f"{symbol} * {piece}"
        found.append(Affine.of(setting.wide_parameter(symbol, f"({text})", wide)))
    return found


def _upper_form(setting: Setting, form: Affine, context: Context) -> Affine | None:
    """An affine form of the parameters that bounds a form from above throughout a domain; None if none is seen."""
    if not form.names() & set(context.loops):
        return form
    mark = "~top"
    known = setting.knowledge
    region = (known.region(context.formula) & Region.where(equal(Affine.of(mark), form))).without(context.loops)
    if region.is_empty():
        return Affine()
    for piece in (*region.pieces(), *region.hull().pieces()):
        for constraint in piece:
            factor = constraint.form.coefficient(mark)
            if factor >= 0 and not (constraint.equality and factor):
                continue
            rest = constraint.form - Affine.of(mark) * factor
            candidate = (rest if factor < 0 else -rest).floor_div(abs(factor))
            if candidate.names() <= set(known.parameters) and region.implies(at_most(Affine.of(mark), candidate)):
                return candidate
    return None
