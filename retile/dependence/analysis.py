"""Dependences as exact integer relations.

For every two accesses to one storage, one of them a write, the pairs of instances that touch the same cell are a set of
integer points: both domains, equal subscripts, and the source before the target in the original order.  The last is a
disjunction over the levels of the time vector, so each edge is carried by one loop or by none (Allen & Kennedy,
"Automatic translation of Fortran programs to vector form", 1987; exactness as in Pugh, "The Omega test", 1992).
Nothing is approximated: an edge exists if and only if some sizes make it happen, except where an access may touch any
cell (``Edge.exact`` is False then).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator

from ..affine import Affine, AnyOf, Formula, at_most, equal, less, map_formula
from ..model import Access, LoopText, Nest, ScalarClass, Statement, Storage
from ..order import Coordinate, first_differences, prime, primed, primed_vector
from ..sets import Region
from ..tree import occurrences
from ..values import dataclass
from .edges import Dependences, Edge


def analyse(nest: Nest) -> Dependences:
    """All dependences of a nest, under its facts and its assumptions."""
    context = defined(nest)
    domains = {statement.id: Region.where(statement.domain) & context for statement in nest.statements}
    times = original_times(nest)
    analysis = _Analysis(nest, domains, times)
    edges = tuple(edge for storage in nest.storages for edge in analysis.edges(storage))
    reuse = tuple(edge for storage in nest.storages if storage.private_to
                  for edge in analysis.edges(storage, as_stored=True))
    return Dependences(context, domains, times, edges, reuse, nest.assumptions)


def defined(nest: Nest) -> Region:
    """The parameters' values at which the nest is defined: its facts, its assumptions, subscripts inside extents."""
    conditions = [a.condition for a in nest.assumptions if a.condition is not None]
    context = Region.where(*nest.facts, *conditions)
    for outside in _outside_extents(nest):
        if not outside.is_empty():
            context = (context - outside).coalesced()
    return context


def _outside_extents(nest: Nest) -> Iterator[Region]:
    """Per access that surely happens: the parameters' values at which it leaves a declared extent."""
    seen: set[tuple[Formula, Formula, Formula]] = set()
    for statement in nest.statements:
        for access in statement.accesses:
            outside = _leaves_extents(access, nest.storage(access.storage))
            happens = statement.domain, access.where, outside
            if outside.parts and access.certain and happens not in seen:
                seen.add(happens)
                yield Region.where(*happens).without(statement.loops)


def _leaves_extents(access: Access, storage: Storage) -> AnyOf:
    parts: list[Formula] = []
    for subscript, extent in zip(access.subscripts or (), storage.shape, strict=False):
        if extent is not None:
            parts += [less(subscript, 0), at_most(extent, subscript)]
    return AnyOf(tuple(parts))


def original_times(nest: Nest) -> dict[str, tuple[Coordinate, ...]]:
    """Each statement's time vector in the original order, in its iterators."""
    times: dict[str, tuple[Coordinate, ...]] = {}
    for place in occurrences(nest.tree):
        times[place.leaf.statement] = tuple(
            moment if isinstance(moment, int) else Affine.of(moment[0]) * moment[1] if moment[1] else 0
            for moment in place.time)
    return times


@dataclass(frozen=True)
class _End:
    """A statement and one of its accesses."""

    statement: Statement
    access: Access


@dataclass(frozen=True)
class _Key:
    """What pairs of instances have in common that make up one edge."""

    source: str
    target: str
    kind: str
    carrier: str | None
    exact: bool = True
    update: str = ""
    free: bool = False
    # How far apart the two accesses' subscripts are where they move alike, so that each distance has its own edge.
    offset: tuple[int, ...] | None = None


def _offset(a: Access, b: Access) -> tuple[int, ...] | None:
    if a.subscripts is None or b.subscripts is None:
        return None
    apart = [x - y for x, y in zip(a.subscripts, b.subscripts, strict=True)]
    return tuple(form.constant for form in apart) if all(form.is_constant for form in apart) else None


def _key(source: _End, target: _End, carrier: str | None) -> _Key:
    a, b = source.access, target.access
    same = a.update if a.update == b.update else ""
    return _Key(source.statement.id, target.statement.id, _kind(a, b), carrier,
                a.subscripts is not None and b.subscripts is not None, same, bool(same) and a.exact_update and b.exact_update,
                _offset(a, b))


class _Analysis:
    def __init__(self, nest: Nest, domains: dict[str, Region], times: dict[str, tuple[Coordinate, ...]]) -> None:
        self._nest = nest
        self._domains = domains
        self._times = times
        self._primed: dict[str, Region] = {}
        self._order = {statement.id: at for at, statement in enumerate(nest.statements)}

    def edges(self, storage: Storage, as_stored: bool = False) -> Iterator[Edge]:
        """All edges on one storage; ``as_stored`` takes a private scalar as the one cell that it is in memory."""
        ends = [_End(statement, access) for statement in self._nest.statements
                for access in statement.accesses if access.storage == storage.name]
        if not any(end.access.write for end in ends):
            return
        private = () if as_stored else storage.private_to
        found: dict[_Key, list[Region]] = defaultdict(list)
        for source, target in _writing_pairs(ends):
            pairs = self.sharing(source, target, private)
            for carrier, relation in self._by_level(source.statement, target.statement, pairs):
                found[_key(source, target, carrier)].append(relation)
        for key, relations in found.items():
            yield self._edge(storage, key, Region.union(relations[1:]) | relations[0])
        if storage.scalar is ScalarClass.PRIVATE and storage.live_after and not as_stored:
            yield from self._last_values(storage, ends)

    def sharing(self, source: _End, target: _End, private: tuple[str, ...]) -> Region:
        """The pairs of instances whose accesses touch one cell, in any order."""
        equalities: list[Formula] = [equal(Affine.of(name), Affine.of(prime(name))) for name in private]
        equalities += [source.access.where, map_formula(target.access.where, lambda form: primed(form, target.statement.loops))]
        if source.access.subscripts is not None and target.access.subscripts is not None:
            equalities += [equal(a, primed(b, target.statement.loops)) for a, b in
                           zip(source.access.subscripts, target.access.subscripts, strict=True)]
        return self._domains[source.statement.id] & self._target_domain(target.statement) & Region.where(*equalities)

    def _target_domain(self, statement: Statement) -> Region:
        if statement.id not in self._primed:
            names = {loop: prime(loop) for loop in statement.loops}
            self._primed[statement.id] = self._domains[statement.id].renamed(names)
        return self._primed[statement.id]

    def _by_level(self, source: Statement, target: Statement, pairs: Region) -> Iterator[tuple[str | None, Region]]:
        if pairs.is_empty():
            return
        earlier, later = self._times[source.id], primed_vector(self._times[target.id], target.loops)
        strict = min(len(earlier), len(later))
        for level, relation in first_differences(pairs, earlier, later):
            if level == strict:  # the same instance of the same statement: no order to keep
                continue
            coordinate = earlier[level]
            carrier = next(iter(coordinate.names())) if isinstance(coordinate, Affine) else None
            yield carrier, relation

    def _edge(self, storage: Storage, key: _Key, relation: Region) -> Edge:
        source, target, kind, carrier = key.source, key.target, key.kind, key.carrier
        others = set(self._nest.statement(target).loops)
        common = tuple(loop for loop in self._nest.statement(source).loops if loop in others)
        loops = [self._nest.loop(id) for id in common]
        distances = [_distance(relation, loop) for loop in loops]
        known = tuple(d for d in distances if d is not None)
        return Edge(source, target, kind, storage.name, relation, carrier, common,
                    known if len(known) == len(loops) else None,
                    tuple(_direction(relation, loop, d) for loop, d in zip(loops, distances, strict=True)),
                    key.exact, tuple(a for a in self._nest.assumptions if storage.name in a.storages), key.update, key.free)

    def _last_values(self, storage: Storage, ends: list[_End]) -> Iterator[Edge]:
        """Every earlier write before the last one: what is seen after the nest is the last value."""
        writes = [end for end in ends if end.access.write]
        followed: dict[str, list[Region]] = defaultdict(list)
        before: list[tuple[Statement, Statement, str | None, Region]] = []
        for source in writes:
            for target in writes:
                for carrier, relation in self._by_level(source.statement, target.statement,
                                                        self.sharing(source, target, ())):
                    before.append((source.statement, target.statement, carrier, relation))
                    followed[source.statement.id].append(relation.without(map(prime, target.statement.loops)))
        for source_statement, target_statement, carrier, relation in before:
            names = {loop: prime(loop) for loop in target_statement.loops}
            later = Region.union(followed[target_statement.id]).renamed(names)
            last = relation - later
            if not last.is_empty():
                yield self._edge(storage, _Key(source_statement.id, target_statement.id, "output", carrier), last)


def _writing_pairs(ends: Iterable[_End]) -> Iterator[tuple[_End, _End]]:
    ends = tuple(dict.fromkeys(ends))
    for source in ends:
        for target in ends:
            if source.access.write or target.access.write:
                yield source, target


def _kind(source: Access, target: Access) -> str:
    if source.write:
        return "output" if target.write else "flow"
    return "anti"


def _advance(loop: LoopText) -> Affine:
    """How far the target is ahead of the source in a loop, in units of the C variable, upwards in time."""
    ahead = Affine.of(prime(loop.id)) - Affine.of(loop.id)
    return ahead if loop.step > 0 else -ahead


def _distance(relation: Region, loop: LoopText) -> int | None:
    """The distance in iterations, if it is the same for all pairs."""
    low = relation.extreme(_advance(loop), largest=False)
    if low is None or low % abs(loop.step) or low != relation.extreme(_advance(loop), largest=True):
        return None
    return low // abs(loop.step)


def _direction(relation: Region, loop: LoopText, distance: int | None) -> str:
    if distance is not None:
        return "<" if distance > 0 else "=" if distance == 0 else ">"
    ahead = _advance(loop)
    happens = "".join(sign for sign, condition in (("<", less(0, ahead)), ("=", equal(ahead, 0)), (">", less(ahead, 0)))
                      if not (relation & Region.where(condition)).is_empty())
    return {"<=": "<=", "=>": ">=", "<>": "!=", "<=>": "*"}.get(happens, happens)
