"""Which cells of a storage a nest touches, as a box: what a test of "these two do not overlap" compares.

The subscripts of all instances are projected onto the parameters, dimension by dimension.  Where that gives no bound (a
subscript that is read from memory, a row whose length nobody states), no test can be written.
"""

from __future__ import annotations

from collections.abc import Iterator

from .affine import Affine, AnyOf, Formula, at_most, equal, formula_names
from .model import Access, Assumption, AssumptionCode, CType, Nest, Statement, Storage
from .sets import Region
from .values import dataclass, replace


@dataclass(frozen=True)
class Touched:
    """The smallest and the largest value of each subscript, in parameters."""

    lows: tuple[Affine, ...]
    highs: tuple[Affine, ...]


# All of an object: whatever is in it may be touched.
WHOLE = Touched((), ())


def with_known_ranges(nest: Nest) -> Nest:
    """The nest with a mark on every assumption whose test would need what is not known ahead of the nest.

    That is: of two storages the touched cells of one; or a size that may only be read where data says so.
    """
    pairs = [a for a in nest.assumptions if a.code in (AssumptionCode.NO_OVERLAP, AssumptionCode.UNCHANGED)
             and len(a.storages) == 2]
    hidden = {p.symbol for p in nest.parameters if p.readable == AnyOf()}
    if not pairs and not hidden:
        return nest
    region = _defined(nest)
    known = {name: _is_known(nest, nest.storage(name), region, hidden)
             for name in dict.fromkeys(name for pair in pairs for name in pair.storages)}
    assumptions = tuple(replace(a, ranges_known=all(known[name] for name in a.storages) if a in pairs
                                else a.condition is None or not formula_names(a.condition) & hidden)
                        for a in nest.assumptions)
    return nest if assumptions == nest.assumptions else replace(nest, assumptions=assumptions)


def _is_known(nest: Nest, storage: Storage, region: Region, hidden: set[str]) -> bool:
    found = touched(nest, storage, region)
    if found is None or storage.readable == AnyOf():
        return False
    texts = [p.text for p in nest.parameters if p.symbol in hidden]
    strides = not any(text in stride for text in texts for stride in storage.strides)
    return strides and not any(form.names() & hidden for form in (*found.lows, *found.highs))


def touched(nest: Nest, storage: Storage, region: Region | None = None) -> Touched | None:
    """The box of a storage's cells that the nest may touch; None if it is not known.

    ``region``: the parameters' values for which it has to be right; those at which the nest is defined if not given.
    """
    if storage.element_bytes is None and not isinstance(storage.element, CType):
        return None
    uses = [(statement, access) for statement in nest.statements for access in statement.accesses
            if access.storage == storage.name]
    if not storage.shape and all(access.subscripts == () for _, access in uses):
        return WHOLE
    if not uses or any(access.subscripts is None for _, access in uses):
        return WHOLE if storage.shape and None not in storage.shape else None
    dimensions = len(uses[0][1].subscripts or ())
    if not storage.strides and dimensions > 1 and None in storage.shape[len(storage.shape) - dimensions + 1:]:
        return None
    region = _defined(nest) if region is None else region
    spans = [_span(nest, uses, dimension, region) for dimension in range(dimensions)]
    lows, highs = (tuple(span[side] for span in spans if span[side] is not None) for side in (0, 1))
    return Touched(lows, highs) if len(lows) == len(highs) == dimensions else None  # type: ignore[arg-type]


def reached(nest: Nest, storage: Storage, found: Touched, region: Region) -> bool:
    """True if, wherever the nest touches the storage at all, accesses that surely happen reach each end of the box."""
    uses = [(statement, access) for statement in nest.statements for access in statement.accesses
            if access.storage == storage.name]
    anywhere = Region.union(_values(nest, uses, 0, region)).without(["~v"])
    sure = [use for use in uses if use[1].certain]
    for dimension, ends in enumerate(zip(found.lows, found.highs, strict=True)):
        values = Region.union(_values(nest, sure, dimension, region))
        if not all((anywhere - (values & Region.where(equal(Affine.of("~v"), end))).without(["~v"])).is_empty()
                   for end in ends):
            return False
    return True


def _defined(nest: Nest) -> Region:
    facts: list[Formula] = list(nest.facts)
    for parameter in nest.parameters:
        value = Affine.of(parameter.symbol)
        facts += [at_most(parameter.type.smallest, value), at_most(value, parameter.type.largest)]
    return Region.where(*facts)


def _span(nest: Nest, uses: list[tuple[Statement, Access]], dimension: int, region: Region) \
        -> tuple[Affine | None, Affine | None]:
    """A lower and an upper bound of a subscript over all instances."""
    hull = Region.union(_values(nest, uses, dimension, region)).hull()
    bounds = list(_bounds(hull.relative_to(region))) + list(_bounds(hull))
    return (_simplest(low for low, _ in bounds if low is not None), _simplest(high for _, high in bounds if high is not None))


def _values(nest: Nest, uses: list[tuple[Statement, Access]], dimension: int, region: Region) -> Iterator[Region]:
    """The values ``~v`` of a subscript in each access, over the parameters."""
    parameters = [parameter.symbol for parameter in nest.parameters]
    for statement, access in uses:
        if access.subscripts is not None:
            yield (region & Region.where(statement.domain, equal(Affine.of("~v"), access.subscripts[dimension]))) \
                .only([*parameters, "~v"])


def _bounds(values: Region) -> Iterator[tuple[Affine | None, Affine | None]]:
    for piece in values.pieces():
        for constraint in piece:
            factor = constraint.form.coefficient("~v")
            rest = constraint.form - Affine.of("~v") * factor
            if not factor or "~v" in rest.names():
                continue
            low = _divided(-rest if factor > 0 else rest, abs(factor), up=True)
            high = _divided(-rest if factor > 0 else rest, abs(factor), up=False)
            yield (low if factor > 0 or constraint.equality else None, high if factor < 0 or constraint.equality else None)


def _divided(form: Affine, by: int, up: bool) -> Affine:
    return (form + by - 1).floor_div(by) if up else form.floor_div(by)


def _simplest(forms: Iterator[Affine]) -> Affine | None:
    """Any of the bounds is right; the one with the fewest names is the easiest to read."""
    return min(forms, key=lambda form: (len(form.names()), len(form.terms), str(form)), default=None)
