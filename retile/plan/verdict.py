"""The verdict about a plan: is every dependence still kept, for all sizes?

A plan reverses a pair of dependent instances if the target's moment does not come after the source's.  The pairs of
each edge are exact integer sets, so the plan is legal if and only if no edge has a reversed pair (Bernstein's condition
on the order of conflicting accesses; the question as in Irigoin & Triolet, "Supernode partitioning", 1988).  A reversed
pair is a witness: it is shown at the smallest sizes at which it happens.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator

from ..affine import Affine, AllOf, at_most
from ..dependence import Dependences, Edge
from ..model import (Assumption, AssumptionCode, Instance, Judgement, Nest, Plan, Refusal, Statement,
                     Unproven, Verdict, Violation)
from ..order import Coordinate, first_differences, prime, primed_vector
from ..sets import Region
from ..tree import Guard, Leaf, Loop, Node, children, occurrences
from ..touched import touched
from ..values import dataclass, replace
from .afterwards import lost_iterators
from .alignment import MOST_TRIALS, settled
from .build import build_tree
from .copies import copied, copied_scalars
from .kept import keepable, kept_from
from .reading import hidden_texts, reads_ahead
from .remarks import order_of_updates, same_cells
from .schedule import INSIDE, merged, moments, placed, stays_whole
from .threads import refusals as thread_refusals
from .units import Unit, asked_ahead, moved_conditions, units

# Witnesses are looked for with all sizes and iterators below these bounds, in turn, so that the smallest one is shown.
_WITNESS_BOUNDS = (4, 8, 16, 64, 256, 1024, 1 << 16, 1 << 24, 1 << 40)

# The first words of a statement that declares something: two names, or two with stars between.
_DECLARATION = re.compile(r"[A-Za-z_]\w*(\s+|\s*\*[\s*]*)[A-Za-z_]")


def judge(nest: Nest, dependences: Dependences, plan: Plan) -> Judgement:
    """The verdict about a plan, with its evidence and the assumptions that it rests on; ``plan.places`` get filled in."""
    court = _settled_court(nest, dependences, plan)
    plan = court.plan
    refusals = tuple(court.refusals())
    if refusals:
        return Judgement(Verdict.REFUSED, plan, refusals=refusals)
    edges = court.binding_edges()
    raced = tuple(court.raced())
    violations = (*court.violations(edges), *court.collisions(raced))
    unproven = () if violations else tuple(dict.fromkeys((*court.unproven(edges), *court.undecided(raced))))
    assumptions = tuple(court.needed_assumptions())
    verdict = Verdict.ILLEGAL if violations else Verdict.UNPROVEN if unproven else Verdict.LEGAL
    unfit = tuple(_unfit(nest, dependences, plan)) if verdict is Verdict.LEGAL and plan.buffers else ()
    if unfit:
        return Judgement(Verdict.REFUSED, plan, refusals=unfit)
    return Judgement(verdict, plan, violations, unproven, (), assumptions)


def _unfit(nest: Nest, dependences: Dependences, plan: Plan) -> Iterator[Refusal]:
    """Why buffers of the plan cannot serve: the tree asked, for its flaws."""
    from ..reached import cells_reached

    for flaw in cells_reached(build_tree(nest, plan), nest, dependences.context):
        place = nest.statement(flaw.statement).span
        yield Refusal(place.line, place.column, "buffer", f"{flaw.text}; leave the option out, or put it at another loop")
        return


def is_legal(nest: Nest, dependences: Dependences, plan: Plan, trials: int = MOST_TRIALS) -> bool:
    """The verdict alone, without evidence; ``trials`` limits the search for other places, 0 for none."""
    court = _settled_court(nest, dependences, plan, trials)
    return not any(court.refusals()) and not any(court.unsettled()) and \
        not court.wrong(court.binding_edges()) and not any(court.raced())


def binding_edges(nest: Nest, dependences: Dependences, plan: Plan) -> tuple[Edge, ...]:
    """The edges that the tree of a placed plan must keep: without those on values that are computed again."""
    return _Court(nest, dependences, plan).binding_edges()


def _settled_court(nest: Nest, dependences: Dependences, plan: Plan, trials: int = MOST_TRIALS) -> _Court:
    """The court on a plan as it stands or, where that reverses something, with what would settle it, if found.

    Tried in turn: values computed again (``copies.py``), values kept in arrays (``kept.py``), statements aligned with
    loops that they are not in (``alignment.py``).
    """
    first = _Court(nest, dependences, placed(replace(plan, copied=copied(nest, plan)), nest))
    court = first
    if first.reuses_reversed():
        court = _Court(nest, dependences, replace(first.plan, kept=keepable(nest, first.plan)))
    edges = court.binding_edges()
    wrong = court.wrong(edges)
    if not wrong or not trials or all(set(plan.moved) <= set(statement.loops) for statement in nest.statements):
        return first if wrong else court
    better = settled(court.plan, nest, edges, wrong,
                     lambda trial, some: _Court(nest, dependences, trial).wrong(some), trials)
    return first if better is None else _Court(nest, dependences, better)


@dataclass(frozen=True)
class _Reversed:
    edge: Edge
    pairs: Region
    level: int  # of the time vector, that decides


@dataclass(frozen=True)
class _Run:
    """The moments at which a plan runs a statement."""

    loops: tuple[str, ...]  # whose iterators the time is in
    domain: Region | None  # of their values; None for the statement's own
    time: tuple[Coordinate, ...]
    terms: int  # how many of the plan's terms the time starts with; the text's order decides behind them

    def from_term(self, level: int) -> tuple[Coordinate, ...]:
        """The time without the terms from one on."""
        return self.time[:2 * level] + self.time[2 * self.terms:] if level < self.terms else self.time


class _Court:
    def __init__(self, nest: Nest, dependences: Dependences, plan: Plan) -> None:
        self._nest = nest
        self._dependences = dependences
        self._times: dict[str, tuple[Coordinate, ...]] = {
            statement.id: (*moments(plan, statement.id), *dependences.times[statement.id])
            for statement in nest.statements}
        self.plan = plan
        identity = self.is_identity()
        self._units = () if identity else tuple(unit for unit in units(nest, plan) if unit.guards)
        self._moved = frozenset() if identity else moved_conditions(nest, plan)
        self._run: dict[str, tuple[_Run, ...]] = {}
        self._found: dict[int, _Reversed | None] = {}
        self._copied = copied_scalars(nest, plan)
        # Private scalars whose iterations the plan takes apart: their storage is not theirs alone.
        self._split = {name for name in {edge.storage for edge in dependences.reuse} - self._copied - set(plan.kept)
                       if not stays_whole(plan, nest.storage(name), nest)}

    def wrong(self, edges: Iterable[Edge]) -> tuple[Edge, ...]:
        """Those of the edges that the plan reverses."""
        return tuple(edge for edge in edges if self.reversed(edge) is not None)

    def _reversed_pairs(self, pairs: Region, source: Statement, target: Statement) -> tuple[int, Region] | None:
        """Pairs whose target the plan does not run after the source, with the level that decides; None if there are none."""
        for one in self._runs(source):
            for other in self._runs(target):
                extra = {*one.loops, *map(prime, other.loops)} - {*source.loops, *map(prime, target.loops)}
                both = pairs
                for run, names in ((one, {}), (other, {loop: prime(loop) for loop in other.loops})):
                    both = both if run.domain is None else both & run.domain.renamed(names)
                terms = min(one.terms, other.terms)
                earlier, later = one.from_term(terms), primed_vector(other.from_term(terms), other.loops)
                strict = min(len(later), len(earlier))
                for level, found in first_differences(both, later, earlier):
                    if level < strict:
                        return level, found.without(extra) if extra else found
        return None

    def _runs(self, statement: Statement) -> tuple[_Run, ...]:
        """When the plan runs a statement: once, or a condition between its loops just before all that it guards."""
        if statement.id not in self._run:
            own = () if statement.id in self._moved else \
                (_Run(statement.loops, None, self._times[statement.id], len(self.plan.terms)),)
            span = statement.span.start, statement.span.end
            self._run[statement.id] = (*own, *(self._asked_for(unit, at) for unit in self._units
                                               for at, guard in enumerate(unit.guards) if guard.span == span))
        return self._run[statement.id]

    def _asked_for(self, unit: Unit, number: int) -> _Run:
        """When a condition around a piece is asked for it."""
        moment, original = moments(self.plan, unit.statement), self._dependences.times[unit.statement]
        ahead = asked_ahead(self.plan, unit)
        if number < len(ahead):
            loops, terms = unit.loops[:unit.depths[number]], ahead[number]
            time = (*original[:2 * (len(loops) + number) + 1], -1)  # before all that stands under the condition
            return _Run(loops, None, (*moment[:2 * terms], *time), terms)
        parameters = [parameter.symbol for parameter in self._nest.parameters]
        domain = self._dependences.domains[unit.statement].only([*parameters, *unit.loops])
        start = 2 * (len(unit.loops) + len(unit.guards)) + 1  # the piece's place in its list; it starts with the condition
        return _Run(unit.loops, domain, (*moment, *original[:start]), len(self.plan.terms))

    def binding_edges(self) -> tuple[Edge, ...]:
        """The edges that the plan must keep: reuse of private storage only where iterations do not stay whole, and the
        order of updates ``x = x op e`` only where another order could change bits that the user has not given away."""
        anyhow = dict(self.plan.options).get("reassociate") == "yes"
        edges = tuple(edge for edge in self._dependences.edges if edge.storage not in self._copied
                      and not (edge.free or (edge.update and anyhow)))
        return (*edges, *(edge for edge in self._dependences.reuse if edge.storage in self._split))

    def refusals(self) -> Iterator[Refusal]:
        """What the plan asks for that cannot be written down in C without changing the user's text."""
        if self.is_identity():
            return
        yield from self._never_run()
        yield from self._shared_iterators()
        yield from self._skipped_loops(self._nest.tree)
        yield from reads_ahead(self._nest, self.plan)
        for loop in lost_iterators(self._nest):
            yield Refusal(loop.span.line, loop.span.column, "iterator-after",
                          f"'{loop.iterator}' is used after the nest, and a condition decides whether its loop runs; declare "
                          "it in the 'for', or set it after the nest yourself")
        yield from self._held_beyond_chunks()
        yield from thread_refusals(self._nest, self.plan)
        yield from self._split_declarations()

    def _held_beyond_chunks(self) -> Iterator[Refusal]:
        """Scalars to hold of which nobody knows how many values wait."""
        for name, level in self.plan.inner:
            if name in self.plan.kept and kept_from(self._nest, self.plan, self._nest.storage(name), level) is None:
                first = self._nest.statements[0]
                yield Refusal(first.line, first.span.column, "buffer", f"how many values of '{name}' it has to hold is not "
                              "known; put chunks of the loops that it is private to further out in the plan")

    def _split_declarations(self) -> Iterator[Refusal]:
        """Variables that are declared with a value in a list of statements that not all of their uses get into."""
        for storage in self._nest.storages:
            if storage.scope != "block" or storage.name in (*self._copied, *self.plan.kept):
                continue
            users = [s for s in self._nest.statements if any(a.storage == storage.name for a in s.accesses)]
            declared = next((s for s in users if _DECLARATION.match(s.text)), None)
            reversed_anyway = storage.name in self._split and self._reverses_reuse(storage.name)
            if declared is not None and not reversed_anyway and not all(self._within_reach(declared, user) for user in users):
                yield Refusal(declared.line, declared.span.column, "declaration-split",
                              f"'{storage.name}' is declared in a block that the plan takes apart; declare it before the nest")

    def _within_reach(self, declared: Statement, user: Statement) -> bool:
        """True if a statement gets into the list in which a declaration stands, or further in."""
        one, other = (self._split_of(statement) for statement in (declared, user))
        same = next((at for at, (a, b) in enumerate(zip(one, other, strict=True)) if a != b), len(one))
        aligned = any(alignment.statement == declared.id for alignment in self.plan.aligned)
        return declared is user or (INSIDE not in one[same:] and not aligned)

    def _never_run(self) -> Iterator[Refusal]:
        """Statements for which no bounds can be written: no sizes at which the nest is defined let them run."""
        for place in occurrences(self._nest.tree):
            statement = self._nest.statement(place.leaf.statement)
            loops = Region.where(*(loop.constraints() for loop in place.loops))
            if (loops & self._dependences.context).is_empty():
                yield Refusal(statement.line, statement.span.column, "never-runs",
                              "no sizes for which all subscripts stay inside their arrays let this line run; "
                              "look at the bounds around it")

    def _shared_iterators(self) -> Iterator[Refusal]:
        """Loops that use one variable, and that the plan puts one into the other."""
        for statement in self._nest.statements:
            seen: dict[str, str] = {}
            for term, place in zip(self.plan.terms, self.plan.places_of(statement.id), strict=True):
                if term.chunk is not None or place.position != INSIDE:
                    continue
                other = seen.setdefault(self._nest.loop(term.loop).iterator, term.loop)
                if other not in (term.loop, merged(self.plan, self._nest, statement.id).get(term.loop)):
                    yield Refusal(statement.line, statement.span.column, "shared-iterator",
                                  f"the plan runs this line inside the loops {other} and {term.loop}, which use one variable; "
                                  "give one of them a variable of its own")
                    return

    def _skipped_loops(self, nodes: tuple[Node, ...], skipped: bool = False) -> Iterator[Refusal]:
        """Loops of the plan that a `continue` skips: what it skips has no text of its own that could move."""
        for node in nodes if not self.is_identity() else ():
            if isinstance(node, Loop) and skipped and node.of in self.plan.moved:
                span = self._nest.loop(node.of).span
                yield Refusal(span.line, span.column, "continue",
                              f"a `continue` before it decides whether the loop over {node.of} runs; put the loop into an `if` "
                              "instead, or leave it out of the plan")
            elif not isinstance(node, Leaf):
                yield from self._skipped_loops(children(node), skipped or isinstance(node, Guard) and node.jump)

    def _split_of(self, statement: Statement) -> tuple[int, ...]:
        return tuple(place.position for place in self.plan.places_of(statement.id))

    def reuses_reversed(self) -> bool:
        """True if the plan takes private scalars apart so that one value would overwrite another."""
        return any(self._reverses_reuse(name) for name in self._split)

    def _reverses_reuse(self, name: str) -> bool:
        return any(self.reversed(edge) is not None for edge in self._dependences.reuse if edge.storage == name)

    def reversed(self, edge: Edge) -> _Reversed | None:
        """The edge with those of its pairs that the plan reverses; None if it keeps all of them."""
        if id(edge) not in self._found:
            ends = self._nest.statement(edge.source), self._nest.statement(edge.target)
            found = self._reversed_pairs(edge.relation, *ends)
            self._found[id(edge)] = None if found is None else _Reversed(edge, found[1], found[0])
        return self._found[id(edge)]

    def violations(self, edges: tuple[Edge, ...]) -> Iterator[Violation]:
        """One witness per edge with a reversed pair that surely shares a cell."""
        for edge in edges:
            found = self.reversed(edge) if edge.exact else None
            if found is not None and self._separable(found.level):
                yield self._witness(found)

    def raced(self) -> Iterator[_Reversed]:
        """The edges between iterations that threads share, in either direction, with their pairs."""
        if self.plan.threaded is None:
            return
        level = 2 * self.plan.threaded + 1
        for edge in self._dependences.edges:
            if edge.storage in self._copied:
                continue
            for one in self._runs(self._nest.statement(edge.source)):
                for other in self._runs(self._nest.statement(edge.target)):
                    later = primed_vector(other.time, other.loops)
                    found = [pairs for earlier, after in ((one.time, later), (later, one.time))
                             for at, pairs in first_differences(edge.relation, earlier, after) if at == level]
                    if found:
                        yield _Reversed(edge, found[0], level)

    def collisions(self, raced: tuple[_Reversed, ...]) -> Iterator[Violation]:
        """One witness per edge between iterations that threads share."""
        seen: set[int] = set()
        for found in raced:
            if found.edge.exact and id(found.edge) not in seen:
                seen.add(id(found.edge))
                yield self._witness(found)

    def undecided(self, raced: tuple[_Reversed, ...]) -> Iterator[Unproven]:
        """Pairs of iterations that threads share and that may touch one cell."""
        for found in raced:
            if not found.edge.exact:
                yield Unproven(found.edge.source, found.edge.target, f"a subscript of {found.edge.storage} is not affine: two "
                               "threads may touch one cell at once", f"that different iterations touch different cells of "
                               f"{found.edge.storage}")

    def unproven(self, edges: tuple[Edge, ...]) -> Iterator[Unproven]:
        """Reversed pairs of accesses that may touch any cell, and assumptions that nobody can test."""
        for edge in edges:
            found = self.reversed(edge)
            if found is None:
                continue
            if not self._separable(found.level):
                yield Unproven(edge.source, edge.target, "one constant is the chunk of several loops: whether a pair can "
                               "be reversed depends on how their chunks hang together", "a constant of its own for each loop")
            elif not edge.exact:
                yield Unproven(edge.source, edge.target,
                               f"a subscript of {edge.storage} is not affine: the access may touch any cell",
                               same_cells(edge, self._line(edge.source), self._line(edge.target)))
        for assumption in self.unsettled():
            first = self._nest.statements[0].id
            yield Unproven(first, first, *self._lacking(assumption))

    def unsettled(self) -> Iterator[Assumption]:
        """The assumptions that the plan needs, nobody can test, and the user has not given."""
        reorders: dict[tuple[str, str], bool] = {}
        for assumption in self._nest.assumptions:
            if not assumption.testable and not assumption.given and \
                    (assumption.code is AssumptionCode.OTHER or self._needs(assumption, reorders)):
                yield assumption

    def _lacking(self, assumption: Assumption) -> tuple[str, str]:
        """Why nobody can test an assumption, and what would settle it."""
        names = [name.removesuffix("[]") for name in assumption.storages]
        given = f"if you know it: --distinct {','.join(names)}"
        if assumption.ranges_known:
            return "the code does not state a fact that the verdict needs", assumption.text + (f" ({given})" if names else "")
        unknown = [name for name in names if touched(self._nest, self._nest.storage(name)) is None]
        if not unknown:
            hidden = ", ".join(hidden_texts(self._nest))
            return (f"a test ahead of the nest might read what the original does not: only where a condition on data holds does "
                    f"it read {hidden}", f"{assumption.text} (copy {hidden} to a variable before the nest)")
        return (f"which cells of {' and '.join(unknown)} the nest touches is not known before it runs, so that no test can "
                f"tell whether {' and '.join(names)} overlap",
                f"{assumption.text} (declare the pointers restrict or, {given})")

    def needed_assumptions(self) -> Iterator[Assumption]:
        """The assumptions without which the plan could reverse a pair of accesses, or the loops could run otherwise."""
        reorders: dict[tuple[str, str], bool] = {}
        needed = tuple(assumption for assumption in self._nest.assumptions if self._needs(assumption, reorders))
        yield from self._without_implied(needed)

    def _without_implied(self, assumptions: tuple[Assumption, ...]) -> tuple[Assumption, ...]:
        """The assumptions without relations that the others and the facts imply: ``n <= ld + 1`` beside ``n <= ld``."""
        for assumption in assumptions:
            others = tuple(other for other in assumptions if other is not assumption)
            conditions = [other.condition for other in others if other.condition is not None]
            if assumption.condition is not None and not assumption.given and conditions and \
                    Region.where(*self._nest.facts, *conditions).implies(assumption.condition):
                assumptions = others
        return assumptions

    def _needs(self, assumption: Assumption, reorders: dict[tuple[str, str], bool]) -> bool:
        """True if the plan rests on an assumption; row lengths too, since the loops' bounds are built under them."""
        if assumption.code is AssumptionCode.NO_OVERLAP and len(assumption.storages) == 2:
            return self._could_reverse(*assumption.storages, reorders) or self._copy_reads(assumption.storages) or \
                any(buffer.storage in assumption.storages for buffer in self.plan.buffers) or self.plan.threaded is not None
        return not self.is_identity()

    def _copy_reads(self, storages: tuple[str, ...]) -> bool:
        """True if a statement that runs again reads one of the storages: a store to the other must not change it."""
        return any(access.storage in storages for id in self.plan.copied for access in self._nest.statement(id).accesses)

    def is_identity(self) -> bool:
        """True if the plan is the original order, loop for loop, with no storage of its own."""
        return not self.plan.buffers and self.plan.threaded is None and all(term.chunk is None for term in self.plan.terms) and \
            [term.loop for term in self.plan.terms] == \
            [loop.id for loop in self._nest.loops if loop.id in {term.loop for term in self.plan.terms}]

    def _could_reverse(self, one: str, other: str, known: dict[tuple[str, str], bool]) -> bool:
        """True if some accesses to the two, one of them writing, could change order if they met at any cell."""
        near = [s for s in self._nest.statements if any(a.storage in (one, other) for a in s.accesses)]
        for source in near:
            for target in near:
                touched = _touch(source, target, one, other)
                if not touched:
                    continue
                if (source.id, target.id) not in known:
                    known[source.id, target.id] = self._swaps(source, target)
                if known[source.id, target.id]:
                    return True
        return False

    def _swaps(self, source: Statement, target: Statement) -> bool:
        domain = self._dependences.domains[source.id]
        pairs = domain & self._dependences.domains[target.id].renamed({loop: prime(loop) for loop in target.loops})
        if pairs.is_empty():
            return False
        original = self._dependences.times
        later = primed_vector(original[target.id], target.loops)
        strict = min(len(later), len(original[source.id]))
        return any(self._reversed_pairs(found, source, target) is not None
                   for level, found in first_differences(pairs, original[source.id], later) if level < strict)

    def _named_chunks(self, level: int) -> Iterator[tuple[str, bool]]:
        """The constants that are chunks; True if the two instances must share a chunk for this level to decide."""
        for at, term in enumerate(self.plan.terms):
            if isinstance(term.chunk, str):
                yield term.chunk, 2 * at + 1 < level

    def _separable(self, level: int) -> bool:
        """False if one constant would have to keep two instances together in one loop and apart in another."""
        chunks = set(self._named_chunks(level))
        return len({name for name, _ in chunks}) == len(chunks) or \
            2 * len(self.plan.terms) <= level

    def _chunk_sizes(self, level: int, point: dict[str, int]) -> dict[str, int]:
        """For each constant a chunk with which the pair is reversed: all iterations together, or each one alone."""
        reach = 1 + max(abs(value) for value in point.values())
        return {name: 2 * reach if together else 1 for name, together in self._named_chunks(level)}

    def _line(self, statement: str) -> int:
        return self._nest.statement(statement).line

    def _witness(self, found: _Reversed) -> Violation:
        source, target = (self._nest.statement(id) for id in (found.edge.source, found.edge.target))
        parameters = [p.symbol for p in self._nest.parameters]
        order = (*parameters, *source.loops, *map(prime, target.loops))
        point = _smallest(found.pairs, order)
        outer = tuple((p.symbol, point[p.symbol]) for p in self._nest.parameters if p.kind == "outer iterator")
        access = next(a for a in source.accesses if a.storage == found.edge.storage
                      and a.write == (found.edge.kind != "anti"))
        cell = None if access.subscripts is None else tuple(s.evaluate(point) for s in access.subscripts)
        sizes = tuple((p.symbol, point[p.symbol]) for p in self._nest.parameters if p.kind != "outer iterator")
        sizes += tuple(self._chunk_sizes(found.level, point).items())
        return Violation(found.edge.kind, found.edge.storage, sizes,
                         _instance(source, outer, point, prime_names=False),
                         _instance(target, outer, point, prime_names=True), cell,
                         order_of_updates(found.edge.update, self._nest.storage(found.edge.storage)))


def _touch(source: Statement, target: Statement, one: str, other: str) -> bool:
    return any(a.storage == x and b.storage == y and (a.write or b.write)
               for x, y in {(one, other), (other, one)} for a in source.accesses for b in target.accesses)


def _instance(statement: Statement, outer: tuple[tuple[str, int], ...], point: dict[str, int],
              prime_names: bool) -> Instance:
    own = tuple((loop, point[prime(loop) if prime_names else loop]) for loop in statement.loops)
    return Instance(statement.id, statement.line, (*outer, *own))


def _smallest(pairs: Region, order: tuple[str, ...]) -> dict[str, int]:
    """A point of the region with small values, non-negative if possible, sizes smallest first."""
    for bound in _WITNESS_BOUNDS:
        for low in (0, -bound):
            box = Region.where(AllOf(tuple(
                part for name in order for part in (at_most(low, Affine.of(name)), at_most(Affine.of(name), bound)))))
            point = (pairs & box).first(order)
            if point is not None:
                return point
    sample = pairs.sample(order)
    if sample is None:
        raise ValueError("no pair to show")
    return sample

