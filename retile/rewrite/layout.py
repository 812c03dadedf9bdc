"""Where things stand in the user's nest: headers in their parts, pieces that move, and the comments between them.

Every comment of the nest is either inside a piece of text that moves as a whole, or belongs to a loop: before its
header, behind its header on the same line, or behind its end.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from itertools import takewhile

from ..affine import Affine
from ..model import LoopText, Nest, RetileError
from ..source.lex import SKIPPED, Token, tokenize
from ..source.structure import Malformed, Shape, compound
from ..tree import Guard, Held, Kept, Leaf, Loop, Node, Verbatim, children
from ..values import replace


class InternalError(RetileError):
    """retile contradicts itself: a defect of retile, never of the user's program.  Nothing has been written."""


@dataclass(frozen=True)
class Header:
    """The text of a ``for`` header, cut into its parts."""

    opening: str  # ``for (``, with the user's blanks
    first: str  # ``int i = 0``
    condition: str
    advance: str
    closing: str  # ``)``, with the user's blanks before it

    @property
    def variable(self) -> str:
        """What stands before the ``=`` of the first part: ``int i`` or ``i``."""
        return self.first.partition("=")[0].rstrip()


@dataclass
class Remarks:
    """The extents of the comments that belong to one loop."""

    before: list[tuple[int, int]] = field(default_factory=list)
    behind: list[tuple[int, int]] = field(default_factory=list)  # on the line of the header
    after: list[tuple[int, int]] = field(default_factory=list)  # behind the end of the loop


@dataclass(frozen=True)
class Loose:
    """A declaration without a value that no piece takes along: it goes to the start of a list that holds all of its block."""

    extent: tuple[int, int]
    pieces: frozenset[tuple[int, int] | str]  # spans of the pieces of its block, and the loops whose iterator it declares
    loop: str  # the loop whose body the block is; empty for none


class NestText:
    """The user's text of a nest and its structure."""

    def __init__(self, text: str, nest: Nest, tree: tuple[Node, ...]) -> None:
        self.text = text
        self._nest = nest
        offset = nest.span.start
        shifted = (token._replace(start=token.start + offset, end=token.end + offset)
                   for token in tokenize(text[offset:nest.span.end]))
        self._tokens: tuple[Token, ...] = tuple(shifted)
        self._solid = tuple(token for token in self._tokens if token.kind not in SKIPPED)
        try:
            self._root = compound([token.spelling for token in self._solid], 0)
        except Malformed as error:
            raise InternalError(f"{nest.address}: the text of the nest is not one statement") from error
        self._shapes = {self._start(shape): shape for shape in _shapes(self._root) if shape.kind == "for"}
        self._conditions = {self._solid[shape.marks[1] + 1].start: shape for shape in _shapes(self._root)
                            if shape.kind == "if"}
        named = {node.symbol for node in _nodes(tree) if isinstance(node, Loop)}
        # loops that the plan names and that need not run: another one around has their value
        named |= {name for name, form in instances(tree) if form != Affine.of(name)}
        self._named = {loop.span.start for loop in nest.loops if loop.id in named}
        self.tree = tree = tuple(self._separated(tree))
        guards = {node.span[0] for node in _nodes(tree) if isinstance(node, Guard) and node.span is not None}
        self._guards = guards
        self._spans = {node.span for node in _nodes(tree) if isinstance(node, Verbatim)}
        self._block_names = _block_names(nest)
        # they are declared anew wherever a value is fetched
        self._kept_names = {nest.storage(node.scalar).object for node in _nodes(tree) if isinstance(node, Kept)}
        self._pieces = {span: self._widened(span) for span in self._spans}
        self.loose = tuple(self._loose(self._root))

    # ---------------------------------------------------------------- extents

    def _start(self, shape: Shape) -> int:
        return self._solid[shape.start].start

    def _end(self, shape: Shape) -> int:
        return self._solid[shape.end].end

    def loop_shape(self, loop: LoopText) -> Shape:
        """The shape of a loop of the nest."""
        return self._shapes[loop.span.start]

    def header(self, loop: LoopText) -> Header:
        """A loop's header in its parts."""
        _, opening, first, second, end = self.loop_shape(loop).marks
        init, condition, advance = (self.between(left, right) for left, right in
                                    ((opening, first), (first, second), (second, end)))
        start = self._solid[opening].end
        inner = self.text[start:self._solid[end].start]
        left = " " if inner.startswith(" ") else ""
        right = " " if inner.endswith(" ") and advance else ""
        return Header(self.text[loop.span.start:start] + left, init, condition, advance, right + ")")

    def between(self, before: int, after: int) -> str:
        """The text between two solid tokens, without comments and blanks at the ends."""
        inside = range(before + 1, after)
        if not inside:
            return ""
        return self.text[self._solid[inside[0]].start:self._solid[inside[-1]].end]

    def first_inside(self, loop: LoopText) -> int:
        """Where the first statement of the loop's body starts, behind a brace."""
        body = self.loop_shape(loop).children[0]
        return self._start(body.children[0] if body.kind == "compound" and body.children else body)

    def braced(self, loop: LoopText) -> bool:
        """True if the user put the loop's body in braces."""
        return self.loop_shape(loop).children[0].kind == "compound"

    def piece(self, node: Verbatim) -> tuple[int, int]:
        """The extent of the whole statements that a piece stands for, with the comments that go with them."""
        return self._pieces[node.span]

    def without_comments(self, extent: tuple[int, int]) -> tuple[int, int]:
        """An extent without the comments at its ends."""
        solid = [token for token in self._solid if extent[0] <= token.start < extent[1]]
        return (solid[0].start, solid[-1].end) if solid else extent

    def statement_count(self, node: Verbatim) -> int:
        """How many statements a piece has; a comment before the first one counts as one, so that braces show it."""
        start, end = self.piece(node)
        siblings, _, _ = self._siblings(node.span)
        inside = [shape for shape in siblings if start <= self._start(shape) < end]
        return len(inside) + (self._start(inside[0]) > start)

    def skips(self, node: Verbatim) -> bool:
        """True if a piece has a ``continue`` of a loop that stands around it."""
        start, end = self.piece(node)
        return any(start <= place < end and owner < start for place, owner in self._continues(self._root, -1))

    def _continues(self, shape: Shape, owner: int) -> Iterator[tuple[int, int]]:
        """Where each ``continue`` stands, and where the loop that it belongs to starts."""
        if shape.kind == "simple" and self._solid[shape.start].text == "continue":
            yield self._start(shape), owner
        owner = self._start(shape) if shape.kind in ("for", "while", "do") else owner
        for child in shape.children:
            yield from self._continues(child, owner)

    def _widened(self, span: tuple[int, int]) -> tuple[int, int]:
        siblings, opening, closing = self._siblings(span)
        inside = [shape for shape in siblings if self._end(shape) > span[0] and self._start(shape) < span[1]]
        if not inside:
            raise InternalError(f"{self._nest.address}: a piece of the nest is not made of whole statements")
        first, last = siblings.index(inside[0]), siblings.index(inside[-1])
        # statements that no piece names (declarations, empty ones) go with the piece behind them, or else before them
        own = self._start(inside[0]), self._end(inside[-1])
        while first > 0 and not self._taken(siblings[first - 1]) and self._goes_along(siblings[first - 1], siblings, own):
            first -= 1
        if not self._followed(siblings, last + 1):
            free = siblings[last + 1:last + 1 + self._free(siblings, last + 1)]
            last += len(list(takewhile(lambda shape: self._goes_along(shape, siblings, own), free)))
        start, end = self._start(siblings[first]), self._end(siblings[last])
        if opening is not None and closing is not None:
            before = self._end(siblings[first - 1]) if first else self._solid[opening].end
            after = self._start(siblings[last + 1]) if last + 1 < len(siblings) else self._solid[closing].start
            start, end = self._with_comments(start, end, before, after, last + 1 == len(siblings))
        return start, end

    def _goes_along(self, shape: Shape, siblings: tuple[Shape, ...], piece: tuple[int, int]) -> bool:
        """True if only a piece of the block uses what a statement declares."""
        names = {token.text for token in self._solid[shape.start:shape.end + 1]} & self._block_names
        uses = [token for other in siblings if other is not shape for token in self._solid[other.start:other.end + 1]
                if token.text in names]
        inside = {token.text for token in uses if piece[0] <= token.start < piece[1]}
        return all(piece[0] <= token.start < piece[1] or token.text in self._kept_names & inside for token in uses)

    def _loose(self, shape: Shape, loop: str = "") -> Iterator[Loose]:
        """The declarations, of a statement that is taken apart, that no piece takes along."""
        if shape.kind == "for":
            loop = next(loop.id for loop in self._nest.loops if loop.span.start == self._start(shape))
        if shape.kind == "compound":
            pieces = frozenset(span for span in self._spans if self._covers(shape, span))
            ends = [self._solid[shape.start].end, *map(self._end, shape.children)]
            starts = [*map(self._start, shape.children), self._solid[shape.end].start]
            for at, child in enumerate(shape.children):
                if child.kind == "simple" and self._end(child) - self._start(child) > 1 and not self._is_covered(child):
                    extent = self._with_comments(starts[at], ends[at + 1], ends[at], starts[at + 1], False)
                    yield Loose(extent, pieces | self._run_with(child), loop)
        for child in shape.children:
            if self._holds_named(child):
                yield from self._loose(child, loop)

    def _run_with(self, declaration: Shape) -> frozenset[str]:
        """The loops of the plan that count with a variable of a declaration."""
        names = {token.text for token in self._solid[declaration.start:declaration.end + 1]}
        return frozenset(loop.id for loop in self._nest.loops if loop.iterator in names and not loop.declared_in_for
                         and loop.span.start in self._named)

    def _is_covered(self, shape: Shape) -> bool:
        return any(start <= self._start(shape) < end for start, end in self._pieces.values())

    def _taken(self, shape: Shape) -> bool:
        """True if a loop of the plan or a piece of text stands in a statement."""
        return self._holds_named(shape) or any(self._start(shape) <= start < self._end(shape) for start, _ in self._spans)

    def _free(self, siblings: tuple[Shape, ...], at: int) -> int:
        """How many statements from a place on belong to no piece."""
        taken = [number for number in range(at, len(siblings)) if self._taken(siblings[number])]
        return (taken[0] if taken else len(siblings)) - at

    def _followed(self, siblings: tuple[Shape, ...], at: int) -> bool:
        """True if the next statement that is taken is a piece, which takes the free ones before it along."""
        at += self._free(siblings, at)
        return at < len(siblings) and not self._holds_named(siblings[at])

    # ---------------------------------------------------------------- conditions

    def _separated(self, nodes: Iterable[Node]) -> Iterator[Node]:
        """The nodes with pieces cut where they hold one branch of an ``if`` in whose other branch a named loop stands.

        Such an ``if`` cannot move as text: its branches go different ways, each under the condition.
        """
        for node in nodes:
            if isinstance(node, Verbatim):
                yield from self._cut(node)
            elif isinstance(node, Loop | Guard | Kept | Held):
                yield replace(node, body=tuple(self._separated(node.body)))
            else:
                yield node

    def _cut(self, piece: Verbatim) -> Iterator[Node]:
        apart = [node for node in piece.content if isinstance(node, Guard) and self._is_taken_apart(node)]
        if not apart:
            yield piece
            return
        run: list[Node] = []
        for node in (*piece.content, None):
            if node is not None and node not in apart:
                run.append(node)
                continue
            spans = {guard.span for guard in apart}
            run = [one for one in run if not (isinstance(one, Leaf) and self._statement_span(one) in spans)]
            if run:
                yield Verbatim(self._extent(run), tuple(run))
                run = []
            if isinstance(node, Guard):
                inner = Verbatim(self._extent(node.body), node.body)
                yield replace(node, body=tuple(self._separated((inner,))))

    def _is_taken_apart(self, guard: Guard) -> bool:
        shape = self._conditions.get(guard.span[0]) if guard.span is not None else None
        return shape is not None and self._holds_named(shape)

    def _statement_span(self, leaf: Leaf) -> tuple[int, int]:
        span = self._nest.statement(leaf.statement).span
        return span.start, span.end

    def _extent(self, nodes: Iterable[Node]) -> tuple[int, int]:
        """From the first to the last character of the statements in some nodes."""
        spans = list(self._spans_in(nodes))
        return min(start for start, _ in spans), max(end for _, end in spans)

    def _spans_in(self, nodes: Iterable[Node]) -> Iterator[tuple[int, int]]:
        for node in nodes:
            if isinstance(node, Leaf):
                yield self._statement_span(node)
            elif isinstance(node, Loop):
                span = self._nest.loop(node.of).span
                yield span.start, span.end
            else:
                if isinstance(node, Guard) and node.span is not None:
                    yield node.span
                yield from self._spans_in(children(node))

    def in_false_branch(self, guard: Guard) -> bool:
        """True if what a condition of the user's guards stands behind its ``else``."""
        shape = self._conditions.get(guard.span[0]) if guard.span is not None else None
        if shape is None:
            raise InternalError(f"{self._nest.address}: a condition is not that of an if")
        place = min(self._places(guard.body))
        return len(shape.children) == 2 and place >= self._start(shape.children[1])

    def _places(self, nodes: Iterable[Node]) -> Iterator[int]:
        """Where the text of some nodes of the printed tree stands."""
        for node in nodes:
            if isinstance(node, Verbatim):
                yield node.span[0]
            elif not isinstance(node, Leaf):
                yield from self._places(children(node))

    # ---------------------------------------------------------------- siblings

    def _siblings(self, span: tuple[int, int]) -> tuple[tuple[Shape, ...], int | None, int | None]:
        """The statements of the innermost block of the nest that moves and holds the span, with its braces."""
        shape = self._root
        while True:
            if shape.kind == "compound":
                inner = next((child for child in shape.children if self._covers(child, span)
                              and self._holds_named(child)), None)
                if inner is None:
                    return shape.children, shape.start, shape.end
            elif shape.kind in ("for", "if") and self._moves(shape):
                inner = next((child for child in shape.children if self._covers(child, span)), None)
                if inner is None:
                    return (shape,), None, None
            else:
                return (shape,), None, None
            shape = inner

    def _covers(self, shape: Shape, span: tuple[int, int]) -> bool:
        return self._start(shape) <= span[0] and span[1] <= self._end(shape)

    def _moves(self, shape: Shape) -> bool:
        if shape.kind == "for":
            return self._start(shape) in self._named
        return self._solid[shape.marks[1] + 1].start in self._guards or self._holds_named(shape)

    def _holds_named(self, shape: Shape) -> bool:
        return any(self._start(inner) in self._named for inner in _shapes(shape) if inner.kind == "for")

    def _with_comments(self, start: int, end: int, before: int, after: int, at_end: bool) -> tuple[int, int]:
        """A piece with the comments before it, but not those on the line of the brace, and those behind it."""
        for token in reversed(self._comments(before, start)):
            if "\n" in self.text[before:token.start]:
                start = token.start
        for token in self._comments(end, after):
            if at_end or "\n" not in self.text[end:token.start]:
                end = token.end
        return start, end

    # ---------------------------------------------------------------- comments

    def _comments(self, start: int, end: int) -> list[Token]:
        return [token for token in self._tokens if token.kind == "comment" and start <= token.start < end]

    def remarks(self, kept_headers: Iterable[str]) -> dict[str, Remarks]:
        """The comments outside all pieces, by the id of the loop that they belong to.

        ``kept_headers``: ids of the loops whose headers are printed with the comments in them.
        """
        kept = [(loop.header.start, loop.header.end) for loop in self._nest.loops if loop.id in set(kept_headers)]
        covered = [*self._pieces.values(), *(loose.extent for loose in self.loose), *kept]
        found: dict[str, Remarks] = defaultdict(Remarks)
        for token in self._tokens:
            if token.kind in ("comment", "directive") and not any(a <= token.start < b for a, b in covered):
                if token.kind == "directive":
                    raise InternalError(f"{self._nest.address}: a directive stands between the loops")
                self._assign(token, found)
        return found

    def _assign(self, token: Token, found: dict[str, Remarks]) -> None:
        extent = (token.start, token.end)
        loops = [loop for loop in self._nest.loops if loop.span.start in self._named]
        ended = [loop for loop in loops if loop.span.end <= token.start]
        holding = [loop for loop in loops if loop.span.start <= token.start < loop.span.end]
        owner = holding[-1] if holding else loops[0]
        following = next((loop for loop in loops if loop.span.start >= token.start), None)
        last = max(ended, key=lambda loop: loop.span.end, default=None)
        if last is not None and "\n" not in self.text[last.span.end:token.start]:
            found[last.id].after.append(extent)
        elif owner.header.end <= token.start and "\n" not in self.text[owner.header.end:token.start] \
                or token.start < owner.header.end:
            found[owner.id].behind.append(extent)
        elif following is not None and following.span.end <= owner.span.end:
            found[following.id].before.append(extent)
        elif last is not None and last.span.start >= owner.span.start:
            found[last.id].after.append(extent)
        else:
            found[owner.id].behind.append(extent)

    # ---------------------------------------------------------------- moving

    def indentation(self, offset: int) -> str:
        """The blanks at the start of the line of an offset."""
        line = self.text[self.text.rfind("\n", 0, offset) + 1:offset]
        return line[:len(line) - len(line.lstrip(" \t"))]

    def moved(self, extent: tuple[int, int], indent: str, changes: Iterable[tuple[int, int, str]] = ()) -> str:
        """A piece of text with its lines moved to another indentation, its first line without any.

        Lines inside string literals and directives stay where they are; a comment moves as a whole or not at all.
        ``changes``: what stands in place of ``text[start:end]``, none of them across lines.
        """
        start, end = extent
        old = self.indentation(start)
        text = self.text[start:end]
        changes = tuple(changes)
        if old == indent or "\n" not in text:
            return replaced(text, start, changes)
        fixed = self._fixed_lines(start, end, old)
        lines: list[str] = []
        offset = start
        for line in text.split("\n"):
            movable = offset > start and offset not in fixed and line.startswith(old) and line.strip()
            new = replaced(line, offset, [one for one in changes if offset <= one[0] <= offset + len(line)])
            lines.append(indent + new[len(old):] if movable else new)
            offset += len(line) + 1
        return "\n".join(lines)

    def _fixed_lines(self, start: int, end: int, old: str) -> set[int]:
        """Offsets of the starts of lines that must not be moved."""
        fixed: set[int] = set()
        for token in self._tokens:
            if not start <= token.start < end or token.kind == "blank":
                continue
            starts = [token.start + at + 1 for at, character in enumerate(token.text) if character == "\n"]
            lines = [self.text[at:token.end] for at in starts]
            if token.kind == "directive":
                fixed.add(self.text.rfind("\n", 0, token.start) + 1)
            if token.kind != "comment" or not all(line.startswith(old) for line in lines if line.strip()):
                fixed.update(starts)
        return fixed


def _block_names(nest: Nest) -> set[str]:
    """Names of variables that may be declared inside the nest."""
    stored = {storage.object for storage in nest.storages if storage.scope == "block"}
    return stored | {loop.iterator for loop in nest.loops if not loop.declared_in_for}


def replaced(text: str, start: int, changes: Iterable[tuple[int, int, str]]) -> str:
    """The text, which starts at an offset of the file, with pieces replaced."""
    for begin, end, new in sorted(changes, reverse=True):
        text = text[:begin - start] + new + text[end - start:]
    return text


def _shapes(shape: Shape) -> Iterator[Shape]:
    yield shape
    for child in shape.children:
        yield from _shapes(child)


def _nodes(nodes: Iterable[Node]) -> Iterator[Node]:
    """The nodes of a tree, without what is inside pieces of text."""
    for node in nodes:
        yield node
        if not isinstance(node, Verbatim):
            yield from _nodes(children(node))


def instances(nodes: tuple[Node, ...]) -> Iterator[tuple[str, Affine]]:
    """The iterators and their values of the instances that pieces of text in these nodes stand for."""
    for node in nodes:
        if isinstance(node, Leaf):
            yield from node.instance
        else:
            yield from instances(children(node))
