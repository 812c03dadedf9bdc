"""The streams of a command: answers to standard output, all else to standard error."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable
from typing import IO, Any

from ..report.table import Look


def look_of(stream: IO[str]) -> Look:
    """How lines should look on a stream: width and colour of a terminal, plain and unbroken elsewhere.

    Honours the conventions of ``COLUMNS`` (a width, also for files and pipes) and of ``NO_COLOR`` (any value that is
    not empty turns colour off).
    """
    if not stream.isatty():
        columns = os.environ.get("COLUMNS", "")
        return Look(int(columns) if columns.isdecimal() and int(columns) > 0 else None)
    import shutil

    colour = not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
    return Look(shutil.get_terminal_size().columns, colour)


def print_lines(lines: Iterable[str]) -> None:
    """Lines of text to standard output."""
    write_bytes("".join(f"{line}\n" for line in lines).encode(sys.stdout.encoding or "utf-8", "backslashreplace"))


def print_document(document: dict[str, Any]) -> None:
    """One JSON document to standard output."""
    import json

    write_bytes((json.dumps(document, indent=2) + "\n").encode("ascii"))


class ClosedPipe(Exception):
    """Nobody reads standard output any more."""


def write_bytes(data: bytes) -> None:
    """Bytes to standard output, as they are."""
    try:
        sys.stdout.buffer.write(data)
        sys.stdout.buffer.flush()
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())  # what is left to flush at exit goes nowhere
        raise ClosedPipe from None


def say(message: str) -> None:
    """A message to standard error."""
    sys.stderr.write(message if message.endswith("\n") else message + "\n")
    sys.stderr.flush()
