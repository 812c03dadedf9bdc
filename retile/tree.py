"""The loop tree: what a nest is, before and after a transformation.

A tree is a tuple of nodes that run one after the other.  The nest that the user wrote and the variant that will be
printed are values of this one kind, so that every variant can be judged by the same questions (``questions.py``).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from enum import Enum
from math import prod

from .affine import Affine, AllOf, Bound, Formula, at_least_bound, at_most_bound, equal
from .values import dataclass


class Role(Enum):
    """What a loop does for the source loop it comes from."""

    WHOLE = "whole"      # runs over all of its iterations
    CHUNK = "chunk"      # steps from chunk to chunk
    ELEMENT = "element"  # runs over the iterations of one chunk


@dataclass(frozen=True)
class Loop:
    """All values ``x`` with ``lower <= x <= upper`` and ``x = origin (mod |step|)``, upwards if ``step > 0``.

    The values are those of the C variable; a chunk loop's value is the first one of its chunk on the grid.
    """

    symbol: str  # the iterator in forms; unique on every path of a tree
    lower: Bound  # smallest value, inclusive, in outer symbols and parameters
    upper: Bound  # largest value, inclusive
    step: int  # signed distance between two iterations, in units of the C variable, never 0
    origin: Affine  # any value on the grid of the loop; matters only if |step| > 1
    body: tuple[Node, ...]
    of: str  # id of the source loop (``i`` or ``i@14``)
    role: Role = Role.WHOLE
    level: int = 0  # which of several chunk levels of one source loop, 0 the outermost
    size: int = 1  # iterations of the source loop that one step covers
    # A chunk loop whose size is a constant of the program, not a number: its name.  ``step`` is then that of the source
    # loop; the loop cuts the values of ``cut`` into consecutive runs, which is given, not derived.
    named: str | None = None
    cut: Affine | None = None
    unrolled: bool = False  # one of the copies of a loop that is written out: it has a single value
    unordered: bool = False  # its iterations run in any order, or at once: threads share them

    @property
    def length(self) -> Affine:
        """How far one step moves, in units of the C variable."""
        return Affine.of(self.named) * abs(self.step) if self.named else Affine((), abs(self.step))

    def constraints(self) -> Formula:
        """Where the symbol's value is one of the loop's iterations."""
        value = Affine.of(self.symbol)
        grid = equal((value - self.origin).mod(abs(self.step)), 0)
        return AllOf((at_least_bound(value, self.lower), at_most_bound(value, self.upper), grid))


@dataclass(frozen=True)
class Guard:
    """Runs its body where the condition holds; ``condition`` is None for a test of data, judged as possibly true."""

    condition: Formula | None
    body: tuple[Node, ...]
    span: tuple[int, int] | None = None  # extent of the condition in the user's text, if it is the user's
    partly: bool = False  # the text tests data too, so that it must be tested even where ``condition`` surely holds
    jump: bool = False  # a `continue` decides what it guards: the text of that stands in no branch of an ``if``


@dataclass(frozen=True)
class Leaf:
    """One statement, executed for the instance whose iterators have the given values (in symbols of the tree)."""

    statement: str
    instance: tuple[tuple[str, Affine], ...]
    aligned: tuple[tuple[str, Affine], ...] = ()  # source loops that it is not in, with the values where it stands


@dataclass(frozen=True)
class Verbatim:
    """A piece of the user's text that moves as a whole; ``content`` says what it executes, in the user's order."""

    span: tuple[int, int]
    content: tuple[Node, ...]


@dataclass(frozen=True)
class Kept:
    """Gives a private scalar an array of the variant's own while its body runs, a cell for each value that waits."""

    scalar: str  # name of the storage
    shape: tuple[int, ...]
    body: tuple[Node, ...]
    heap: bool = False  # too large for a local array


@dataclass(frozen=True)
class Copy:
    """Moves a scalar's value into its cell of the ``Kept`` around, or back."""

    scalar: str
    index: tuple[Affine, ...]  # of the cell, in symbols of the tree
    store: bool  # scalar to cell; else cell to scalar
    declares: bool = False  # the scalar is declared here: its own declaration stands in another piece
    # Of the cell of the ``Kept`` further out, where the value moves between the two and not to or from the scalar.
    around: tuple[Affine, ...] | None = None


@dataclass(frozen=True)
class Buffer:
    """Cells of the variant's own in place of those that some accesses of a storage touch while a part of the tree runs."""

    word: str  # ``hold`` or ``pack``
    storage: str
    subscripts: tuple[Affine, ...]  # of the accesses that it serves, in the nest's iterators
    shape: tuple[int, ...]
    index: tuple[Affine, ...]  # which cell serves an access, in symbols of the tree
    level: int  # it lives in the loops of the plan's terms before this one
    terms: tuple[int, ...]  # the plan's terms over which its cells are filled and emptied
    heap: bool  # too large for a local array

    @property
    def cells(self) -> int:
        """How many cells it has."""
        return prod(self.shape)

    def serves(self, storage: str, subscripts: tuple[Affine, ...] | None) -> bool:
        """True if an access with these subscripts goes to the buffer while its part of the tree runs."""
        return storage == self.storage and subscripts == self.subscripts


@dataclass(frozen=True)
class Held:
    """While its body runs, all accesses that a buffer serves go to the buffer's cells."""

    buffer: Buffer
    body: tuple[Node, ...]


@dataclass(frozen=True)
class Move:
    """Copies the cell of the buffer that serves an access at this place from the program's own cell, or back to it."""

    buffer: Buffer
    store: bool  # buffer to the program's cell; else the other way


Node = Loop | Guard | Leaf | Verbatim | Kept | Copy | Held | Move

# One moment's place: list positions and (symbol, direction) pairs in turn, outermost first.
Moment = int | tuple[str, int]


@dataclass(frozen=True)
class Occurrence:
    """A leaf with all that surrounds it in a tree."""

    leaf: Leaf
    loops: tuple[Loop, ...]  # outermost first
    conditions: tuple[Formula, ...]  # loops and guards with known conditions
    time: tuple[Moment, ...]


@dataclass(frozen=True)
class Moved:
    """A move with all that surrounds it in a part of a tree."""

    move: Move
    conditions: tuple[Formula, ...]


def moves(nodes: tuple[Node, ...], conditions: tuple[Formula, ...] = ()) -> Iterator[Moved]:
    """All moves of a part of a tree, in list order, each with the loops and guards around it."""
    for node in nodes:
        if isinstance(node, Move):
            yield Moved(node, conditions)
        else:
            yield from moves(children(node), (*conditions, *established(node)))


def established(node: Node) -> tuple[Formula, ...]:
    """What holds inside a node because of it."""
    if isinstance(node, Loop):
        return (node.constraints(),)
    return (node.condition,) if isinstance(node, Guard) and node.condition is not None else ()


def occurrences(tree: tuple[Node, ...]) -> Iterator[Occurrence]:
    """All leaves of a tree, in list order, each with its loops, conditions and time vector."""
    yield from _walk(tree, (), (), ())


def _walk(nodes: tuple[Node, ...], loops: tuple[Loop, ...], conditions: tuple[Formula, ...],
          time: tuple[Moment, ...]) -> Iterator[Occurrence]:
    for position, node in enumerate(nodes):
        here = (*time, position)
        if isinstance(node, Leaf):
            yield Occurrence(node, loops, conditions, here)
        elif isinstance(node, Loop):
            direction = 1 if node.step > 0 else -1
            yield from _walk(node.body, (*loops, node), (*conditions, node.constraints()),
                             (*here, (node.symbol, direction)))
        elif isinstance(node, Guard):
            known = (node.condition,) if node.condition is not None else ()
            yield from _walk(node.body, loops, (*conditions, *known), (*here, ("", 0)))
        else:
            yield from _walk(children(node), loops, conditions, (*here, ("", 0)))


def asked(tree: tuple[Node, ...], conditions: Mapping[tuple[int, int], tuple[str, tuple[str, ...]]]) -> Iterator[Occurrence]:
    """Where a tree asks conditions of the user's that it moves: just before what they guard, for each instance of that.

    ``conditions``: by extent in the user's text, the statement and the ids of its loops.
    """
    yield from _asked(tree, conditions, (), (), ())


def _asked(nodes: tuple[Node, ...], wanted: Mapping[tuple[int, int], tuple[str, tuple[str, ...]]], loops: tuple[Loop, ...],
           conditions: tuple[Formula, ...], time: tuple[Moment, ...]) -> Iterator[Occurrence]:
    for position, node in enumerate(nodes):
        here = (*time, position)
        if isinstance(node, Loop):
            yield from _asked(node.body, wanted, (*loops, node), (*conditions, node.constraints()),
                              (*here, (node.symbol, 1 if node.step > 0 else -1)))
        elif isinstance(node, Guard):
            if node.span is not None and node.span in wanted:
                statement, own = wanted[node.span]
                instances = {tuple((name, form) for name, form in place.leaf.instance if name in own)
                             for place in occurrences(node.body)}
                for instance in sorted(instances, key=repr):
                    inner = tuple(loop for loop in loops_of(node.body) if any(loop.symbol in form.names() for _, form in instance))
                    around = (*conditions, *(loop.constraints() for loop in inner))
                    yield Occurrence(Leaf(statement, instance), (*loops, *inner), around, (*here, -1))
            known = (node.condition,) if node.condition is not None else ()
            yield from _asked(node.body, wanted, loops, (*conditions, *known), (*here, ("", 0)))
        elif not isinstance(node, Verbatim):
            yield from _asked(children(node), wanted, loops, conditions, (*here, ("", 0)))


def loops_of(nodes: tuple[Node, ...]) -> Iterator[Loop]:
    """All loops of a tree, outer before inner, in list order."""
    for node in nodes:
        if isinstance(node, Loop):
            yield node
        yield from loops_of(children(node))


def children(node: Node) -> tuple[Node, ...]:
    """The nodes inside a node."""
    if isinstance(node, Leaf | Copy | Move):
        return ()
    return node.content if isinstance(node, Verbatim) else node.body
