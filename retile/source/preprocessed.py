"""The preprocessor's output, read: tokens with their places, and the macros in the order in which they come and go.

``cc -E -dD`` writes line markers ``# line "file" flags`` (flag 1: a file is entered, 2: returned to), keeps
``#define`` and ``#undef`` and resolves everything else (GCC manual, "Preprocessor Output" and ``-dD``; clang follows).
"""

from __future__ import annotations

import re
from typing import NamedTuple

from ..values import dataclass
from ..model import RetileError
from .lex import spellings


class PToken(NamedTuple):
    """A token of the preprocessed text."""

    kind: str
    text: str
    line: int  # of the file it comes from
    file: int  # index into Unit.files; 0 is the user's file


class MacroEvent(NamedTuple):
    """A macro is defined (``definition``: all after its name) or undefined (None)."""

    line: int  # of the user's file at or before which it holds: 0 for those that hold from the start
    name: str
    definition: str | None


@dataclass(frozen=True)
class Unit:
    """A preprocessed translation unit."""

    tokens: tuple[PToken, ...]
    events: tuple[MacroEvent, ...]
    files: tuple[str, ...]  # names of all files; the first is the user's
    system: frozenset[int]  # those that the compiler calls system headers
    packs: bool  # a ``#pragma pack`` stands somewhere


MOST_TOKENS = 700_000  # of a unit: some ten megabytes of C

_MARKER = re.compile(r'#(?: |line )\s*(\d+) "((?:[^"\\]|\\.)*)"((?: \d)*)')
_MACRO = re.compile(r"#\s*(define|undef) ((?:[^\W\d]|\$)[\w$]*)(.*)")
_ESCAPE = re.compile(r"\\([0-7]{1,3}|.)")


def read_preprocessed(output: str, main: str) -> Unit:
    """Read what the preprocessor wrote; ``main`` is the name that it was given for the user's file."""
    return _Reader(main).read(output)


class _Reader:
    def __init__(self, main: str) -> None:
        self.files = {main: 0}
        self.system: set[int] = set()
        self.depth = 0
        self.file, self.line = 0, 0
        self.started = False  # the user's file has begun
        self.packs = False
        self.tokens: list[PToken] = []
        self.events: list[MacroEvent] = []
        self.included: list[
            tuple[str, str | None]
        ] = []  # events of headers, until it is known which line included them

    def read(self, output: str) -> Unit:
        for row in output.split("\n"):
            if row.startswith("#"):
                self._directive(row)
            else:
                file = self.file if self.depth == 0 or self.file != 0 else 1
                for kind, text in spellings(row):
                    self.tokens.append(PToken(kind, text, self.line, file))
                if len(self.tokens) > MOST_TOKENS:
                    raise RetileError(f"{next(iter(self.files))}: after preprocessing these are more than "
                                      f"{MOST_TOKENS} tokens, more than retile reads")
                self.line += 1
        self._settle(self.line)
        return Unit(tuple(self.tokens), tuple(self.events), tuple(self.files), frozenset(self.system), self.packs)

    def _directive(self, row: str) -> None:
        if not row.startswith("#define") and (marker := _MARKER.match(row)):
            self._marker(int(marker[1]), _unescape(marker[2]), marker[3].split())
            return
        if macro := _MACRO.match(row):
            definition = macro[3] if macro[1] == "define" else None
            if self.depth == 0 and self.file == 0:
                self._settle(self.line - 1)
                self.events.append(MacroEvent(self.line, macro[2], definition))
            else:
                self.included.append((macro[2], definition))
        elif row.startswith("#pragma pack"):
            self.packs = True
        self.line += 1

    def _marker(self, line: int, name: str, flags: list[str]) -> None:
        if "1" in flags:
            self.depth += 1
        elif "2" in flags:
            self.depth = max(0, self.depth - 1)
        self.file = self.files.setdefault(name, len(self.files))
        self.line = line
        if "3" in flags and "1" in flags:  # without 1 it marks what a macro of a system header gave
            self.system.add(self.file)
        if self.file == 0 and self.depth == 0:
            self._settle(line - 1 if self.started else 0)
            self.started = line > 0

    def _settle(self, line: int) -> None:
        """All that the headers said so far holds after this line of the user's file."""
        self.events.extend(MacroEvent(line, name, definition) for name, definition in self.included)
        self.included.clear()


def _unescape(name: str) -> str:
    """The file name of a line marker, where bytes may be written in octal."""
    if "\\" not in name:
        return name
    data = bytearray()
    position = 0
    for match in _ESCAPE.finditer(name):
        data += name[position : match.start()].encode("utf-8", "replace")
        data += bytes([int(match[1], 8) & 255]) if match[1][0] in "01234567" else match[1].encode("utf-8", "replace")
        position = match.end()
    data += name[position:].encode("utf-8", "replace")
    return data.decode("utf-8", "replace")
