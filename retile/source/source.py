"""A user's C file, open: text, tokens, tree, and the way between them."""

from __future__ import annotations

import re
from bisect import bisect_left, bisect_right
from collections.abc import Sequence
from functools import cached_property
from typing import Any

from pycparser import c_ast

from ..model import RetileError, Span
from .compiler import CompilerCall, Preprocessing, check_syntax
from .lex import SKIPPED, Lines, Token, spellings, tokenize
from .messages import complaint
from .opening import begin, decoded
from .parse import FuncDef, SyntaxProblem
from .reading import CompilerRefused, Reading
from .structure import External
from .types import Types


class Source:
    """A C file with its tokens, its syntax tree and the extents of its statements."""

    def __init__(self, path: str, text: str, encoding: str, call: CompilerCall,
                 preprocessing: Preprocessing | None = None, *, stubs: bool = True) -> None:
        """``preprocessing``: a run over this file, with our own headers, if one has begun already."""
        self.path = path  # as the user typed it
        self.text = text  # line endings and byte order mark kept
        self.encoding = encoding
        self.call = call
        self.lines = Lines(text)
        self.tokens: tuple[Token, ...] = tokenize(text, self.lines)
        self._readings: list[Reading] = []
        self._read(stubs, preprocessing)

    # ---------------------------------------------------------------- reading

    def _read(self, stubs: bool, preprocessing: Preprocessing | None = None) -> Reading:
        """Add a reading; without our own headers if it fails with them."""
        number = len(self._readings)
        preprocessing = preprocessing or begin(self.path, self.text, self.call, stubs=stubs)
        try:
            reading = Reading(
                self.path, self.tokens, preprocessing, stubs, lambda part, node: self._body(number, part, node)
            )
        except CompilerRefused as refused:
            if stubs:
                return self._read(stubs=False)
            raise RetileError(self._compiler_said(str(refused))) from None
        except SyntaxProblem as problem:
            if stubs:
                return self._read(stubs=False)
            raise RetileError(self._syntax_error(problem)) from None
        self._readings.append(reading)
        return reading

    @property
    def _reading(self) -> Reading:
        return self._readings[-1]

    def _body(self, number: int, part: External, shell: c_ast.FuncDef) -> c_ast.Compound:
        """A function's body; a second reading with the system's own headers is tried before giving up."""
        reading = self._readings[number]
        try:
            return reading.body(part)
        except SyntaxProblem as problem:
            if reading.stubs:
                if len(self._readings) == number + 1:
                    self._read(stubs=False)
                for function, _ in self._reading.parsed.functions:
                    if function.decl.name == shell.decl.name:
                        return function.body
            raise RetileError(self._syntax_error(problem, reading)) from None

    def _syntax_error(self, problem: SyntaxProblem, reading: Reading | None = None) -> str:
        """What the compiler says of it, if it also finds an error; else what the parser says."""
        if message := self._first_error(check_syntax(self.call, self.path)):
            return message
        remedy = "retile reads C11 with the usual GNU extensions; this construct is not among them."
        place = problem.place
        if place is None:
            return complaint(self.path, len(self.lines.starts), None, "", problem.what, remedy)
        if place.file != self.path:
            return complaint(place.file, place.line, None, "", problem.what, remedy)
        return self.complaint(place.line, place.column, problem.what, remedy)

    def _compiler_said(self, errors: str) -> str:
        """Why the preprocessor failed."""
        said = errors.strip().splitlines()[0] if errors.strip() else "it gave no reason"
        return self._first_error(errors) or (
            f"{self.path}: the compiler {self.call.cc!r} could not preprocess the file: {said}"
        )

    def _first_error(self, errors: str) -> str | None:
        """The first error with a place in the compiler's own words, with the source line and our remedy."""
        for row in errors.splitlines():
            match = re.match(r"(.+?):(\d+):(?:(\d+):)? (?:fatal )?error: (.*)", row)
            if match is None:
                continue
            file, line, column, what = match[1], int(match[2]), int(match[3] or 0), match[4]
            text = self.lines.line(line) if file in (self.path, "<stdin>") else _line_of(file, line)
            missing = "No such file" in what or "file not found" in what
            remedy = (
                "Name the directory of that header with -I, or read the flags from a compile_commands.json with -p."
                if missing
                else "The compiler itself refuses this file; are flags such as -D, -I or -std missing?"
            )
            return complaint(self.path if file == "<stdin>" else file, line, column, text, what, remedy)
        return None

    # ---------------------------------------------------------------- tree

    @property
    def ast(self) -> c_ast.FileAST:
        """The tree of the translation unit; every ``coord`` is a ``parse.Place`` with the line in the user's file."""
        return self._readings[0].parsed.ast

    @cached_property
    def functions(self) -> tuple[FuncDef, ...]:
        """The functions defined in this file, in text order."""
        return tuple(function for function, _ in self._readings[0].own_functions)

    @cached_property
    def types(self) -> Types:
        """What the names and declarations mean on the user's compiler."""
        return Types(self._readings[0])

    @cached_property
    def identifiers(self) -> frozenset[str]:
        """Every word of the file and of the preprocessed unit, keywords and macro names included."""
        words = {token.spelling for token in self.tokens if token.kind == "word"}
        for token in self.tokens:
            if token.kind == "directive":
                words.update(text for kind, text in spellings(token.spelling) if kind == "word")
        for reading in self._readings:
            words.update(token.text for token in reading.unit.tokens if token.kind == "word")
            words.update(event.name for event in reading.unit.events)
        return frozenset(words)

    # ---------------------------------------------------------------- extents

    def span(self, node: Any) -> Span | None:
        """The extent of a statement inside a function of this file; None if it is not sure.

        It is unknown for what comes out of a macro, wholly or in part.  Declarators of one declaration share a span.
        """
        for reading in self._readings:
            if id(node) in reading.spans:
                return reading.spans[id(node)]
        return None

    def reference_span(self, node: Any) -> Span | None:
        """The extent of an array element or structure member, like ``a[i][j]`` or ``p->x``, as the user wrote it.

        It may be a macro call that gives just that.  None if no piece of the user's text is sure to.
        """
        for reading in self._readings:
            found = reading.reference(node)
            if found is not None:
                return found
        return None

    @cached_property
    def macro_words(self) -> dict[str, frozenset[str]]:
        """For every macro the words in its definition, all definitions of a name together."""
        words: dict[str, frozenset[str]] = {}
        for reading in self._readings:
            for event in reading.unit.events:
                if event.definition is not None:
                    found = frozenset(text for kind, text in spellings(event.definition) if kind == "word")
                    words[event.name] = words.get(event.name, frozenset()) | found
        return words

    def function_span(self, function: c_ast.FuncDef) -> Span | None:
        """From the first specifier of a function definition to its closing brace."""
        part = self._parts.get(id(function))
        return None if part is None else self._readings[0].piece(part.start, part.end)

    @cached_property
    def _parts(self) -> dict[int, External]:
        """Where each of ``functions`` stands in the parser's text, by ``id``."""
        return {id(function): part for function, part in self._readings[0].own_functions}

    def has_word(self, function: c_ast.FuncDef, word: str) -> bool:
        """True if a word stands in a function after preprocessing; tells so without parsing it."""
        part = self._parts.get(id(function))
        return part is not None and word in self._readings[0].text.text[part.start : part.end + 1]

    def header_span(self, node: Any) -> Span | None:
        """From the keyword of a ``for``, ``if``, ``while`` or ``switch`` to the parenthesis that closes its header."""
        known = self._known(node)
        if known is None or known[1].kind not in ("for", "if", "while", "switch"):
            return None
        reading, shape = known
        last = shape.marks[-1] if shape.kind != "if" else shape.marks[2]
        return self._between(reading.plain(shape.start), reading.plain(last))

    def condition_span(self, node: Any) -> Span | None:
        """The condition of an ``if``, ``while``, ``do`` or ``switch``, without its parentheses."""
        known = self._known(node)
        if known is None or known[1].kind not in ("if", "while", "switch", "do"):
            return None
        reading, shape = known
        opening = shape.marks[2] if shape.kind == "do" else shape.marks[1]
        return self._part(reading, opening, shape.marks[3] if shape.kind == "do" else shape.marks[2])

    def for_parts(self, node: Any) -> tuple[Span, Span, Span] | None:
        """The three parts of the header of a ``for``; an absent one is an empty span.  None if it has no span."""
        known = self._known(node)
        if known is None or known[1].kind != "for":
            return None
        reading, shape = known
        _, opening, first, second, closing = shape.marks
        return (
            self._part(reading, opening, first),
            self._part(reading, first, second),
            self._part(reading, second, closing),
        )

    def body_span(self, node: Any) -> Span | None:
        """The statement that a ``for``, ``while`` or ``do`` repeats; the first branch of an ``if``."""
        inner = node.iftrue if isinstance(node, c_ast.If) else getattr(node, "stmt", None)
        return None if inner is None else self.span(inner)

    def _known(self, node: Any) -> tuple[Reading, Any] | None:
        for reading in self._readings:
            if reading.spans.get(id(node)) is not None:
                return reading, reading.shapes[id(node)][1]
        return None

    def _part(self, reading: Reading, before: int, after: int) -> Span:
        """What stands between two tokens that are the user's own, blanks and comments at the ends left out."""
        left, right = reading.plain(before), reading.plain(after)
        assert left is not None and right is not None
        tokens = [token for token in self.tokens_in(left.end, right.start) if token.kind not in SKIPPED]
        if not tokens:
            return self.make_span(left.end, left.end)
        return self.make_span(tokens[0].start, tokens[-1].end)

    def _between(self, first: Token | None, last: Token | None) -> Span | None:
        return None if first is None or last is None else self.make_span(first.start, last.end)

    def make_span(self, start: int, end: int) -> Span:
        """The span of two offsets."""
        return Span(start, end, *self.at(start))

    def tokens_in(self, start: int, end: int) -> Sequence[Token]:
        """The tokens that lie in ``text[start:end]``."""
        first = bisect_left(self._starts, start)
        return self.tokens[first : bisect_left(self._starts, end, first)]

    @cached_property
    def _starts(self) -> list[int]:
        return [token.start for token in self.tokens]

    @cached_property
    def _directives(self) -> tuple[Token, ...]:
        """Directives, ``_Pragma`` and macro calls that give one, in text order."""
        found = [token for token in self.tokens if token.kind == "directive"]
        alignment = self._reading.alignment
        found.extend(alignment.live[origin.first] for origin in alignment.origins if origin.pragma)
        return tuple(sorted(found, key=lambda token: token.start))

    def directives_in(self, span: Span) -> tuple[Token, ...]:
        """The directives inside a span, also those of branches that are not active, and ``_Pragma``s."""
        return tuple(token for token in self._directives if span.start <= token.start < span.end)

    def directives_before(self, span: Span) -> tuple[Token, ...]:
        """The directives and ``_Pragma``s that stand between the last C token before a span and the span."""
        solid = self._solid_ends
        position = bisect_right(solid, span.start) - 1
        start = solid[position] if position >= 0 else 0
        return tuple(token for token in self._directives if start <= token.start < span.start)

    @cached_property
    def _solid_ends(self) -> list[int]:
        """Ends of the tokens that give C."""
        alignment = self._reading.alignment
        silent = {n for o in alignment.origins if o.pfirst == o.pstop for n in range(o.first, o.stop)}
        return [token.end for number, token in enumerate(alignment.live) if number not in silent]

    # ---------------------------------------------------------------- text

    def slice(self, span: Span) -> str:
        """The user's text of a span."""
        return self.text[span.start : span.end]

    def at(self, offset: int) -> tuple[int, int]:
        """Line and column of an offset, from 1."""
        return self.lines.at(offset)

    def line_text(self, line: int) -> str:
        """A line without its end; empty if there is none of that number."""
        return self.lines.line(line)

    def complaint(self, line: int, column: int | None, what: str, remedy: str) -> str:
        """A message about a place in this file: place, source line, caret, and what to do."""
        return complaint(self.path, line, column, self.lines.line(line), what, remedy)

    def encode(self, text: str) -> bytes:
        """The bytes of a text in the file's encoding; ``encode(source.text)`` are the file's bytes."""
        return text.encode(self.encoding, "backslashreplace")


def _line_of(path: str, line: int) -> str:
    """A line of another file; empty if it cannot be read."""
    try:
        with open(path, "rb") as file:
            return Lines(decoded(file.read())[0]).line(line)
    except (OSError, ValueError):
        return ""
