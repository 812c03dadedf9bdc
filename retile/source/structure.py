"""The statements of a function body, found by their brackets, semicolons and keywords alone.

The grammar is that of statements in ISO/IEC 9899:2018, 6.8; everything that is no keyword, label or brace runs to its
semicolon.  It gives what a syntax tree does not: where each statement ends.
"""

from __future__ import annotations

from collections.abc import Sequence

from ..values import dataclass


class Malformed(Exception):
    """The tokens are no statement; the parser proper says why."""


@dataclass(frozen=True)
class Shape:
    """A statement: tokens ``start`` to ``end``, both included."""

    kind: str  # compound, for, while, do, if, switch, label, case, simple
    start: int
    end: int
    children: tuple[Shape, ...] = ()  # inner statements in text order
    # Places of its own tokens: keyword, ``(``, ``)`` ...; for a for also both semicolons, in text order.
    marks: tuple[int, ...] = ()


@dataclass(frozen=True)
class External:
    """A declaration or function definition at file scope: tokens ``start`` to ``end``, both included."""

    start: int
    end: int
    brace: int | None  # the ``{`` of a function's body


_OPENING = {"(": ")", "[": "]", "{": "}"}
_CLOSING = frozenset(")]}")
# Words whose parentheses do not belong to a declarator.
_SPECIFIERS_WITH_GROUP = frozenset({"_Atomic", "_BitInt", "_Alignas", "sizeof", "__declspec"})


def closing(text: Sequence[str], index: int) -> int:
    """The place of the bracket that closes the one at ``index``; Malformed if they do not pair."""
    stack = []
    for place in range(index, len(text)):
        token = text[place]
        if token in _OPENING:
            stack.append(_OPENING[token])
        elif token in _CLOSING:
            if not stack or stack.pop() != token:
                raise Malformed
            if not stack:
                return place
    raise Malformed


def externals(text: Sequence[str]) -> list[External]:
    """The declarations and definitions of a translation unit; Malformed if brackets do not pair."""
    found, index = [], 0
    while index < len(text):
        external = _external(text, index)
        found.append(external)
        index = external.end + 1
    return found


def _external(text: Sequence[str], start: int) -> External:
    index = start
    parameters = False  # a declarator's ``( … )`` has been seen, and no ``=``
    old_style = False  # followed by the declarations of its parameters
    initializer = False
    while index < len(text):
        token = text[index]
        if token == "(":
            word = text[index - 1] if index > start else ""
            index = closing(text, index)
            if word not in _SPECIFIERS_WITH_GROUP and not initializer:
                parameters = True
                old_style = old_style or _is_word(text[index + 1] if index + 1 < len(text) else "")
        elif token == "[":
            index = closing(text, index)
        elif token == "{":
            end = closing(text, index)
            if parameters and not initializer and (old_style or text[index - 1] in (")", "]")):
                return External(start, end, index)
            index = end
        elif token in _CLOSING:
            raise Malformed
        elif token == "=":
            initializer = True
        elif token == ";" and not (old_style and not initializer):
            return External(start, index, None)
        index += 1
    if index == len(text) and text[start] == ";":
        return External(start, start, None)
    raise Malformed


def _is_word(token: str) -> bool:
    return bool(token) and (token[0].isalpha() or token[0] == "_")


def compound(text: Sequence[str], index: int) -> Shape:
    """The compound statement whose ``{`` stands at ``index``; Malformed if it is none."""
    return _Statements(text).statement(index)


class _Statements:
    def __init__(self, text: Sequence[str]) -> None:
        self.text = text

    def at(self, index: int) -> str:
        return self.text[index] if index < len(self.text) else ""

    def expect(self, index: int, token: str) -> int:
        if self.at(index) != token:
            raise Malformed
        return index

    def statement(self, index: int) -> Shape:
        match self.at(index):
            case "{":
                return self.block(index)
            case "for":
                return self.for_(index)
            case "while" | "switch" as kind:
                opening = self.expect(index + 1, "(")
                end = closing(self.text, opening)
                body = self.statement(end + 1)
                return Shape(kind, index, body.end, (body,), (index, opening, end))
            case "do":
                return self.do(index)
            case "if":
                return self.if_(index)
            case "case" | "default":
                return self.case(index)
            case "else" | "" | "}" | ")" | "]":
                raise Malformed
        if self.at(index + 1) == ":" and _is_word(self.at(index)):
            return self.marked("label", index, index + 1)
        return Shape("simple", index, self.semicolon(index))

    def semicolon(self, index: int) -> int:
        """The next ``;`` outside brackets."""
        while (token := self.at(index)) != ";":
            if token == "" or token in _CLOSING:
                raise Malformed
            index = closing(self.text, index) + 1 if token in _OPENING else index + 1
        return index

    def block(self, index: int) -> Shape:
        children, place = [], index + 1
        while self.at(place) != "}":
            child = self.statement(place)
            children.append(child)
            place = child.end + 1
        return Shape("compound", index, place, tuple(children), (index, place))

    def for_(self, index: int) -> Shape:
        opening = self.expect(index + 1, "(")
        end = closing(self.text, opening)
        first = self.semicolon(opening + 1)
        second = self.semicolon(first + 1)
        if second > end:
            raise Malformed
        body = self.statement(end + 1)
        return Shape("for", index, body.end, (body,), (index, opening, first, second, end))

    def do(self, index: int) -> Shape:
        body = self.statement(index + 1)
        word = self.expect(body.end + 1, "while")
        end = closing(self.text, self.expect(word + 1, "("))
        self.expect(end + 1, ";")
        return Shape("do", index, end + 1, (body,), (index, word, word + 1, end, end + 1))

    def if_(self, index: int) -> Shape:
        opening = self.expect(index + 1, "(")
        end = closing(self.text, opening)
        true = self.statement(end + 1)
        if self.at(true.end + 1) != "else":
            return Shape("if", index, true.end, (true,), (index, opening, end))
        false = self.statement(true.end + 2)
        return Shape("if", index, false.end, (true, false), (index, opening, end, true.end + 1))

    def case(self, index: int) -> Shape:
        colon, depth = index + 1, 0
        while self.at(colon) != ":" or depth:
            token = self.at(colon)
            if token in ("", ";", "{", "}"):
                raise Malformed
            depth += (token == "?") - (token == ":")
            colon += 1
        return self.marked("case", index, colon)

    def marked(self, kind: str, index: int, colon: int) -> Shape:
        """A label and its statement, which C23 lets be absent at the end of a block."""
        if self.at(colon + 1) == "}":
            return Shape(kind, index, colon, (), (index, colon))
        inner = self.statement(colon + 1)
        return Shape(kind, index, inner.end, (inner,), (index, colon))
