"""The two exact questions that every finished tree must pass, whatever steps made it.

1. The same instances: each statement's instances in the tree are the original's, each exactly once, for all sizes.
2. The same order where it matters: the source of every dependence runs strictly before its target.

Both are answered on integer sets.  A tree that passes computes what the original computes, since it runs the same
instances and keeps every pair of conflicting accesses in order (Bernstein, "Analysis of programs for parallel
processing", 1966).  Statements that only read what the nest never writes (conditions that a transformation evaluates more
often) may be named as ``repeatable``: they are left out of the first question.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping

from .affine import Affine, AnyOf, Formula, at_most, equal, less
from .dependence import Dependences, Edge
from .model import Nest, Statement
from .order import Coordinate, first_differences, same_cut, substituted
from .sets import Region
from .tree import Node, Occurrence, asked, loops_of, occurrences
from .values import dataclass


@dataclass(frozen=True)
class Flaw:
    """Why a tree is not the nest: never the user's fault."""

    statement: str
    text: str
    example: tuple[tuple[str, int], ...] = ()

    def __str__(self) -> str:
        at = ", ".join(f"{name} = {value}" for name, value in self.example)
        return f"statement {self.statement}: {self.text}" + (f" (for example {at})" if at else "")


class _Runs:
    """One leaf of a tree: its executions as a region, under names that no other leaf uses."""

    def __init__(self, occurrence: Occurrence, context: Region, number: int) -> None:
        names = {loop.symbol: f"{loop.symbol}~{number}" for loop in occurrence.loops}
        self._own = {name: Affine.of(own) for name, own in names.items()}
        self.symbols = tuple(names.values())
        self.instance = tuple((name, form.substitute(self._own)) for name, form in occurrence.leaf.instance)
        self.region = (Region.where(*occurrence.conditions) & context).renamed(names)
        self.time: tuple[Coordinate, ...] = tuple(self._coordinate(moment) for moment in occurrence.time)
        shared = {loop.symbol for loop in occurrence.loops if loop.unordered}
        self.unordered = tuple(level for level, moment in enumerate(occurrence.time)
                               if not isinstance(moment, int) and moment[0] in shared)
        # Per chunk loop of unknown size: its symbol in the tree, its value here, and the value here of what it cuts.
        standing = {name: form.substitute(self._own) for name, form in occurrence.leaf.aligned}
        self.cuts = {loop.symbol: (self._own[loop.symbol], loop.cut.substitute(standing | self._own))
                     for loop in occurrence.loops if loop.named is not None and loop.cut is not None}

    def _coordinate(self, moment: int | tuple[str, int]) -> Coordinate:
        if isinstance(moment, int):
            return moment
        return self._own[moment[0]] * moment[1] if moment[1] else 0

    def as_instances(self, suffix: str = "") -> Region:
        """Executions tied to the instances that they stand for, under the original's names with a suffix."""
        return self.region & Region.where(*(equal(Affine.of(name + suffix), form) for name, form in self.instance))


def _given(one: _Runs, other: _Runs, values: Mapping[str, Affine]) -> list[Formula]:
    """What is given of the chunks of unknown size around both; ``values`` renames the names of the other."""
    return [same_cut(value, run, other_value.substitute(values), other_run.substitute(values))
            for symbol, (run, value) in one.cuts.items() if symbol in other.cuts
            for other_run, other_value in (other.cuts[symbol],)]


def _runs(tree: tuple[Node, ...], context: Region) -> dict[str, list[_Runs]]:
    runs: dict[str, list[_Runs]] = defaultdict(list)
    for number, occurrence in enumerate(occurrences(tree)):
        runs[occurrence.leaf.statement].append(_Runs(occurrence, context, number))
    return runs


def same_instances(tree: tuple[Node, ...], nest: Nest, context: Region, repeatable: Iterable[str] = ()) -> list[Flaw]:
    """Question 1: what is missing, too much or repeated; an empty list if nothing is.

    ``context``: the parameters' values that count (``Dependences.context``).
    """
    context = context & _named_sizes(tree)
    runs = _runs(tree, context)
    flaws: list[Flaw] = []
    for statement in nest.statements:
        if statement.id in set(repeatable):
            continue
        wanted = Region.where(statement.domain) & context
        given = [run.as_instances().without(run.symbols) for run in runs[statement.id]]
        flaws += _difference(statement.id, wanted, Region.union(given))
        flaws += _repeated(statement.id, runs[statement.id], given)
    return flaws


def _named_sizes(tree: tuple[Node, ...]) -> Region:
    """A chunk has at least one iteration, whatever constant says how many."""
    names = sorted({loop.named for loop in loops_of(tree) if loop.named is not None})
    return Region.where(*(at_most(1, Affine.of(name)) for name in names))


def _difference(statement: str, wanted: Region, given: Region) -> Iterator[Flaw]:
    for region, text in ((wanted - given, "an instance is missing"), (given - wanted, "an instance is too much")):
        point = region.sample()
        if point is not None:
            yield Flaw(statement, text, tuple(sorted(point.items())))


def _repeated(statement: str, runs: list[_Runs], given: list[Region]) -> Iterator[Flaw]:
    for at, run in enumerate(runs):
        for other, elsewhere in zip(runs[:at], given, strict=False):
            if not (given[at] & elsewhere).is_empty() and not _never_both(run, other):
                yield Flaw(statement, "an instance runs in two places")
        twin = run.region.renamed({name: name + "^" for name in run.symbols})
        marked = {name: Affine.of(name + "^") for name in run.symbols}
        same: list[Formula] = [equal(form, form.substitute(marked)) for _, form in run.instance]
        same += _given(run, run, marked)
        differ = AnyOf(tuple(less(Affine.of(x), Affine.of(y)) for name in run.symbols
                             for x, y in ((name, name + "^"), (name + "^", name))))
        if not (run.region & twin & Region.where(*same, differ)).is_empty():
            yield Flaw(statement, "an instance runs twice in one place")


def _never_both(one: _Runs, other: _Runs) -> bool:
    """True if the cuts around both, whatever they are, let no instance run in both places."""
    cuts = _given(one, other, {})
    return bool(cuts) and (one.as_instances() & other.as_instances() & Region.where(*cuts)).is_empty()


def order_kept(tree: tuple[Node, ...], dependences: Dependences, edges: Iterable[Edge] | None = None,
               conditions: Iterable[Statement] = ()) -> list[Flaw]:
    """Question 2: the dependences whose source does not run strictly first; an empty list if all are kept.

    ``edges``: those that the tree must keep; all value-carrying ones of ``dependences`` if left out.  ``conditions``: those
    that the tree asks anew at each of its guards, perhaps more often than the original does.
    """
    runs = _runs(tree, dependences.context)
    moved = {(one.span.start, one.span.end): (one.id, one.loops) for one in conditions}
    for number, occurrence in enumerate(asked(tree, moved)):
        runs[occurrence.leaf.statement].append(_Runs(occurrence, dependences.context, -1 - number))
    flaws: list[Flaw] = []
    for edge in dependences.edges if edges is None else edges:
        for source in runs[edge.source]:
            for target in runs[edge.target]:
                flaws += _disorder(edge, source, target)
    return flaws


def _disorder(edge: Edge, source: _Runs, target: _Runs) -> Iterator[Flaw]:
    # A leaf that is both ends runs at two moments: its second set of names carries a mark.
    names = {name: name + "^" for name in target.symbols} if source is target else {}
    pairs = edge.relation & source.as_instances() & target.as_instances("'").renamed(names)
    marked = {name: Affine.of(other) for name, other in names.items()}
    given = _given(source, target, marked)
    pairs = pairs & Region.where(*given) if given else pairs
    if pairs.is_empty():
        return
    later = substituted(target.time, marked)
    for _, wrong in first_differences(pairs, later, source.time):
        point = wrong.sample() or {}
        shown = tuple(sorted((name, value) for name, value in point.items() if "~" not in name))
        yield Flaw(edge.source, f"its {edge.kind} dependence to {edge.target} on {edge.storage} is reversed", shown)
        return


def free_of_races(tree: tuple[Node, ...], dependences: Dependences, private: Iterable[str] = ()) -> list[Flaw]:
    """Question 2 for threads: dependences between iterations of one unordered loop; an empty list if there are none.

    All edges count, also those on values whose order does not matter: two updates at once lose one.  ``private``: storages
    of which every iteration has its own.
    """
    if not any(loop.unordered for loop in loops_of(tree)):
        return []
    runs = _runs(tree, dependences.context)
    flaws: list[Flaw] = []
    for edge in (edge for edge in dependences.edges if edge.storage not in set(private)):
        for source in runs[edge.source]:
            for target in runs[edge.target]:
                flaws += _race(edge, source, target)
    return flaws


def _race(edge: Edge, source: _Runs, target: _Runs) -> Iterator[Flaw]:
    levels = set(source.unordered) & set(target.unordered)
    if not levels:
        return
    names = {name: name + "^" for name in target.symbols} if source is target else {}
    pairs = edge.relation & source.as_instances() & target.as_instances("'").renamed(names)
    marked = {name: Affine.of(other) for name, other in names.items()}
    later = substituted(target.time, marked)
    for level, found in (*first_differences(pairs, source.time, later), *first_differences(pairs, later, source.time)):
        if level in levels:
            point = found.sample() or {}
            shown = tuple(sorted((name, value) for name, value in point.items() if "~" not in name))
            yield Flaw(edge.source, f"threads race: its {edge.kind} dependence to {edge.target} on {edge.storage}", shown)
            return


def values_arrive(tree: tuple[Node, ...], nest: Nest, context: Region, copied: Iterable[str]) -> list[Flaw]:
    """Of statements that run more than once: the readers of their scalar that no copy runs just before.

    A copy serves a reader if it stands earlier in the same iteration of all loops around it, these are all the loops that
    its own instance depends on, and it runs whenever the reader does.
    """
    runs = [(occurrence, _Runs(occurrence, context, 0)) for occurrence in occurrences(tree)]
    flaws: list[Flaw] = []
    for id in copied:
        written = {a.storage for a in nest.statement(id).accesses if a.write}
        copies = [run for run in runs if run[0].leaf.statement == id]
        for reader in runs:
            statement = nest.statement(reader[0].leaf.statement)
            uses = statement.id != id and any(a.storage in written for a in statement.accesses)
            if uses and not any(_serves(copy, reader, nest.statement(id).loops) for copy in copies):
                flaws.append(Flaw(statement.id, f"the value that statement {id} computes does not arrive"))
    return flaws


def _serves(copy: tuple[Occurrence, _Runs], reader: tuple[Occurrence, _Runs], loops: tuple[str, ...]) -> bool:
    (early, copy_runs), (late, reader_runs) = copy, reader
    shared = early.loops == late.loops[:len(early.loops)] and set(loops) <= {loop.symbol for loop in early.loops}
    difference = [at for at, (a, b) in enumerate(zip(early.time, late.time, strict=False)) if a != b]
    if not shared or not difference:
        return False
    a, b = early.time[difference[0]], late.time[difference[0]]
    return isinstance(a, int) and isinstance(b, int) and a < b and \
        reader_runs.region.within(copy_runs.region)
