"""What stands behind the ``;`` of a plan.

    option = "remainder" ( "clamp" | "peel" )
           | "reassociate" ( "no" | "yes" )
           | "place" statement ( "at" | "with" ) loop "=" sum
           | "unroll" loop
           | "threads" "at" loop [ ":" chunk ]
           | "hold" array "across" loop
           | "pack" array "at" loop ":" chunk

``place 17 at j = k``: the statement of line 17, which is not in the loop ``j``, stands where ``j`` has the value ``k``;
``with``: it goes with the chunk of ``j`` that holds ``k``, before or after the chunk's single iterations, as the text
has it.  retile looks for such places itself; stated ones are taken as they are, and judged.

``unroll i``: the full chunks of ``i`` are written out, iteration for iteration.  ``hold`` and ``pack`` are explained in
``buffers``; an array that the nest reaches in several ways is named with its subscripts, as in ``grid[i][k]``.
"""

from __future__ import annotations

import re

from ..affine import Affine
from ..model import Alignment, Nest, RetileError, ScalarClass, Statement, StorageKind, Term
from ..tree import Buffer
from ..values import dataclass, replace
from .buffers import Unfit, buffer_of, references

# The options with a fixed set of values.
OPTIONS = {"remainder": ("clamp", "peel"), "reassociate": ("no", "yes")}

_KNOWN = ", ".join([*(f"{word} {'|'.join(values)}" for word, values in OPTIONS.items()), "place LINE at LOOP = VALUE",
                    "place LINE with LOOP = VALUE", "unroll LOOP", "hold ARRAY across LOOP", "pack ARRAY at LOOP:CHUNK", "threads at LOOP:CHUNK"])
_BUFFER = re.compile(r"(hold|pack)\s+(\S+)\s+(across|at)\s+(\S+)")
# Iterations of one loop that are written out at most.
MOST_UNROLLED = 64
_PLACE = re.compile(r"place\s+(\S+)\s+(at|with)\s+(\S+?)\s*=\s*(\S.*)")
_PRODUCT = re.compile(r"\s*([+-]?)\s*(?:(\d+)\s*\*\s*)?([^+\-*\s]+)\s*")


class PlanText:
    """The text of a plan, to complain about."""

    def __init__(self, text: str) -> None:
        self.text = text

    def complaint(self, start: int, end: int, what: str, remedy: str) -> RetileError:
        """The one message of a wrong plan, with ``text[start:end]`` marked."""
        mark = " " * start + "^" * max(1, end - start)
        return RetileError(f"wrong plan: {what}\n    {self.text}\n    {mark}\n{remedy}")


@dataclass(frozen=True)
class Options:
    """What the options of a plan say."""

    words: tuple[tuple[str, str], ...] = ()  # all of them: (word, value)
    aligned: tuple[Alignment, ...] = ()
    unrolled: tuple[str, ...] = ()
    buffers: tuple[Buffer, ...] = ()
    inner: tuple[tuple[str, int], ...] = ()  # scalars to hold, with the term around which
    threaded: int | None = None


def read_options(plan: PlanText, start: int, text: str, nest: Nest, terms: tuple[Term, ...]) -> Options:
    """The options of a plan; ``start``: where ``text`` begins in the plan.

    Raises RetileError, with the place in the plan marked, for a word, a value or a name that is not known.
    """
    found: list[tuple[str, str]] = []
    aligned: list[Alignment] = []
    unrolled: list[str] = []
    buffers: list[Buffer] = []
    inner: list[tuple[str, int]] = []
    threaded: int | None = None
    for match in re.finditer(r"[^,]+", text):
        option = match.group().strip()
        begin = start + match.start() + len(match.group()) - len(match.group().lstrip())
        if not option:
            continue
        word, _, value = option.partition(" ")
        if word == "place":
            aligned.append(_alignment(plan, begin, option, nest, terms))
        elif word == "unroll" and value.strip():
            unrolled.append(_unrolled(plan, begin, option, value.strip(), terms))
        elif word == "threads":
            threaded = _threaded(plan, begin, option, terms)
        elif word in ("hold", "pack"):
            made = _buffer(plan, begin, option, nest, terms, buffers)
            if isinstance(made, Buffer):
                buffers.append(made)
            else:
                inner.append(made)
        elif value.strip() not in OPTIONS.get(word, ()):
            raise plan.complaint(begin, begin + len(option), f"'{option}' is not an option", f"Options: {_KNOWN}.")
        elif word in dict(found):
            raise plan.complaint(begin, begin + len(option), f"option '{word}' stands twice", "Leave one of the two out.")
        found.append((word, " ".join(value.split())))
    if threaded is not None:
        buffers = [replace(buffer, heap=buffer.heap and buffer.level <= threaded) for buffer in buffers]
    buffers.sort(key=lambda buffer: buffer.level)
    if unrolled and ("remainder", "clamp") in found:
        raise plan.complaint(start, start + len(text), "only full chunks can be written out, and 'remainder clamp' has none",
                             "Leave 'remainder clamp' out.")
    return Options(tuple(found), tuple(aligned), tuple(unrolled), tuple(buffers), tuple(inner), threaded)


def _unrolled(plan: PlanText, begin: int, option: str, loop: str, terms: tuple[Term, ...]) -> str:
    chunks = [term.chunk for term in terms if len(term.form) == 1 and term.loop == loop]
    if len(chunks) < 2 or not isinstance(chunks[-2], int):
        raise plan.complaint(begin, begin + len(option), f"'{loop}' has no chunk with a number in the plan",
                             "Only the iterations of a chunk are written out: put one like i:4 into the plan.")
    if chunks[-2] > MOST_UNROLLED:
        raise plan.complaint(begin, begin + len(option), f"{chunks[-2]} iterations of '{loop}' are too many to write out",
                             f"At most {MOST_UNROLLED}.")
    return loop


def _threaded(plan: PlanText, begin: int, option: str, terms: tuple[Term, ...]) -> int:
    written = {f"{term.loop}:{term.chunk}" if term.chunk is not None else term.loop: at for at, term in enumerate(terms)
               if len(term.form) == 1}
    match = re.fullmatch(r"threads\s+at\s+(\S+)", option)
    if match is None or match.group(1) not in written:
        raise plan.complaint(begin, begin + len(option), "this is no loop for threads",
                             f"Write it like: threads at i:64. Terms here: {', '.join(written)}.")
    return written[match.group(1)]


def _buffer(plan: PlanText, begin: int, option: str, nest: Nest, terms: tuple[Term, ...], others: list[Buffer]) \
        -> Buffer | tuple[str, int]:
    match = _BUFFER.fullmatch(option)
    if match is None or (match.group(1) == "hold") != (match.group(3) == "across"):
        raise plan.complaint(begin, begin + len(option), "this is not a buffer",
                             "Write it like: hold beams across k, or: pack echoes at k:256.")
    word, name, _, place = match.groups()
    chunk = word == "pack"
    written = {f"{term.loop}:{term.chunk}" if term.chunk is not None else term.loop: at for at, term in enumerate(terms)
               if len(term.form) == 1 and (term.chunk is not None or not chunk)}
    at = written.get(place) if chunk == (":" in place) else None
    if at is None:
        known = [text for text in written if chunk == (":" in text)]
        raise plan.complaint(begin + match.start(4), begin + match.end(4), f"'{place}' is not such a term of the plan",
                             f"Terms here: {', '.join(known) or 'none'}.")
    if word == "hold" and any(s.name == name and s.scalar is ScalarClass.PRIVATE for s in nest.storages):
        return name, at
    storage, subscripts = _reference(plan, begin + match.start(2), name, nest)
    if any((other.storage, other.subscripts) == (storage, subscripts) for other in others):
        raise plan.complaint(begin, begin + len(option), f"{name} has a buffer already", "Leave one of the two out.")
    try:
        return buffer_of(nest, terms, word, nest.storage(storage), subscripts, at)
    except Unfit as reason:
        raise plan.complaint(begin, begin + len(option), f"cannot {word} {name}: {reason}",
                             "Change the order or leave the option out.") from None


def _reference(plan: PlanText, begin: int, name: str, nest: Nest) -> tuple[str, tuple[Affine, ...]]:
    """The accesses that a name means: of an array, or with its subscripts where there are several."""
    known = {storage.name: references(nest, storage.name) for storage in nest.storages
             if storage.kind is not StorageKind.SCALAR}
    if len(known.get(name, ())) == 1:
        return name, known[name][0]
    texts = {shown(storage, subscripts): (storage, subscripts) for storage, several in known.items()
             for subscripts in several}
    if name in texts:
        return texts[name]
    one_of = [text for text, (storage, _) in texts.items() if storage == name]
    hidden = name.partition("[")[0] in known and not one_of and not known[name.partition("[")[0]]
    what = f"'{name}' is reached in several ways" if one_of else f"the cells that '{name}' means are not known by subscripts" \
        if hidden else f"the nest has no array '{name}'"
    raise plan.complaint(begin, begin + len(name), what, f"Name one of: {', '.join(one_of or texts)}.")


def shown(storage: str, subscripts: tuple[Affine, ...]) -> str:
    """An access as a plan names it: ``grid[i][k+1]``."""
    if "->" in storage and subscripts[:1] == (Affine(),):  # the pointer leads to one structure
        subscripts = subscripts[1:]
    return storage + "".join(f"[{subscript}]" for subscript in subscripts).replace(" ", "")


def _alignment(plan: PlanText, begin: int, option: str, nest: Nest, terms: tuple[Term, ...]) -> Alignment:
    match = _PLACE.fullmatch(option)
    if match is None:
        raise plan.complaint(begin, begin + len(option), "this is not a place", "Write it like: place 17 at j = k.")
    id, word, loop, value = match.groups()
    statement = next((s for s in nest.statements if s.id == id), None)
    if statement is None:
        raise plan.complaint(begin + match.start(1), begin + match.end(1), f"the nest has no statement '{id}'",
                             f"Statements here: {', '.join(s.id for s in nest.statements)}.")
    moved = dict.fromkeys(name for term in terms for name, _ in term.form)
    if loop not in moved or loop in statement.loops:
        what = "is around it" if loop in statement.loops else "is not a loop of the plan"
        raise plan.complaint(begin + match.start(3), begin + match.end(3), f"'{loop}' {what}",
                             f"Loops it can stand in: {', '.join(x for x in moved if x not in statement.loops) or 'none'}.")
    form = _value(plan, begin + match.start(4), value, statement, nest, tuple(moved))
    return Alignment(id, loop, form, word == "with")


def _value(plan: PlanText, begin: int, text: str, statement: Statement, nest: Nest, moved: tuple[str, ...]) -> Affine:
    """A sum of the statement's own moved iterators, sizes of the nest and integers."""
    known = {name: name for name in statement.loops if name in moved} | {p.text: p.symbol for p in nest.parameters}
    total, at = Affine(), 0
    while at < len(text):
        match = _PRODUCT.match(text, at)
        if match is None or (at > 0 and not match.group(1)):
            raise plan.complaint(begin + at, begin + len(text), "this is not a sum", "Write it like 2*k + 1.")
        name, factor = match.group(3), int(match.group(2) or 1) * (-1 if match.group(1) == "-" else 1)
        if not name.isdecimal() and name not in known:
            raise plan.complaint(begin + match.start(3), begin + match.end(3), f"'{name}' is not known at the statement",
                                 f"Names here: {', '.join(known) or 'none'}.")
        total = total + (Affine.of(int(name)) if name.isdecimal() else Affine.of(known[name])) * factor
        at = match.end()
    return total
