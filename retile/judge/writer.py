"""Lines of generated Python, with blocks and fresh names; and the operands that expressions are made of."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

from .kinds import Kind

_ATOM = re.compile(r"-?\w+")
_STRANGE = re.compile(r"[^A-Za-z0-9_]")


def identifier(name: str) -> str:
    """A C name as one of Python, whatever letters C compilers let it have; different ones stay different."""
    return _STRANGE.sub(lambda match: f"_{ord(match[0])}_", name)


@dataclass(frozen=True)
class Operand:
    """A value in the generated code: text that gives it, without effects and valid where it was made.

    ``held``: "plain", an integer that stands for itself; "data", a tag; "pointer", where ``text`` is the object and
    ``offset`` the bytes from its beginning; "none" for what has no value.
    """

    kind: Kind
    held: str
    text: str
    offset: str = ""


@dataclass(frozen=True)
class Place:
    """An lvalue in the generated code: object, bytes, and a subscript in units of the type."""

    kind: Kind
    object: str
    offset: str
    index: str = ""  # in units of ``unit``
    unit: str = ""
    name: str = ""  # for messages
    private: bool = False  # surely memory of the function's own


class Writer:
    """Collects the lines of one function."""

    def __init__(self) -> None:
        self.lines: list[str] = []
        self.depth = 1
        self._names = 0

    def emit(self, line: str) -> None:
        """Add a line."""
        self.lines.append(f"{' ' * self.depth}{line}")

    def fresh(self, stem: str = "t") -> str:
        """A name that nothing else has."""
        self._names += 1
        return f"{identifier(stem)}{self._names}"

    def atom(self, text: str) -> str:
        """The text if it is a name or a number, else a variable that holds it."""
        if _ATOM.fullmatch(text):
            return text
        name = self.fresh()
        self.emit(f"{name} = {text}")
        return name

    @contextmanager
    def block(self, head: str) -> Iterator[None]:
        """The lines of a compound statement, at least one."""
        self.emit(head)
        self.depth += 1
        count = len(self.lines)
        yield
        if len(self.lines) == count:
            self.emit("pass")
        self.depth -= 1

    @contextmanager
    def apart(self) -> Iterator[list[str]]:
        """Lines that are kept apart; ``insert`` puts them in where they belong."""
        kept, self.lines = self.lines, []
        inner = self.lines
        yield inner
        self.lines = kept

    def insert(self, lines: list[str]) -> None:
        """Add lines that were written at the same depth."""
        self.lines += lines


def as_integer(text: str) -> int | None:
    """The number that a text is; None if it is no number."""
    try:
        return int(text)
    except ValueError:
        return None


def sum_of(a: str, b: str) -> str:
    """The text of a sum."""
    if a == "0":
        return b
    if b == "0":
        return a
    left, right = as_integer(a), as_integer(b)
    return str(left + right) if left is not None and right is not None else f"{a} + {b}"
