"""A nest as the search for plans sees it: how often its loops run, and how its accesses walk through memory.

Sizes that nobody gave count as 1000 (as a million, if with 1000 all arrays would fit into the second cache), and a
bound that depends on an outer loop as it is in the middle of that loop.  All numbers here only rank plans; none of them
decides what is legal.
"""

from __future__ import annotations

from collections.abc import Mapping
from math import prod

from ..affine import Affine, Bound
from ..dependence import Dependences
from ..model import Nest, ScalarClass, Statement, Storage, StorageKind
from ..values import dataclass
from .machine import Machine

UNKNOWN_SIZE, LARGE_SIZE = 1000, 1_000_000


@dataclass(frozen=True)
class Reference:
    """One way in which the main statements reach an array."""

    storage: str
    subscripts: tuple[Affine, ...]
    write: bool
    read: bool
    element: int  # bytes of a cell
    strides: tuple[tuple[str, int], ...]  # bytes from one iteration of a loop to the next, for loops that it depends on

    def stride(self, loop: str) -> int:
        """How many bytes apart two iterations of a loop reach, 0 if the loop does not matter."""
        return dict(self.strides).get(loop, 0)

    @property
    def loops(self) -> frozenset[str]:
        """The loops that its subscripts depend on."""
        return frozenset(loop for loop, _ in self.strides)


@dataclass(frozen=True)
class View:
    """A nest, a machine, and what follows from the two."""

    nest: Nest
    dependences: Dependences
    machine: Machine
    sizes: Mapping[str, int]  # by symbol, of all parameters
    assumed: int | None  # what sizes count as that the user did not give; None if all are given
    trips: Mapping[str, int]  # iterations of every loop, about
    main: Statement  # the one that runs most often
    body: tuple[Statement, ...]  # it, and all others in the same loops
    references: tuple[Reference, ...]  # of these
    sums: tuple[Reference, ...]  # private scalars that they sum into, as arrays over the loops that they are private to
    serial: frozenset[str]  # loops of which one iteration waits for the one before

    @property
    def loops(self) -> tuple[str, ...]:
        """The loops around the main statement, outermost first."""
        return self.main.loops

    def bytes_of(self, reference: Reference, trips: Mapping[str, int] | None = None) -> int:
        """How much of an array a reference touches while its loops run so often (all of it by default)."""
        trips = self.trips if trips is None else trips
        return reference.element * prod(max(1, trips.get(loop, 1)) for loop in reference.loops)


def view_of(nest: Nest, dependences: Dependences, machine: Machine, sizes: Mapping[str, int]) -> View:
    """Look at a nest; ``sizes`` by name as far as they are known, unknown names are ignored."""
    known = {p.symbol: sizes[name] for p in nest.parameters for name in (p.symbol, p.text) if name in sizes}
    view = _view(nest, dependences, machine, known, UNKNOWN_SIZE)
    if view.assumed and sum(view.bytes_of(reference) for reference in view.references) < machine.second:
        return _view(nest, dependences, machine, known, LARGE_SIZE)
    return view


def _view(nest: Nest, dependences: Dependences, machine: Machine, known: Mapping[str, int], unknown: int) -> View:
    values = {p.symbol: known.get(p.symbol, unknown) for p in nest.parameters}
    trips = _trips(nest, values)
    counts = {s.id: prod(trips[loop] for loop in s.loops) for s in nest.statements}
    main = max(nest.statements,
               key=lambda s: (len(s.loops), counts[s.id], sum(a.write for a in s.accesses), s.span.start))
    body = tuple(s for s in nest.statements if s.loops == main.loops)
    assumed = None if len(known) == len(nest.parameters) else unknown
    return View(nest, dependences, machine, values, assumed, trips, main, body, _references(nest, body, values),
                _sums(nest, body), _serial(body, dependences))


def _trips(nest: Nest, values: Mapping[str, int]) -> dict[str, int]:
    middle, trips = dict(values), {}
    for loop in nest.loops:  # outer loops come first in the text
        first, last = (_value(bound, middle) for bound in (loop.first, loop.last))
        trips[loop.id] = max(1, (last - first) // loop.step + 1)
        middle[loop.id] = (first + last) // 2
    return trips


def _value(bound: Bound, values: Mapping[str, int]) -> int:
    if isinstance(bound, Affine):
        return bound.evaluate({name: values.get(name, UNKNOWN_SIZE) for name in bound.names()})
    return (min if bound.kind == "min" else max)(_value(one, values) for one in bound.bounds)


def references_of(view: View, statement: Statement) -> tuple[Reference, ...]:
    """The ways in which another statement reaches arrays."""
    return _references(view.nest, (statement,), view.sizes)


def _references(nest: Nest, body: tuple[Statement, ...], values: Mapping[str, int]) -> tuple[Reference, ...]:
    found: dict[tuple[str, tuple[Affine, ...]], Reference] = {}
    for access in (access for statement in body for access in statement.accesses):
        storage = nest.storage(access.storage)
        if storage.kind is StorageKind.SCALAR or access.subscripts is None:
            continue
        key = access.storage, access.subscripts
        before = found.get(key)
        element = storage.element_bytes or 8
        steps = {loop: _stride(nest, storage, access.subscripts, loop, values) * element for loop in body[0].loops}
        found[key] = Reference(*key, access.write or bool(before and before.write),
                               not access.write or bool(before and before.read), element,
                               tuple((loop, step) for loop, step in steps.items() if _uses(access.subscripts, loop)))
    return tuple(found.values())


def _sums(nest: Nest, body: tuple[Statement, ...]) -> tuple[Reference, ...]:
    names = dict.fromkeys(access.storage for statement in body for access in statement.accesses if access.update)
    scalars = [nest.storage(name) for name in names if nest.storage(name).scalar is ScalarClass.PRIVATE]
    return tuple(Reference(s.name, (), True, True, s.element_bytes or 8,
                           tuple((loop, s.element_bytes or 8) for loop in body[0].loops if loop in s.private_to))
                 for s in scalars)


def _uses(subscripts: tuple[Affine, ...], loop: str) -> bool:
    """True if other iterations of a loop reach other cells; the few copies of ``t % 2`` count as one."""
    return any(loop in subscript.names() and not (subscript.coefficient(loop) and any(
        not isinstance(symbol, str) and loop in symbol.numerator.names() for symbol, _ in subscript.terms))
        for subscript in subscripts)


def _stride(nest: Nest, storage: Storage, subscripts: tuple[Affine, ...], loop: str, values: Mapping[str, int]) -> int:
    """Elements between two iterations of a loop."""
    row, total = 1, 0
    extents = storage.shape[-len(subscripts):] if storage.shape else ()
    for at in range(len(subscripts) - 1, -1, -1):
        one, other = ({name: 16 + (step if name == loop else 0) for name in subscripts[at].names()} | dict(values)
                      for step in (0, nest.loop(loop).step))
        if at < len(storage.strides):
            row = _distance(nest, storage.strides[at], values)
        total += (subscripts[at].evaluate(other) - subscripts[at].evaluate(one)) * row
        extent = extents[at] if at < len(extents) else None
        row *= UNKNOWN_SIZE if extent is None else max(1, _value(extent, values))
    return abs(total)


def _distance(nest: Nest, text: str, values: Mapping[str, int]) -> int:
    """The value of a product of sizes as the code writes it; unknown ones count as usual."""
    known = {p.text: values[p.symbol] for p in nest.parameters}
    factors = [part.strip(" ()") for part in text.split("*")]
    return prod(int(part) if part.isdecimal() else known.get(part, UNKNOWN_SIZE) for part in factors)


def _serial(body: tuple[Statement, ...], dependences: Dependences) -> frozenset[str]:
    """Loops that carry a value of the main statements from one iteration to a later one."""
    names = {statement.id for statement in body}
    return frozenset(edge.carried_by for edge in dependences.edges
                     if edge.carried_by is not None and edge.kind == "flow" and {edge.source, edge.target} <= names
                     and not edge.free)
