"""Buffers in C: local arrays and allocated ones, and the user's text with its accesses sent there.

    double beams_held_0[8], beams_held_1[8];                        a row of its own for each value that is written out
    double (*const echoes_packed)[256][8] = malloc(...);            too large for the stack: allocated once, ahead of the nest
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from math import prod
from typing import TYPE_CHECKING

from ..affine import Affine
from ..model import CType, Nest, Plan, Refusal, Span, StorageKind
from ..plan.buffers import served
from ..source.lex import tokenize
from ..tree import Buffer, Copy, Held, Kept, Leaf, Loop, Move, Node, Verbatim, children
from ..values import dataclass
from .expression import Scope, express
from .names import Names

if TYPE_CHECKING:
    from ..source import Source

_WORDS = {"hold": "held", "pack": "packed"}
_ALIGNMENT = 64  # bytes: a cache line, and as much as the widest vectors that are common


@dataclass(frozen=True)
class Array:
    """Cells of the variant's own as they are declared: an array per combination of the written-out values in ``rows``."""

    name: str
    shape: tuple[int, ...]
    rows: tuple[int, ...]  # dimensions that are told apart by name

    def cell(self, index: tuple[Affine, ...], scope: Scope) -> str:
        """The text of one cell."""
        known = [form.substitute(scope.meanings) for form in index]
        name = "_".join([self.name, *(str(known[at].constant) for at in self.rows)])
        return name + "".join(f"[{express(form, scope).text}]" for at, form in enumerate(known) if at not in self.rows)

    def declarators(self) -> Iterator[str]:
        """What is declared, without the type."""
        names = [self.name]
        for at in self.rows:
            names = [f"{name}_{number}" for name in names for number in range(self.shape[at])]
        extents = "".join(f"[{extent}]" for at, extent in enumerate(self.shape) if at not in self.rows)
        return (name + extents for name in names)


def constant_dimensions(nodes: tuple[Node, ...], wanted: Buffer | str, index: tuple[Affine, ...],
                        meanings: Mapping[str, Affine]) -> tuple[int, ...]:
    """The dimensions in which every use of a buffer, or of a kept scalar, has a number for its index."""
    found = [{at for at, form in enumerate(index) if form.substitute(inner).is_constant}
             for inner in _uses(nodes, wanted, dict(meanings))]
    return tuple(sorted(set.intersection(*found))) if found else ()


def _uses(nodes: tuple[Node, ...], wanted: Buffer | str, meanings: dict[str, Affine]) -> Iterator[dict[str, Affine]]:
    """The values that are known where something may use the cells."""
    for node in nodes:
        if isinstance(node, Copy):
            if node.scalar == wanted:
                yield meanings
        elif isinstance(node, Move):
            if node.buffer == wanted:
                yield meanings
        elif isinstance(node, Leaf | Verbatim):
            if isinstance(wanted, Buffer):
                yield meanings
        elif isinstance(node, Loop) and node.unrolled and isinstance(node.lower, Affine):
            yield from _uses(node.body, wanted, {**meanings, node.symbol: node.lower.substitute(meanings)})
        else:
            yield from _uses(children(node), wanted, meanings)


class Heap:
    """The buffers that are allocated once, ahead of the nest."""

    def __init__(self, nest: Nest, tree: tuple[Node, ...], names: Names, flags: tuple[str, ...]) -> None:
        self._nest = nest
        self._c11 = not any(flag in ("-ansi",) or flag.startswith("-std=") and
                            flag[-2:] in ("89", "90", "99", "9x") or flag.endswith(":199409") for flag in flags)
        found = dict(_allocated(tree))
        self.arrays = {key: Array(names.fresh(array_name(nest, key)), shape, ()) for key, shape in found.items()}

    def __bool__(self) -> bool:
        return bool(self.arrays)

    def declarations(self) -> list[str]:
        """Allocates each; the pointer is null where there is no memory."""
        return [self._declaration(key if isinstance(key, str) else key.storage, array) for key, array in self.arrays.items()]

    def _declaration(self, storage: str, array: Array) -> str:
        element = self._nest.storage(storage).element
        assert isinstance(element, CType)
        inner = "".join(f"[{extent}]" for extent in array.shape[1:])
        pointer = f"(*const {array.name}){inner}" if inner else f"*const {array.name}"
        size = prod(array.shape) * element.bits // 8
        amount = f"{array.shape[0]} * sizeof *{array.name}" if size % _ALIGNMENT == 0 or not self._c11 else \
            str(-(-size // _ALIGNMENT) * _ALIGNMENT)
        call = f"aligned_alloc({_ALIGNMENT}, {amount})" if self._c11 else f"malloc({amount})"
        return f"{element.spelling} {pointer} = {call};"

    def conditions(self) -> list[str]:
        """True where all are there."""
        return [array.name for array in self.arrays.values()]

    def releases(self) -> list[str]:
        """Frees each."""
        return [f"free({array.name});" for array in reversed(self.arrays.values())]


def array_name(nest: Nest, key: Buffer | str, inner: bool = False) -> str:
    """What a buffer, or the array of a kept scalar, is called: after the user's name; ``inner``: the one within another."""
    storage = nest.storage(key if isinstance(key, str) else key.storage)
    text = storage.name if not isinstance(key, str) else storage.pointer_text.removeprefix("&") or key
    base = "_".join("".join(c if c.isalnum() or c == "_" else " " for c in text).split())
    return f"{base}_{_WORDS[key.word] if isinstance(key, Buffer) else 'held' if inner else 'kept'}"


def _allocated(nodes: tuple[Node, ...]) -> Iterator[tuple[Buffer | str, tuple[int, ...]]]:
    for node in nodes:
        if isinstance(node, Held) and node.buffer.heap:
            yield node.buffer, node.buffer.shape
        if isinstance(node, Kept) and node.heap:
            yield node.scalar, node.shape  # the outer one; none inside it is as large
        yield from _allocated(children(node))


Change = tuple[int, int, str]  # text[start:end] becomes


def with_values(text: str, start: int, values: Mapping[str, str], taken: list[Change]) -> list[Change]:
    """The changes, at offsets of the file, that put values in place of names in a piece of C text.

    ``start``: where the text begins; ``taken``: changes already made, inside which nothing is looked at.
    """
    tokens = [token for token in tokenize(text) if token.kind not in ("blank", "comment", "directive")]
    found: list[Change] = []
    for at, token in enumerate(tokens):
        begin, end = start + token.start, start + token.end
        if token.kind != "word" or token.spelling not in values or any(a <= begin < b for a, b, _ in taken) or \
                at and tokens[at - 1].text in (".", "->"):
            continue
        value = values[token.spelling]
        alone = at and tokens[at - 1].text in "[(," and at + 1 < len(tokens) and tokens[at + 1].text in "]),"
        plain = value.replace("_", "a").isalnum()
        found.append((begin, end, value if alone or plain else f"({value})"))
    return found



def reference_of(source: Source, nest: Nest, buffer: Buffer) -> Span | None:
    """An access, as the user wrote it, whose text means the same cell wherever its iterators have their values.

    It names no variable that the nest changes, and no iterator that its subscripts do without.
    """
    used = frozenset().union(*(subscript.names() for subscript in buffer.subscripts))
    apart = {loop.iterator for loop in nest.loops if loop.id not in used} - \
        {loop.iterator for loop in nest.loops if loop.id in used}
    written = {a.storage for statement in nest.statements for a in statement.accesses if a.write}
    changing = apart | {storage.pointer_text.removeprefix("&") or storage.name for storage in nest.storages
                        if storage.kind is StorageKind.SCALAR and storage.name in written}
    for statement in nest.statements:
        for access in served(buffer, statement):
            span = source.reference_span(access.syntax.node)
            if span is not None and not changing & _words(source, span):
                return span
    return None


def _words(source: Source, span: Span) -> set[str]:
    """The words of a piece of the user's text and of the macros in it."""
    words: set[str] = set()
    todo = [token.spelling for token in source.tokens_in(span.start, span.end) if token.kind == "word"]
    while todo:
        word = todo.pop()
        if word not in words:
            words.add(word)
            todo += source.macro_words.get(word, ())
    return words


def not_written_down(source: Source, nest: Nest, plan: Plan) -> Iterator[Refusal]:
    """The buffers of a plan whose accesses have no text of their own that could be changed or moved."""
    for buffer in plan.buffers:
        users = [(statement, access) for statement in nest.statements for access in served(buffer, statement)]
        hidden = [statement for statement, access in users if source.reference_span(access.syntax.node) is None]
        place = (hidden[0] if hidden else users[0][0]).span
        if hidden:
            yield Refusal(place.line, place.column, "buffer", f"an access to {buffer.storage} comes out of a macro that gives more "
                          "than the access, or is no plain array element; write it out")
        elif reference_of(source, nest, buffer) is None:
            yield Refusal(place.line, place.column, "buffer", f"the subscripts of {buffer.storage} use a variable that the nest "
                          "changes; write them with the iterators alone")
