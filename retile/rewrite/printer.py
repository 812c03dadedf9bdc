"""A loop tree as C text: headers written anew where they must be, the user's statements moved by whole lines.

The tree is taken as it is; nothing here decides what runs when.  Positions, braces, indentation and comments are the
user's (``layout``, ``style``), headers come from ``loops``.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

from ..affine import Affine, bound_names, equal, negate
from ..model import LoopText, Nest, RetileError, Statement, StorageKind
from ..plan.buffers import served
from ..source import Source
from ..tree import Buffer, Copy, Guard, Held, Kept, Leaf, Loop, Move, Node, Verbatim, children, loops_of
from ..values import replace
from .buffered import Array, Change, Heap, array_name, constant_dimensions, reference_of, with_values
from .chunks import Loops
from .expression import Expression, condition
from .layout import InternalError, Loose, NestText, Remarks, instances, replaced
from .loops import Opened, Place
from .skipping import apart
from .style import WIDTH, Style

# What OpenMP takes: OpenMP API 4.5, 2.6, "Canonical loop form".
_CANONICAL = re.compile(r"\(\s*(?:[\w ]+\s)?(\w+)\s*=[^;]*;\s*\1\s*(?:<|>|<=|>=)[^;=]*;"
                        r"\s*(?:\1\s*(?:\+\+|--|[-+]=\s*\d+)|(?:\+\+|--)\s*\1)\s*\)\s*$")


class Printer:
    """Prints one tree; remarks that found no place are left in ``homeless``."""

    def __init__(self, source: Source, nest: Nest, layout: NestText, style: Style, loops: Loops, kept: frozenset[str],
                 heap: Heap) -> None:
        self._source = source
        self._nest = nest
        self._heap = heap
        self._arrays: dict[Buffer | str, Array] = {}  # those in use here, per buffer or kept scalar
        self._around: dict[Array, Array] = {}  # for a kept scalar's array the one further out
        self._values: dict[str, str] = {}  # what stands for the user's iterators here
        self._ahead: set[str] = set()  # indentations at which loops have declarations ahead of them
        self._again = False  # in a copy of text that stands further up already
        self._layout = layout
        self._style = style
        self._loops = loops
        self._ids = {loop.id for loop in nest.loops}
        self._remarks = layout.remarks(kept)
        self._declared: set[Loose] = set()  # in the blocks under way
        self._apart = apart(layout)

    @property
    def homeless(self) -> list[str]:
        """The comments that no printed loop carried."""
        return [self._layout.text[start:end] for remarks in self._remarks.values()
                for start, end in (*remarks.before, *remarks.behind, *remarks.after)]

    def declarations(self, nodes: tuple[Node, ...], place: Place) -> tuple[Loose, ...]:
        """The declarations that stand at the start of a list: further in, they would not reach all of their block."""
        parts = [(node, frozenset(_uses((node,))), frozenset(_uses(children(node)))) for node in nodes]
        found = []
        for loose in self._layout.loose:
            inside = [(node, within) for node, all_of_it, within in parts if all_of_it & loose.pieces]
            further_in = loose.loop not in place.around and \
                all(loose.pieces <= within and not isinstance(node, Verbatim) for node, within in inside)
            if inside and not further_in and loose not in self._declared:
                found.append(loose)
        return tuple(found)

    def nodes(self, nodes: tuple[Node, ...], place: Place, indent: str) -> list[str]:
        """The lines of some nodes that run one after the other, with the declarations that they need."""
        declared = self.declarations(nodes, place)
        lines = list(dict.fromkeys(indent + self._layout.moved(loose.extent, indent) for loose in declared))
        self._declared.update(declared)
        lines += self._nodes(nodes, place, indent)
        self._declared.difference_update(declared)
        return lines

    def _nodes(self, nodes: tuple[Node, ...], place: Place, indent: str) -> list[str]:
        lines: list[str] = []
        at = 0
        while at < len(nodes):
            node = nodes[at]
            if isinstance(node, Loop) and node.unrolled:
                before = nodes[at - 1] if at else None
                again = isinstance(before, Loop) and before.unrolled and before.symbol == node.symbol
                lines += self._written_out(node, place, indent, again)
            elif isinstance(node, Loop) and self._single(node):
                body = self._assigned(node, place, indent + self._style.braced_step)
                lines += [indent + "{", *body, indent + "}"]
            elif isinstance(node, Loop):
                printed, place = self._loop(node, place, indent)
                lines += printed
            elif isinstance(node, Guard):
                both = at + 1 < len(nodes) and self._opposite(node, nodes[at + 1])
                lines += self._guard(node, nodes[at + 1] if both else None, place, indent)
                at += both
            elif isinstance(node, Verbatim):
                lines += self._piece(node, place, indent)
            elif isinstance(node, Kept | Held):
                lines += self._with_storage(node, place, indent)
            elif isinstance(node, Move):
                lines.append(indent + self._move(node, place))
            elif isinstance(node, Copy):
                lines.append(indent + self._copy(node, place))
            else:
                raise InternalError(f"{self._nest.address}: statement {node.statement} has no text of its own")
            at += 1
        return lines

    # ---------------------------------------------------------------- the user's text

    def _piece(self, node: Verbatim, place: Place, indent: str) -> list[str]:
        """Statements of the user's, with their accesses sent to buffers and values in place of iterators.

        They stand in a loop that runs once where their ``continue`` would skip more than them.
        """
        extent = self._layout.piece(node) if not self._again else self._layout.without_comments(self._layout.piece(node))
        if id(node) not in self._apart:
            return [indent + self._moved(extent, indent, node.content, place)]
        inner = indent + self._style.step
        return [f"{indent}do {{", inner + self._moved(extent, inner, node.content, place), f"{indent}}} while (0);"]

    def _moved(self, extent: tuple[int, int], indent: str, content: tuple[Node, ...], place: Place) -> str:
        changes = list(dict.fromkeys(change for leaf in _leaves(content)
                                     for change in self._sent(self._nest.statement(leaf.statement), place)))
        if self._values:
            changes += with_values(self._layout.text[extent[0]:extent[1]], extent[0], self._values, changes)
        return self._layout.moved(extent, indent, changes)

    def _sent(self, statement: Statement, place: Place) -> list[Change]:
        """The accesses of a statement that go to buffers."""
        found: list[Change] = []
        for buffer, array in self._arrays.items():
            if isinstance(buffer, str):
                continue
            for access in served(buffer, statement):
                span = self._source.reference_span(access.syntax.node)
                if span is None:
                    raise InternalError(f"{self._nest.address}: an access to {buffer.storage} has no text of its own")
                found.append((span.start, span.end, array.cell(buffer.index, place.scope)))
        return found

    def _written_out(self, loop: Loop, place: Place, indent: str, again: bool) -> list[str]:
        """One iteration of a loop that is written out."""
        source = self._loops.source(loop.symbol)
        assert isinstance(loop.lower, Affine)
        value = self._loops.in_type(loop.lower, source.type, place.scope)
        known = loop.lower.substitute(place.scope.meanings)
        inside = Place(place.scope.meaning(loop.symbol, known), place.limits, place.around | {loop.symbol})
        before = self._values, self._again
        self._again = self._again or again
        if not self._hides(source.iterator, loop.body):
            self._values = {**self._values, source.iterator: value.text}
            self._ahead.discard(indent)
            lines = self.nodes(loop.body, inside, indent)
            if self._declares(loop.body) or indent in self._ahead:
                lines = [indent + "{", *(self._style.step + line for line in lines), indent + "}"]
        else:
            declared = f"const {source.type.spelling} " if source.declared_in_for else ""
            inner = indent + self._style.braced_step
            lines = [f"{indent}{{", f"{inner}{declared}{source.iterator} = {value.text};",
                     *self.nodes(loop.body, inside, inner), f"{indent}}}"]
        self._values, self._again = before
        return lines

    def _hides(self, iterator: str, nodes: tuple[Node, ...]) -> bool:
        """True if a macro in the text of some nodes uses an iterator, so that no value can stand in its place."""
        words = self._source.macro_words
        seen: set[str] = set()
        todo = [token.spelling for node in _pieces(nodes) for token in
                self._source.tokens_in(*self._layout.piece(node)) if token.spelling in words]
        while todo:
            name = todo.pop()
            if name not in seen:
                seen.add(name)
                if iterator in words[name]:
                    return True
                todo += [word for word in words[name] if word in words]
        return False

    def _declares(self, nodes: tuple[Node, ...]) -> bool:
        """True if statements of some nodes declare names, which copies of them would declare again."""
        return any(isinstance(node, Held | Kept) or isinstance(node, Copy) and node.declares for node in nodes) or any(access.write and self._nest.storage(access.storage).scope == "block" for leaf in _leaves(nodes)
                   for access in self._nest.statement(leaf.statement).accesses)

    # ---------------------------------------------------------------- storage

    def _with_storage(self, node: Kept | Held, place: Place, indent: str) -> list[str]:
        """The body of a node with the cells that it has of its own."""
        before = self._arrays.get(node.scalar) if isinstance(node, Kept) else None
        key, index, shape = (node.buffer, node.buffer.index, node.buffer.shape) if isinstance(node, Held) else \
            (node.scalar, next((copy.index for copy in _copies(node.body, node.scalar)), ()), node.shape)
        if before is None and key in self._heap.arrays:
            self._arrays[key] = self._heap.arrays[key]
            lines = self.nodes(node.body, place, indent)
        else:
            rows = constant_dimensions(node.body, key, index, place.scope.meanings)
            array = Array(self._loops.name(("cells", key, before is None), array_name(self._nest, key, before is not None), family=True), shape, rows)
            if before is not None:
                self._around[array] = before
            self._arrays[key] = array
            type = self._declaration(key.storage if isinstance(key, Buffer) else key)
            lines = self._declarations_of(type, list(array.declarators()), indent)
            lines += self.nodes(node.body, place, indent)
        del self._arrays[key]
        if before is not None:
            self._arrays[key] = before
        return lines

    def _declarations_of(self, type: str, declarators: list[str], indent: str) -> list[str]:
        lines = [f"{indent}{type} {declarators[0]}"]
        for one in declarators[1:]:
            if len(lines[-1]) + len(one) + 3 > WIDTH:
                lines[-1] += ","
                lines.append(f"{indent}{self._style.step}{one}")
            else:
                lines[-1] += f", {one}"
        return [*lines[:-1], lines[-1] + ";"]

    def _move(self, move: Move, place: Place) -> str:
        """``beams_held[j - j_from] = beams[i][j];`` or the other way round."""
        buffer = move.buffer
        span = reference_of(self._source, self._nest, buffer)
        if span is None:
            raise InternalError(f"{self._nest.address}: no access to {buffer.storage} has a text of its own")
        changes = with_values(self._layout.text[span.start:span.end], span.start, self._values, [])
        own = self._layout.moved((span.start, span.end), "", changes)
        cell = self._arrays[buffer].cell(buffer.index, place.scope)
        return f"{own} = {cell};" if move.store else f"{cell} = {own};"

    # ---------------------------------------------------------------- loops

    def _loop(self, loop: Loop, place: Place, indent: str) -> tuple[list[str], Place]:
        opened = self._valued(self._loops.open(loop, place))
        remarks = self._take(loop)
        lines = [indent + self._layout.moved(extent, indent) for extent in remarks.before]
        lines += self._indented(opened.before, indent)
        if opened.before:
            self._ahead.add(indent)
        behind = "".join(" " + self._layout.moved(extent, indent) for extent in remarks.behind)
        inner = indent + self._style.braced_step
        if opened.condition:
            lines += self._style.block(f"if ({opened.condition})", self._body(loop, opened, inner, behind), indent)
        elif opened.declared:
            body = [f"{inner}{opened.declared};", *self._body(loop, opened, inner, behind)]
            lines += [f"{indent}{{", *body, f"{indent}}}"]
        else:
            lines += self._body(loop, opened, indent, behind)
        after = [self._layout.moved(extent, indent) for extent in remarks.after]
        if after:
            lines[-1] += " " + after[0]
            lines += [indent + text for text in after[1:]]
        return lines, opened.outside

    def _valued(self, opened: Opened) -> Opened:
        """The loop's texts with values in place of iterators that are written out."""
        if not self._values:
            return opened
        return replace(opened, before=tuple(map(self._in_values, opened.before)), header=self._in_values(opened.header),
                       first=tuple(map(self._in_values, opened.first)), declared=self._in_values(opened.declared),
                       condition=self._in_values(opened.condition))

    def _in_values(self, text: str) -> str:
        return replaced(text, 0, with_values(text, 0, self._values, []))

    def _take(self, loop: Loop) -> Remarks:
        """The comments of a source loop, for the first tree loop that runs over its iterations one by one."""
        if loop.symbol not in self._ids or not any(_leaves(loop.body)):
            return Remarks()
        return self._remarks.pop(loop.symbol, Remarks())

    def _indented(self, lines: tuple[str, ...], indent: str) -> list[str]:
        """Generated lines; a mark at the start asks for one more level."""
        return [indent + line.replace("\x01", self._style.step) for line in lines]

    def _single(self, loop: Loop) -> bool:
        """True for a loop of exactly one iteration: a value that follows from the loops around."""
        return not loop.unrolled and loop.symbol in self._ids and isinstance(loop.lower, Affine) and loop.lower == loop.upper and \
            abs(loop.step) == 1

    def _assigned(self, loop: Loop, place: Place, indent: str) -> list[str]:
        """The one iteration of a loop, its iterator set before it."""
        source = self._loops.source(loop.symbol)
        remarks = self._take(loop)
        value = self._loops.in_type(Affine.of(loop.lower), source.type, place.scope) \
            if isinstance(loop.lower, Affine) else None
        assert value is not None
        declared = f"const {source.type.spelling} " if source.declared_in_for else ""
        lines = [indent + self._layout.moved(extent, indent)
                 for extent in (*remarks.before, *remarks.behind, *remarks.after)]
        lines.append(f"{indent}{declared}{source.iterator} = {value.text};")
        scope = place.scope.naming(loop.symbol, Expression(source.iterator, source.type), loop.constraints())
        return lines + self.nodes(loop.body, Place(scope, place.limits, place.around | {loop.symbol}), indent)

    def _body(self, loop: Loop, opened: Opened, indent: str, behind: str) -> list[str]:
        given, place = self._given(loop, opened.inside)
        only = loop.body[0] if len(loop.body) == 1 else None
        inner = indent + (self._style.braced_step if self._surely_braced(loop, opened, bool(given)) else self._style.step)
        body = self._indented((*opened.first, *given), inner)
        single = isinstance(only, Loop) and self._single(only)
        body += self._assigned(only, place, inner) if isinstance(only, Loop) and single else \
            self.nodes(loop.body, place, inner)
        braced = self._surely_braced(loop, opened, bool(given)) or single or bool(self.declarations(loop.body, place)) or \
            self._needs_braces(loop.body[0], body)
        shared = self._shared(loop, opened.header) if loop.unordered else []
        return [*shared, *self._style.block(opened.header, body, indent, braced, behind)]

    def _shared(self, loop: Loop, header: str) -> list[str]:
        """The directive that lets threads share a loop, where the compiler takes such (OpenMP API 4.5, 2.7.1)."""
        if not _CANONICAL.search(header):
            raise RetileError(f"{self._nest.address}: threads cannot share the loop '{header}': OpenMP wants a loop that counts up or "
                              "down by a constant to a bound that is compared. Put 'threads' at another loop.")
        own = [name for name, form in ((inner.symbol, inner) for inner in loops_of(loop.body)) if name in self._ids]
        iterators = [self._nest.loop(id).iterator for id in own if not self._nest.loop(id).declared_in_for]
        written = {a.storage for leaf in _leaves(loop.body) for a in self._nest.statement(leaf.statement).accesses if a.write}
        around = {word for loose in self._declared for word in re.findall(r"\w+", self._layout.text[slice(*loose.extent)])}
        scalars = [self._variable(storage.name) for storage in self._nest.storages
                   if storage.kind is StorageKind.SCALAR and storage.name in written
                   and (storage.scope != "block" or self._variable(storage.name) in around)]
        private = ", ".join(dict.fromkeys((*iterators, *scalars)))
        uneven = any({loop.symbol, loop.of} & bound_names(bound) for inner in loops_of(loop.body) if inner.of != loop.of
                     for bound in (inner.lower, inner.upper))
        words = ["#pragma omp parallel for", *([f"private({private})"] if private else []), *(["schedule(dynamic)"] if uneven else [])]
        return ["#ifdef _OPENMP", " ".join(words), "#endif"]

    def _surely_braced(self, loop: Loop, opened: Opened, given: bool) -> bool:
        """True if the body gets braces, as far as that shows before it is printed.

        Where the style indents braces, so that a body's place depends on them, every doubtful loop gets some.
        """
        if self._layout.braced(self._nest.loop(loop.of)) or len(loop.body) != 1 or opened.first or given:
            return True
        inner = loop.body[0]
        plain = isinstance(inner, Verbatim) and self._layout.statement_count(inner) == 1 or \
            isinstance(inner, Loop) and inner.symbol in self._ids and self._loops.unchanged(inner)
        return not plain and self._style.braced_step != self._style.step

    def _needs_braces(self, node: Node, body: list[str]) -> bool:
        """True for a body of more than one statement, or one that a reader could take for it."""
        if isinstance(node, Loop):
            first = body[0].lstrip()
            return not first.startswith("for")
        if isinstance(node, Kept | Held):
            return True
        if isinstance(node, Verbatim):
            return self._layout.statement_count(node) != 1
        return False

    def _given(self, loop: Loop, place: Place) -> tuple[list[str], Place]:
        """The user's iterators that a skewed sum took the place of, as soon as their values are known."""
        lines: list[str] = []
        wanted = dict(instances(loop.body))
        for name, form in wanted.items():
            source = self._loops.source(name)
            if name in place.around or form == Affine.of(name) or not place.scope.sees(form.names()) or \
                    self._same_variable(source, form):
                continue
            value = self._loops.in_type(form, source.type, place.scope)
            declared = f"const {source.type.spelling} " if source.declared_in_for else ""
            lines.append(f"{declared}{source.iterator} = {value.text};")
            variable = Expression(source.iterator, source.type)
            place = Place(place.scope.naming(name, variable, equal(Affine.of(name), form)), place.limits, place.around | {name})
        return lines, place

    # ---------------------------------------------------------------- kept values

    def _declaration(self, scalar: str) -> str:
        element = self._nest.storage(scalar).element
        return element if isinstance(element, str) else element.spelling

    def _variable(self, scalar: str) -> str:
        return self._nest.storage(scalar).pointer_text.removeprefix("&") or scalar

    def _copy(self, copy: Copy, place: Place) -> str:
        """``sum_kept[i - i_from] = sum;`` or the other way round."""
        array = self._arrays[copy.scalar]
        cell = array.cell(copy.index, place.scope)
        scalar = self._variable(copy.scalar) if copy.around is None else self._around[array].cell(copy.around, place.scope)
        if copy.store:
            return f"{cell} = {scalar};"
        return f"{self._declaration(copy.scalar)} {scalar} = {cell};" if copy.declares else f"{scalar} = {cell};"

    def _same_variable(self, source: LoopText, form: Affine) -> bool:
        """True if the value is that of another loop of the user's over the same variable."""
        names = form.names() & self._ids
        return len(names) == 1 and form == Affine.of(*names) and self._nest.loop(*names).iterator == source.iterator

    # ---------------------------------------------------------------- guards

    def _opposite(self, node: Guard, following: Node) -> bool:
        return isinstance(following, Guard) and node.span is None and following.span is None and \
            node.condition is not None and following.condition == negate(node.condition)

    def _guard(self, guard: Guard, otherwise: Node | None, place: Place, indent: str) -> list[str]:
        inside = place
        if guard.condition is not None:
            inside = replace(place, scope=place.scope.knowing(guard.condition))
        if guard.span is not None:
            conditions = tuple(Leaf(statement.id, ()) for statement in self._nest.statements
                               if (statement.span.start, statement.span.end) == guard.span)
            text = self._moved(guard.span, indent, conditions, place)
            text = f"!({text})" if self._layout.in_false_branch(guard) else text
        elif guard.condition is not None:
            text = self._style.wrapped(condition(guard.condition, place.scope), indent + "if (")
        else:
            raise InternalError(f"{self._nest.address}: a condition has no text")
        inner = indent + self._style.braced_step
        body = self.nodes(guard.body, inside, inner)
        # always in braces: an else of the user's further out must not find this if
        lines = self._style.block(f"if ({text})", body, indent)
        if isinstance(otherwise, Guard):
            assert otherwise.condition is not None
            apart = replace(place, scope=place.scope.knowing(otherwise.condition))
            lines = self._style.otherwise(lines, self.nodes(otherwise.body, apart, inner), indent)
        return lines


def _uses(nodes: tuple[Node, ...]) -> Iterator[tuple[int, int] | str]:
    """The extents of the pieces of text in some nodes, and the symbols of their loops."""
    for node in nodes:
        if isinstance(node, Verbatim):
            yield node.span
        else:
            if isinstance(node, Loop):
                yield node.symbol
            yield from _uses(children(node))


def _leaves(nodes: tuple[Node, ...]) -> Iterator[Leaf]:
    """All leaves of some nodes."""
    for node in nodes:
        if isinstance(node, Leaf):
            yield node
        yield from _leaves(children(node))


def _pieces(nodes: tuple[Node, ...]) -> Iterator[Verbatim]:
    """All pieces of the user's text in some nodes."""
    for node in nodes:
        if isinstance(node, Verbatim):
            yield node
        else:
            yield from _pieces(children(node))


def _copies(nodes: tuple[Node, ...], scalar: str) -> Iterator[Copy]:
    """All copies of a kept scalar."""
    for node in nodes:
        if isinstance(node, Copy) and node.scalar == scalar:
            yield node
        yield from _copies(children(node), scalar)
