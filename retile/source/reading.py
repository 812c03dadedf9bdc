"""One reading of a file: preprocessed, parsed, and put beside the user's text."""

from __future__ import annotations

import os
from functools import cached_property
from typing import Any

from pycparser import c_ast

from ..model import Span
from .align import Alignment, Origin, align
from .compiler import Preprocessing
from .dialect import ParserText, for_parser
from .lex import Token
from .macros import Macro
from .match import shapes_of
from .parse import FuncDef, Parsed, Place, parse_function, parse_unit
from .preprocessed import Unit, read_preprocessed
from .structure import External, Malformed, Shape, compound


class CompilerRefused(Exception):
    """The preprocessor failed; the text is what it said."""


class Reading:
    """The preprocessed and parsed text of one file, with or without our own headers.

    Raises CompilerRefused or SyntaxProblem when made; ``body`` may raise SyntaxProblem.
    """

    def __init__(self, path: str, tokens: tuple[Token, ...], preprocessing: Preprocessing, stubs: bool, body: Any):
        self.path, self.tokens, self.stubs = path, tokens, stubs
        self.unit = _preprocessed_unit(preprocessing)
        self.macros = _predefined(self.unit)
        version = self.macros.get("__STDC_VERSION__", Macro("", " 0")).definition.strip().rstrip("L")
        self.c23 = version.isdigit() and int(version) > 201710
        self.text: ParserText = for_parser(self.unit, c23=self.c23)
        self.parsed: Parsed = parse_unit(self.text, self.place, body, self._is_wanted)
        self.spans: dict[int, Span | None] = {}
        self.shapes: dict[int, tuple[Any, Shape]] = {}
        self.bodies: list[Any] = []  # keeps the nodes of ``spans`` and ``shapes`` alive

    @cached_property
    def alignment(self) -> Alignment:
        """The two texts side by side."""
        return align(self.tokens, self.unit)

    def _is_wanted(self, part: External) -> bool:
        """False for a function of a system header that the user's files do not mention."""
        words, tokens, first, system = self.text.text, self.unit.tokens, self.text.first, self.unit.system
        if (
            any(tokens[first[place]].file not in system for place in (part.start, part.end))
            or words[part.start] == "typedef"
        ):
            return True
        for index in range(part.start, part.end + 1):
            if words[index] == "(":
                return words[index - 1] in self._user_words or words[index + 1] == "*"
            if words[index] in ("{", "=", "[", ","):
                return True
        return True

    @cached_property
    def _user_words(self) -> frozenset[str]:
        system = self.unit.system
        return frozenset(token.text for token in self.unit.tokens if token.kind == "word" and token.file not in system)

    def is_own(self, part: External) -> bool:
        """True if the function's ``{`` comes from the user's file."""
        return part.brace is not None and self.unit.tokens[self.text.first[part.brace]].file == 0

    @cached_property
    def own_functions(self) -> tuple[tuple[FuncDef, External], ...]:
        """The functions defined in the user's file."""
        return tuple((function, part) for function, part in self.parsed.functions if self.is_own(part))

    @cached_property
    def typedef_names(self) -> frozenset[str]:
        """All typedef names at file scope."""
        return frozenset(node.name for node in self.parsed.ast.ext if isinstance(node, c_ast.Typedef))

    def body(self, part: External) -> c_ast.Compound:
        """The body of a function, parsed now."""
        used = set(self.text.text[part.start : part.end + 1])
        names = sorted((used & self.typedef_names) | (used & self.text.typeof.keys()))
        definition = parse_function(self.text, part, names, self.place)
        self.bodies.append(definition)
        if self.is_own(part):
            self._match(definition.body, part)
        return definition.body

    def _match(self, body: c_ast.Compound, part: External) -> None:
        assert part.brace is not None
        try:
            shape = compound(self.text.text, part.brace)
        except (Malformed, RecursionError):
            return
        try:
            found = shapes_of(body, shape)
        except RecursionError:
            return
        self.shapes.update(found)
        for key, (_, piece) in found.items():
            marked = all(self.plain(mark) is not None for mark in piece.marks)
            self.spans[key] = self.piece(piece.start, piece.end) if marked else None

    # ---------------------------------------------------------------- places

    def place(self, index: int) -> Place:
        """Where a token of the parser's text comes from."""
        token = self.unit.tokens[self.text.first[index]]
        if token.file != 0:
            return Place(self.unit.files[token.file], token.line, None, None, index)
        origin = self._origin(self.text.first[index])
        if origin is None:
            return Place(self.path, token.line, None, None, index)
        first = self.alignment.live[origin.first]
        return Place(self.path, first.line, first.column, first.start, index)

    def _origin(self, pindex: int) -> Origin | None:
        number = self.alignment.of.get(pindex)
        return None if number is None else self.alignment.origins[number]

    def plain(self, index: int) -> Token | None:
        """The user's token that a token of the parser's text is; None if it comes out of a macro or a header."""
        origin = self._origin(self.text.first[index])
        return self.alignment.live[origin.first] if origin is not None and origin.plain else None

    def reference(self, node: Any) -> Span | None:
        """The user's text of ``a[i].b``; None if it is not sure, or not an expression of this reading."""
        name, depth = _name_of(node)
        words = self.text.text
        if not isinstance(name, c_ast.ID) or not isinstance(name.coord, Place) or \
                not (0 < name.coord.number < len(words) and words[name.coord.number] == name.name):
            return None
        start = end = name.coord.number
        while depth or self.piece(start, end) is None:
            if depth and words[end + 1] == "[":
                end, depth = self._closing(end + 1), depth - 1
            elif depth and words[end + 1] in (".", "->"):
                end, depth = end + 2, depth - 1
            elif words[start - 1] == "(" and words[end + 1] == ")" and not (words[start - 2][-1:].isalnum() or
                                                                           words[start - 2] in ("]", ")", "_")):
                start, end = start - 1, end + 1
            else:
                return None
        return self.piece(start, end)

    def _closing(self, opening: int) -> int:
        """The bracket that closes this one."""
        depth, at = 1, opening
        while depth:
            at += 1
            depth += {"[": 1, "]": -1}.get(self.text.text[at], 0)
        return at

    def piece(self, start: int, end: int) -> Span | None:
        """The user's text of the parser's tokens ``start`` to ``end``, both included.

        None unless it consists of whole tokens and whole macro calls of the user's file.
        """
        # Tokens that the parser did not get (``__extension__``, attributes) belong to what follows them.
        first = self.text.last[start - 1] + 1 if start > 0 else self.text.first[start]
        last = self.text.last[end]
        alignment = self.alignment
        number, stop_number = alignment.of.get(first), alignment.of.get(last)
        if number is None or stop_number is None or number > stop_number:
            return None
        origins = alignment.origins[number : stop_number + 1]
        if origins[0].pfirst != first or origins[-1].pstop != last + 1:
            return None
        for before, after in zip(origins, origins[1:]):
            if before.stop != after.first or before.pstop != after.pfirst:
                return None
        opening, ending = alignment.live[origins[0].first], alignment.live[origins[-1].stop - 1]
        return Span(opening.start, ending.end, opening.line, opening.column)


def _name_of(node: Any) -> tuple[Any, int]:
    """The name at the start of ``a[i].b``, and how many subscripts and members follow it."""
    depth = 0
    while isinstance(node, c_ast.ArrayRef | c_ast.StructRef):
        node, depth = node.name, depth + 1
    return node, depth


def _preprocessed_unit(preprocessing: Preprocessing) -> Unit:
    answer = preprocessing.answer()
    if answer.status != 0:
        raise CompilerRefused(answer.errors)
    return read_preprocessed(answer.output, os.fsencode(answer.name).decode("utf-8", "replace"))


def _predefined(unit: Unit) -> dict[str, Macro]:
    """The macros that hold when the user's file begins."""
    macros: dict[str, Macro] = {}
    for event in unit.events:
        if event.line > 0:
            break
        if event.definition is not None:
            macros[event.name] = Macro(event.name, event.definition)
    return macros
