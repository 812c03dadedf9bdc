"""A variant as a patch, in the unified format of the POSIX ``diff -u`` (IEEE Std 1003.1, ``diff``)."""

from __future__ import annotations

import difflib
import os
from collections.abc import Iterator
from pathlib import Path


def unified(path: str, before: str, after: str) -> str:
    """The patch from one text of a file to another; empty if they are the same.

    ``git apply`` and ``patch -p1`` take it, from the top of the git repository that holds the file, else from the
    current directory if the file lies in it, else from the file's own.
    """
    name = _name(path)
    rows = difflib.unified_diff(_lines(before), _lines(after), f"a/{name}", f"b/{name}", n=3)
    return "".join(_ended(rows))


def _ended(rows: Iterator[str]) -> Iterator[str]:
    for number, row in enumerate(rows):
        if number < 2 and " " in row[4:]:
            row = row.rstrip("\n") + "\t\n"  # ends a name with blanks in it
        yield row if row.endswith("\n") else row + "\n\\ No newline at end of file\n"


def _lines(text: str) -> list[str]:
    """Lines with their ends; only a line feed ends a line, whatever else Unicode takes for one."""
    lines = [line + "\n" for line in text.split("\n")]
    lines[-1] = lines[-1][:-1]
    return lines if lines[-1] else lines[:-1]


def _name(path: str) -> str:
    file = Path(os.path.realpath(path))
    top = next((folder for folder in file.parents if (folder / ".git").exists()), None)
    base = top or Path(os.path.realpath("."))
    try:
        return file.relative_to(base).as_posix()
    except ValueError:
        return file.name
