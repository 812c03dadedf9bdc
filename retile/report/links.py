"""Which dependences a picture of an iteration space shows.

At fixed sizes a dependence is a finite set of pairs of iterations.  Pairs are sorted by their distance.  A distance
that is the sum of two others says little new about the order and is left out, but every kind keeps one.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING

from ..affine import Affine, equal
from ..model import Nest
from ..order import prime
from ..sets import Region
from ..values import dataclass

if TYPE_CHECKING:
    from ..dependence import Dependences, Edge

PANELS_IN_A_ROW = 3  # of three-deep spaces; an arrow between two panels is best seen if they stand side by side
_FEW = 16  # pairs that are drawn one by one
_MOST = {1: 12, 2: 12, 3: 8}  # distances that are drawn, by the number of loops
_SHORT = 48  # distances that sums are looked for with

Values = tuple[int, ...]
_KINDS = ("flow", "anti", "output")


@dataclass(frozen=True)
class Link:
    """Two iterations that depend on each other; where not all pairs are drawn it stands for those of its distance."""

    source: Values
    target: Values
    kinds: tuple[str, ...]
    cells: tuple[str, ...]
    distance: Values  # in iterations, outermost loop first
    reversed: bool  # the plan comes to the target before the source


@dataclass(frozen=True)
class Frame:
    """The iterations that a picture shows."""

    loops: tuple[str, ...]  # outermost first
    steps: Values
    shown: Region
    values: tuple[Values, ...]  # per loop, in its own order
    moments: Mapping[Values, int]  # per point its place in the order of a plan; empty without one

    def reverses(self, source: Values, ahead: Values) -> bool:
        """True if the plan comes to the target first."""
        return bool(self.moments) and self.moments[moved(source, ahead)] < self.moments[source]

    def middle(self, source: Values, ahead: Values) -> tuple[bool, bool, float]:
        """How badly a pair stands for all with its distance; reversed pairs and those in the middle are best."""
        at = [values.index(value) for values, value in zip(self.values, source, strict=True)]
        away = sum(abs(place - (len(values) - 1) / 2) for place, values in zip(at, self.values, strict=True))
        to = self.values[0].index(source[0] + ahead[0])
        parted = len(at) == 3 and at[0] // PANELS_IN_A_ROW != to // PANELS_IN_A_ROW
        return not self.reverses(source, ahead), parted, away


def moved(point: Values, ahead: Values) -> Values:
    """The point that lies that far ahead."""
    return tuple(x + dx for x, dx in zip(point, ahead, strict=True))


def links(nest: Nest, dependences: Dependences, frame: Frame, sizes: Mapping[str, int]) \
        -> tuple[tuple[Link, ...], list[str]]:
    """The dependences to draw between the iterations of a frame, and sentences on those that are not drawn."""
    inner = {s.id for s in nest.statements if s.loops == frame.loops}
    edges = [edge for edge in dependences.edges if edge.source in inner and edge.target in inner]
    found = [_Pairs(edge, frame, sizes) for edge in edges]
    kept = _needed(found)
    notes = [] if len(edges) == len(dependences.edges) else ["Dependences of statements in other loops are not drawn."]
    if any(ahead not in kept.get(pairs.kind, ()) for pairs in found for ahead in pairs.distances):
        notes.append("Distances that are sums of others are left out.")
    shortest = sorted({ahead for distances in kept.values() for ahead in distances}, key=_length)
    most = _MOST[len(frame.loops)]
    if len(shortest) > most:
        notes.append(f"Of {len(shortest)} distances the {most} shortest are drawn.")
    by_distance = {ahead: [pairs for pairs in found if ahead in pairs.distances and ahead in kept[pairs.kind]]
                   for ahead in shortest[:most]}
    sources = {ahead: sorted({point for pairs in some for point in pairs.sources(ahead)})
               for ahead, some in by_distance.items()}
    every = sum(map(len, sources.values())) <= _FEW
    if not sources:
        notes.insert(0, "There is no dependence between these iterations.")
    elif not every:
        notes.insert(0, "One arrow stands for all dependences with its distance.")
    return tuple(_link(frame, source, ahead, by_distance[ahead]) for ahead, points in sources.items()
                 for source in (points if every else [min(points, key=lambda p: frame.middle(p, ahead))])), notes


class _Pairs:
    """The pairs of one edge inside a frame."""

    def __init__(self, edge: Edge, frame: Frame, sizes: Mapping[str, int]) -> None:
        self.kind, self.cell = edge.kind, edge.storage
        self._loops = frame.loops
        names = {loop: prime(loop) for loop in frame.loops}
        ahead = [equal(Affine.of(prime(x)) - Affine.of(x), Affine.of(_ahead(x))) for x in frame.loops]
        self._pairs = edge.relation.at(sizes) & frame.shown & frame.shown.renamed(names) & Region.where(*ahead)
        reach = self._pairs.only([_ahead(x) for x in frame.loops])
        self.distances = {d for d in reach.points([_ahead(x) for x in frame.loops]) if any(d)}

    def sources(self, ahead: Values) -> list[Values]:
        """Where the pairs of one distance start."""
        fixed = {_ahead(loop): value for loop, value in zip(self._loops, ahead, strict=True)}
        return self._pairs.at(fixed).only(self._loops).points(self._loops)


def _ahead(loop: str) -> str:
    return f"~{loop}"


def _needed(found: Iterable[_Pairs]) -> dict[str, set[Values]]:
    """Per kind the distances that are not the sum of two others; those not of its own kind, if none were left else."""
    every: dict[str, set[Values]] = defaultdict(set)
    for pairs in found:
        every[pairs.kind] |= pairs.distances
    together = set().union(*every.values())
    return {kind: {d for d in own if not _is_sum(d, together)} or {d for d in own if not _is_sum(d, own)}
            for kind, own in every.items()}


def _is_sum(whole: Values, distances: set[Values]) -> bool:
    short = sorted(distances, key=_length)[:_SHORT]
    return any(tuple(x - y for x, y in zip(whole, part, strict=True)) in distances for part in short)


def _length(ahead: Values) -> tuple[int, Values]:
    return sum(map(abs, ahead)), ahead


def _link(frame: Frame, source: Values, ahead: Values, among: Iterable[_Pairs]) -> Link:
    among = [pairs for pairs in among if source in pairs.sources(ahead)]
    kinds = {pairs.kind for pairs in among}
    distance = tuple(dx // step if dx % step == 0 else dx for dx, step in zip(ahead, frame.steps, strict=True))
    return Link(source, moved(source, ahead), tuple(kind for kind in _KINDS if kind in kinds),
                tuple(dict.fromkeys(pairs.cell for pairs in among)), distance, frame.reverses(source, ahead))
