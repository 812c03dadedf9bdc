"""Sets of integer points, on islpy: the only module that knows of it.

A ``Region`` is a set of assignments of integers to names.  Every name, parameter or iterator, is an isl parameter of a
set without dimensions, so that regions combine by name, whatever names each of them knows; a name that a region does
not mention is free.  All operations are exact.  The library: Verdoolaege, "isl: An integer set library for the
polyhedral model", 2010.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from functools import lru_cache, reduce

from .affine import Affine, AllOf, AnyOf, Constraint, Formula
from .isl import isl

_CONTEXT = isl.Context()
_PARAM = isl.dim_type.param


class Names:
    """One-to-one between free text (``g->n``) and identifiers that isl can read."""

    def __init__(self) -> None:
        self._of_text: dict[str, str] = {}
        self._text_of: dict[str, str] = {}

    def identifier(self, text: str) -> str:
        """The identifier for a text; the same text always gets the same one."""
        if text not in self._of_text:
            identifier = f"x{len(self._of_text)}"
            self._of_text[text] = identifier
            self._text_of[identifier] = text
        return self._of_text[text]

    def text(self, identifier: str | None) -> str:
        """The text of an identifier made here."""
        return self._text_of[identifier or ""]


_NAMES = Names()


def _written(form: Affine) -> str:
    parts = [str(form.constant)]
    for symbol, coefficient in form.terms:
        if isinstance(symbol, str):
            name = _NAMES.identifier(symbol)
        else:
            name = f"floor(({_written(symbol.numerator)})/{symbol.divisor})"
        parts.append(f"{coefficient}*{name}")
    return " + ".join(parts)


def _condition(formula: Formula) -> str:
    if isinstance(formula, Constraint):
        return f"({_written(formula.form)} {'=' if formula.equality else '>='} 0)"
    if not formula.parts:
        return "(1 = 1)" if isinstance(formula, AllOf) else "(1 = 0)"
    word = " and " if isinstance(formula, AllOf) else " or "
    return "(" + word.join(_condition(part) for part in formula.parts) + ")"


def _names_in(formula: Formula, into: set[str]) -> set[str]:
    if isinstance(formula, Constraint):
        into |= formula.form.names()
    else:
        for part in formula.parts:
            _names_in(part, into)
    return into


class Region:
    """A set of assignments of integers to names."""

    __slots__ = ("_set",)

    def __init__(self, points: isl.Set) -> None:
        self._set = points

    @staticmethod
    def where(*formulas: Formula) -> Region:
        """All assignments under which every formula holds; with no formula, all assignments."""
        return _where(formulas)

    @staticmethod
    def union(regions: Iterable[Region]) -> Region:
        """The union; nothing of no regions."""
        return reduce(lambda a, b: a | b, regions, Region.where(AnyOf()))

    def __and__(self, other: Region) -> Region:
        return _both(self, other)

    def __or__(self, other: Region) -> Region:
        return Region(self._set.union(other._set))

    def __sub__(self, other: Region) -> Region:
        return Region(self._set.subtract(other._set))

    def is_empty(self) -> bool:
        """True if no assignment of integers lies in the region."""
        return bool(self._set.is_empty())

    @property
    def size(self) -> int:
        """How many convex pieces it is made of."""
        return int(self._set.n_basic_set())

    def within(self, other: Region) -> bool:
        """True if every point of this region lies in the other."""
        return bool(self._set.is_subset(other._set))

    def implies(self, formula: Formula) -> bool:
        """True if the formula holds at every point of the region."""
        return self.within(Region.where(formula))

    def names(self) -> tuple[str, ...]:
        """The names that the region mentions."""
        count = self._set.dim(_PARAM)
        return tuple(_NAMES.text(self._set.get_dim_name(_PARAM, at)) for at in range(count))

    def without(self, names: Iterable[str]) -> Region:
        """Project the names away: the assignments to the others that some value of these completes."""
        points = self._set
        for name in names:
            at = points.find_dim_by_name(_PARAM, _NAMES.identifier(name))
            if at >= 0:
                points = points.project_out(_PARAM, at, 1)
        return Region(points)

    def only(self, names: Iterable[str]) -> Region:
        """Project away all but these names."""
        keep = set(names)
        return self.without(name for name in self.names() if name not in keep)

    def renamed(self, names: Mapping[str, str]) -> Region:
        """Give names new names; no new name may stand in the region already."""
        points = self._set
        at = {name: points.find_dim_by_name(_PARAM, _NAMES.identifier(name)) for name in names}
        for name, place in at.items():
            if place >= 0:
                points = points.set_dim_name(_PARAM, place, _NAMES.identifier(names[name]))
        return Region(points)

    def at(self, values: Mapping[str, int]) -> Region:
        """The points at which these names have these values; the names are projected away."""
        points = self._set
        for name, value in values.items():
            place = points.find_dim_by_name(_PARAM, _NAMES.identifier(name))
            if place >= 0:
                points = points.fix_val(_PARAM, place, isl.Val.int_from_si(_CONTEXT, value))
                points = points.project_out(_PARAM, place, 1)
        return Region(points)

    def coalesced(self) -> Region:
        """The same points, written with fewer pieces where possible."""
        return Region(self._set.coalesce())

    def relative_to(self, context: Region) -> Region:
        """A region, simpler where possible, that agrees with this one at all points of ``context``."""
        return Region(self._set.gist(context._set).coalesce())

    def hull(self) -> Region:
        """A convex region that contains this one, made only of constraints that this one shows (may be larger)."""
        return Region(isl.Set.from_basic_set(self._set.remove_divs().coalesce().simple_hull()))

    def first(self, order: Iterable[str]) -> dict[str, int] | None:
        """The lexicographically smallest point in the given order of names; None if the region is empty.

        Names of the region that ``order`` leaves out come last.  Every name must be bounded below in that order.
        """
        order = tuple(dict.fromkeys((*order, *self.names())))
        ordered = self._in_order(order)
        if ordered.is_empty():
            return None
        try:
            point = ordered.lexmin().sample_point()
        except isl.Error:  # the library gives up on some sets with many divisions: go from name to name
            return _first_by_name(ordered, order)
        if point.is_void():  # or it finds none where there are some
            return _first_by_name(ordered, order)
        return {name: _value(point, at) for at, name in enumerate(order)}

    def sample(self, names: Iterable[str] = ()) -> dict[str, int] | None:
        """Some point, with a value for each name of the region and of ``names``; None if the region is empty."""
        if self.is_empty():
            return None
        order = tuple(dict.fromkeys((*names, *self.names())))
        point = self._in_order(order).sample_point()
        return {name: _value(point, at) for at, name in enumerate(order)}

    def pieces(self) -> tuple[tuple[Constraint, ...], ...]:
        """The region as a disjunction of conjunctions; names that exist only inside a piece become floors."""
        found: list[tuple[Constraint, ...]] = []
        self._set.compute_divs().coalesce().foreach_basic_set(lambda piece: found.append(_constraints(piece)))
        return tuple(found)

    def formula(self) -> Formula:
        """The region as a formula."""
        pieces = tuple(AllOf(piece) for piece in self.pieces())
        return pieces[0] if len(pieces) == 1 else AnyOf(pieces)

    def extreme(self, form: Affine, largest: bool) -> int | None:
        """The largest or smallest value of a form over the region; None if the region is empty or it is unbounded."""
        probe = (self & Region.where(Constraint(Affine.of("~") - form, equality=True))).only(["~"])
        ordered = probe._in_order(("~",)).coalesce()  # without empty pieces, which would count as 0
        if ordered.is_empty():
            return None
        value = ordered.dim_max_val(0) if largest else ordered.dim_min_val(0)
        return _integer(value) if value.is_int() else None

    def points(self, order: Iterable[str]) -> list[tuple[int, ...]]:
        """All points, as values of the names in this order, sorted; the region must be bounded in them."""
        order = tuple(order)
        found: list[tuple[int, ...]] = []
        ordered = self._in_order(order)
        ordered.foreach_point(lambda point: found.append(tuple(_value(point, at) for at in range(len(order)))))
        return sorted(found)

    def _in_order(self, order: tuple[str, ...]) -> isl.Set:
        """The points as an isl set whose dimensions are these names, which must be all that the region mentions."""
        points = self._set.from_params()
        for at, name in enumerate(order):
            place = points.find_dim_by_name(_PARAM, _NAMES.identifier(name))
            points = points.move_dims(isl.dim_type.set, at, _PARAM, place, 1) if place >= 0 else \
                points.insert_dims(isl.dim_type.set, at, 1)
        if points.dim(_PARAM):
            raise ValueError(f"names without a place in the order: {set(self.names()) - set(order)}")
        return points

    def __repr__(self) -> str:
        return f"Region({self._set.to_str()})"


# A search for a plan asks the same few questions of the same relations many times over.
@lru_cache(maxsize=4096)
def _where(formulas: tuple[Formula, ...]) -> Region:
    both = AllOf(formulas)
    names = ", ".join(_NAMES.identifier(name) for name in sorted(_names_in(both, set())))
    text = f"[{names}] -> {{ : {_condition(both)} }}"
    return Region(isl.Set.read_from_str(_CONTEXT, text))


@lru_cache(maxsize=1 << 14)
def _both(one: Region, other: Region) -> Region:
    return Region(one._set.intersect(other._set))


def _first_by_name(points: isl.Set, order: tuple[str, ...]) -> dict[str, int]:
    """The smallest value of each name in turn, given those before it."""
    found: dict[str, int] = {}
    for at, name in enumerate(order):
        points = points.coalesce()  # without empty pieces, whose smallest value would count as 0
        value = points.dim_min_val(at)
        points = points.fix_val(isl.dim_type.set, at, value)
        found[name] = _integer(value)
    return found


def _integer(value: isl.Val) -> int:
    return int(value.to_str())


def _value(point: isl.Point, at: int) -> int:
    return _integer(point.get_coordinate_val(isl.dim_type.set, at))


def _constraints(piece: isl.BasicSet) -> tuple[Constraint, ...]:
    names = [_NAMES.text(piece.get_dim_name(_PARAM, at)) for at in range(piece.dim(_PARAM))]
    found: list[Constraint] = []
    listed = piece.get_constraint_list()
    for number in range(listed.n_constraint()):
        constraint = listed.get_at(number)
        form = Affine((), _integer(constraint.get_constant_val()))
        for at, name in enumerate(names):
            form = form + Affine.of(name) * _integer(constraint.get_coefficient_val(_PARAM, at))
        for at in range(piece.dim(isl.dim_type.div)):
            factor = _integer(constraint.get_coefficient_val(isl.dim_type.div, at))
            if factor:
                form = form + _div(piece, at, names) * factor
        found.append(Constraint(form, bool(constraint.is_equality())))
    return tuple(_without_div_bounds(found, piece))


def _div(piece: isl.BasicSet, at: int, names: list[str]) -> Affine:
    div = piece.get_div(at)
    denominator = div.get_denominator_val()
    divisor = _integer(denominator)
    form = Affine((), _integer(div.get_constant_val().mul(denominator)))
    for place, name in enumerate(names):
        form = form + Affine.of(name) * _integer(div.get_coefficient_val(_PARAM, place).mul(denominator))
    for inner in range(at):
        factor = _integer(div.get_coefficient_val(isl.dim_type.div, inner).mul(denominator))
        if factor:
            form = form + _div(piece, inner, names) * factor
    return form.floor_div(divisor)


def _without_div_bounds(constraints: list[Constraint], piece: isl.BasicSet) -> Iterable[Constraint]:
    """Leave out the constraints that only say what a floor is; they hold for every floor by definition."""
    universe = Region.where()
    for constraint in constraints:
        if any(not isinstance(symbol, str) for symbol, _ in constraint.form.terms) and \
                not constraint.equality and universe.implies(constraint):
            continue
        yield constraint
