"""Tokens of C text with exact extents: every character of the text belongs to exactly one token.

A lexer of preprocessing tokens (ISO/IEC 9899:2018, 6.4) that also keeps what a compiler drops in translation phases
1 to
4: blanks, comments and whole directives.  A backslash before a line end joins two lines (phase 2) wherever it stands,
also inside a word; such a token keeps its original text, and ``spelling`` is the text without the joints.
"""

from __future__ import annotations

import re
from bisect import bisect_right
from collections.abc import Iterator
from typing import NamedTuple

_JOINT = re.compile(r"\\[ \t\f\v]*\r?\n")
_TRAILING_JOINTS = re.compile(r"(?:\\[ \t\f\v]*\r?\n)*\Z")


class Token(NamedTuple):
    """A piece of C text: ``text[start:end]``."""

    kind: str  # word, number, string, char, punct, comment, blank, directive, other
    text: str
    start: int  # offset in the file's text
    end: int
    line: int  # of its first character, from 1
    column: int

    @property
    def spelling(self) -> str:
        """The text without line joints."""
        return _JOINT.sub("", self.text) if "\\" in self.text else self.text

    @property
    def last_line(self) -> int:
        """The line of its last character."""
        return self.line + self.text.count("\n")


SKIPPED = frozenset({"comment", "blank", "directive"})

_MASTER = re.compile(
    r"""
    (?P<blank>[ \t\r\n\f\v\0\ufeff]+)
  | (?P<comment>/\*(?:.*?\*/|.*)|//[^\n]*)
  | (?P<string>(?:u8|[uUL])?"(?:[^"\\\n]|\\.)*+")
  | (?P<char>(?:u8|[uUL])?'(?:[^'\\\n]|\\.)*+')
  | (?P<word>(?:[^\W\d]|\$)(?:\w|\$)*)
  | (?P<number>\.?[0-9](?:[eEpP][+-]|[\w.]|'(?=\w))*+)
  | (?P<punct>%:%:|<<=|>>=|\.\.\.|->|\+\+|--|<<|>>|<=|>=|==|!=|&&|\|\||[-+*/%&|^]=|\#\#|<:|:>|<%|%>|%:
      |[-+*/%&|^~!<>=?:;,.(){}\[\]\#])
  | (?P<other>.)
    """,
    re.VERBOSE | re.DOTALL,
)

# A directive runs to the end of its line; a comment in it may span lines.
_DIRECTIVE = re.compile(
    r"""(?:/\*(?:.*?\*/|.*) | //[^\n]* | "(?:[^"\\\n]|\\.)*" | '(?:[^'\\\n]|\\.)*' | [^\n/"']+ | [/"'])*+""",
    re.VERBOSE | re.DOTALL,
)


class Lines:
    """Offsets to lines and columns and back."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.starts = [0, *(match.end() for match in re.finditer("\n", text))]

    def at(self, offset: int) -> tuple[int, int]:
        """Line and column of an offset, both from 1."""
        line = bisect_right(self.starts, offset)
        return line, offset - self.starts[line - 1] + 1

    def line(self, number: int) -> str:
        """The text of a line without its line end; empty if there is no such line."""
        if not 1 <= number <= len(self.starts):
            return ""
        start = self.starts[number - 1]
        end = self.starts[number] if number < len(self.starts) else len(self.text)
        return self.text[start:end].rstrip("\r\n")


def spellings(line: str) -> Iterator[tuple[str, str]]:
    """Kind and spelling of the tokens of one preprocessed line or macro body, blanks left out."""
    for match in _MASTER.finditer(line):
        kind = match.lastgroup or "other"
        if kind != "blank" and kind != "comment":
            yield kind, match.group()


def tokenize(text: str, lines: Lines | None = None) -> tuple[Token, ...]:
    """All tokens of a text; their texts joined give the text again.  Never fails: stray characters are ``other``."""
    lines = lines or Lines(text)
    joined, starts, shifts = _without_joints(text)
    if not shifts:
        return _finish(text, _raw_tokens(text), lines)
    moved: list[tuple[str, int, int]] = []
    if starts[0] == 0:
        moved.append(("blank", 0, shifts[_last_at(0, starts)]))
    for kind, start, end in _raw_tokens(joined):
        start, end = _origin(start, starts, shifts), _origin(end, starts, shifts)
        stop = end - len(_TRAILING_JOINTS.search(text[start:end]).group())  # type: ignore[union-attr]
        moved.append((kind, start, stop))
        if stop < end:
            moved.append(("blank", stop, end))
    return _finish(text, moved, lines)


def _without_joints(text: str) -> tuple[str, list[int], list[int]]:
    """The text without line joints; offsets in it from which on the originals lie further on, and how far."""
    pieces, starts, shifts = [], [], []
    position = shift = length = 0
    if "\\" in text:
        for match in _JOINT.finditer(text):
            pieces.append(text[position : match.start()])
            length += match.start() - position
            shift += match.end() - match.start()
            starts.append(length)
            shifts.append(shift)
            position = match.end()
    pieces.append(text[position:])
    return "".join(pieces), starts, shifts


def _origin(offset: int, starts: list[int], shifts: list[int]) -> int:
    index = _last_at(offset, starts)
    return offset + (shifts[index] if index >= 0 else 0)


def _last_at(offset: int, starts: list[int]) -> int:
    return bisect_right(starts, offset) - 1


def _raw_tokens(text: str) -> list[tuple[str, int, int]]:
    found: list[tuple[str, int, int]] = []
    position, at_line_start = 0, True
    match_at, end = _MASTER.match, len(text)
    while position < end:
        match = match_at(text, position)
        assert match is not None
        kind, stop = match.lastgroup or "other", match.end()
        if kind == "blank":
            at_line_start = at_line_start or "\n" in match.group()
        elif kind == "punct" and at_line_start and match.group() in ("#", "%:"):
            directive = _DIRECTIVE.match(text, position)
            assert directive is not None
            kind, stop = "directive", position + len(directive.group().rstrip())
        elif kind != "comment":
            at_line_start = False
        found.append((kind, position, stop))
        position = stop
    return found


def _finish(text: str, raw: list[tuple[str, int, int]], lines: Lines) -> tuple[Token, ...]:
    tokens = []
    starts, line = lines.starts, 1
    for kind, start, end in raw:
        while line < len(starts) and starts[line] <= start:
            line += 1
        tokens.append(Token(kind, text[start:end], start, end, line, start - starts[line - 1] + 1))
    return tuple(tokens)
