"""The question about buffers: does every access that a buffer serves find the value that the program's own cell would have?

While the part of the tree runs that a buffer lives in (one round of the loops around it), the buffer stands for the
cells of a storage.  That is safe, whatever the order of the instances inside, if

* a cell of the program and the cell of the buffer that stands for it determine each other,
* every cell that is read through the buffer was filled, and only such cells are filled as the program itself reads or
  writes in that round, so that nothing is read that the original would not have read,
* every cell that is written through the buffer is put back, and no other,
* no access that the buffer does not serve touches one of these cells meanwhile, one of the two writing, and
* the cells' numbers lie inside the buffer.

All of it is asked on integer sets, of the finished tree, for all sizes at once.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from .affine import Affine, AllOf, AnyOf, Formula, at_most, equal, less
from .model import Access, Nest
from .questions import Flaw
from .sets import Region
from .tree import Buffer, Held, Loop, Node, children, established, moves, occurrences
from .values import dataclass


@dataclass(frozen=True)
class _Use:
    """Where one access, or one move, meets the cells: a region over the loops around the buffer, cells and numbers."""

    region: Region
    access: Access | None = None


def cells_reached(tree: tuple[Node, ...], nest: Nest, context: Region) -> list[Flaw]:
    """What is wrong with the buffers of a tree; an empty list if nothing is.

    ``context``: the parameters' values that count (``Dependences.context``).
    """
    return [flaw for held, around, symbols in _held(tree, (), ()) for flaw in _Scope(held, around, symbols, nest, context).flaws()]


def _held(nodes: tuple[Node, ...], around: tuple[Formula, ...], symbols: tuple[str, ...]) \
        -> Iterator[tuple[Held, tuple[Formula, ...], tuple[str, ...]]]:
    for node in nodes:
        if isinstance(node, Held):
            yield node, around, symbols
        inner = (*symbols, node.symbol) if isinstance(node, Loop) else symbols
        yield from _held(children(node), (*around, *established(node)), inner)


class _Scope:
    """One place of a tree where a buffer lives."""

    def __init__(self, held: Held, around: tuple[Formula, ...], symbols: tuple[str, ...], nest: Nest, context: Region) -> None:
        self._buffer = held.buffer
        self._nest = nest
        self._around = Region.where(*around) & context
        self._names = (*symbols, *(parameter.symbol for parameter in nest.parameters))
        self._cells = tuple(f"cell {at}" for at in range(len(self._buffer.subscripts)))
        self._numbers = tuple(f"number {at}" for at in range(len(self._buffer.shape)))
        own = [one for one in moves(held.body) if one.move.buffer == self._buffer]
        self._filled = Region.union(self._moved(one.conditions) for one in own if not one.move.store)
        self._emptied = Region.union(self._moved(one.conditions) for one in own if one.move.store)
        self._uses = tuple(self._accesses(held))
        self._others = tuple(self._strangers(held))

    def _moved(self, conditions: tuple[Formula, ...]) -> Region:
        ties = [equal(Affine.of(cell), form) for cell, form in zip(self._cells, self._buffer.subscripts, strict=True)]
        return self._seen(conditions, ties, self._buffer.index)

    def _seen(self, conditions: Iterable[Formula], ties: Iterable[Formula], index: tuple[Affine, ...]) -> Region:
        numbers = [equal(Affine.of(number), form) for number, form in zip(self._numbers, index, strict=True)]
        region = Region.where(*conditions, *ties, *numbers) & self._around
        return region.only((*self._names, *self._cells, *self._numbers))

    def _accesses(self, held: Held) -> Iterator[_Use]:
        for place in occurrences(held.body):
            instance = dict(place.leaf.instance)
            for access in self._nest.statement(place.leaf.statement).accesses:
                if self._buffer.serves(access.storage, access.subscripts):
                    ties = [equal(Affine.of(cell), form.substitute(instance))
                            for cell, form in zip(self._cells, self._buffer.subscripts, strict=True)]
                    yield _Use(self._seen(place.conditions, ties, self._buffer.index), access)

    def _strangers(self, held: Held) -> Iterator[_Use]:
        """Accesses of the same storage that the buffer does not serve, by the program itself or by a buffer inside."""
        for place in occurrences(held.body):
            instance = dict(place.leaf.instance)
            for access in self._nest.statement(place.leaf.statement).accesses:
                if access.storage == self._buffer.storage and not self._buffer.serves(access.storage, access.subscripts):
                    ties = [] if access.subscripts is None else \
                        [equal(Affine.of(cell), form.substitute(instance))
                         for cell, form in zip(self._cells, access.subscripts, strict=True)]
                    region = Region.where(*place.conditions, *ties) & self._around
                    yield _Use(region.only((*self._names, *self._cells)), access)

    def flaws(self) -> Iterator[Flaw]:
        """What is wrong here."""
        used = Region.union(use.region for use in self._uses)
        reads = Region.union(use.region for use in self._uses if use.access is not None and not use.access.write)
        writes = Region.union(use.region for use in self._uses if use.access is not None and use.access.write)
        sure = Region.union(use.region for use in self._uses if use.access is not None and use.access.certain)
        sure_writes = Region.union(use.region for use in self._uses
                                  if use.access is not None and use.access.certain and use.access.write)
        asked = (
            (reads - self._filled, "reads a cell that was not fetched"),
            (self._filled - sure, "is filled from a cell that the loops might not touch"),
            (writes - self._emptied, "does not give back a cell that is written"),
            (self._emptied - sure_writes, "gives back a cell that the loops might not write"),
            (self._outside(used | self._filled | self._emptied), "has no room for a cell"),
            (self._ambiguous(used | self._filled | self._emptied, self._numbers), "has two cells for one of the program"),
            (self._ambiguous(used | self._filled | self._emptied, self._cells), "has one cell for two of the program"),
            (self._disturbed(used, writes), "does not see another access to one of its cells"),
        )
        for region, text in asked:
            point = region.sample()
            if point is not None:
                shown = tuple(sorted((name, value) for name, value in point.items() if "'" not in name))
                yield Flaw(self._nest.statements[0].id, f"the buffer of {self._buffer.storage} {text}", shown)

    def _outside(self, used: Region) -> Region:
        inside = AllOf(tuple(part for number, extent in zip(self._numbers, self._buffer.shape, strict=True)
                             for part in (at_most(0, Affine.of(number)), less(Affine.of(number), extent))))
        return used - Region.where(inside)

    def _ambiguous(self, used: Region, different: tuple[str, ...]) -> Region:
        """Pairs of uses in one round that differ in these names alone."""
        twin = used.renamed({name: name + "'" for name in different})
        differ = AnyOf(tuple(less(Affine.of(a), Affine.of(b)) for name in different
                             for a, b in ((name, name + "'"), (name + "'", name))))
        return used & twin & Region.where(differ)

    def _disturbed(self, used: Region, writes: Region) -> Region:
        """Cells of the buffer that somebody else touches in the same round, one of the two writing."""
        cells, written = (region.only((*self._names, *self._cells)) for region in (used, writes))
        return Region.union((cells if other.access is not None and other.access.write else written) & other.region
                           for other in self._others)
