"""From C text to a program that the judge can run, by the front end and nothing behind it."""

from __future__ import annotations

import os
import re
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import TYPE_CHECKING

from .kinds import Unsupported

if TYPE_CHECKING:
    from ..source import Source

_PARALLEL = re.compile(r"^[ \t]*#[ \t]*pragma[ \t]+omp[ \t]+(?=[^\n]*\bfor\b)(?![^\n]*\b(?:reduction|ordered)\b)")
_PRAGMA = re.compile(r"^[ \t]*(?:#[ \t]*pragma\b.*)?$")
_FOR = re.compile(r"^[ \t{]*for\b")


def check_machine(source: Source) -> None:
    """Unsupported unless int has 32 bits and long and pointers 64: what the judge computes with."""
    arithmetic = source.types.arithmetic
    widths = [kind.bits if kind is not None else 0 for kind in (arithmetic.named([word]) for word in ("int", "long"))]
    if widths != [32, 64]:
        raise Unsupported("a machine on which int has not 32 or long not 64 bits")


@contextmanager
def reread(source: Source, text: str) -> Iterator[Source]:
    """Another text in place of an open file, read as if it stood there."""
    from ..source import open_source

    folder = os.path.dirname(os.path.abspath(source.path))
    with tempfile.TemporaryDirectory(prefix="retile-judge-") as scratch:
        path = os.path.join(scratch, "variant.c")
        with open(path, "wb") as file:
            file.write(source.encode(text))
        flags = (*source.call.flags, "-iquote", folder)
        yield open_source(path, replace(source.call, flags=flags))


def parallel_loops(text: str) -> frozenset[int]:
    """Lines of the ``for`` loops whose iterations threads share, by the pragma before them.

    Loops with reductions are left out: their result depends on the order.
    """
    found: set[int] = set()
    shared = False
    for number, row in enumerate(text.split("\n"), 1):
        if _PARALLEL.match(row):
            shared = True
        elif shared and not _PRAGMA.match(row):
            if _FOR.match(row):
                found.add(number)
            shared = False
    return frozenset(found)
