"""Opening a file: the compiler preprocesses it while the rest of this room is being loaded."""

from __future__ import annotations

import os
import re
from typing import TYPE_CHECKING

from ..model import RetileError
from .compiler import CompilerCall, Preprocessing, preprocess

if TYPE_CHECKING:
    from .source import Source

_LINE_DIRECTIVE = re.compile(r"^([ \t\f\v]*)#[ \t]*(?:line\b|[0-9]).*$", re.MULTILINE)


def open_source(path: str, call: CompilerCall = CompilerCall()) -> Source:
    """Read, preprocess and parse a C file.

    Raises RetileError if the file cannot be read, the compiler cannot be started or refuses it, or the text is not C.
    Bodies of functions are parsed on first use, so an error in one shows only there.
    """
    path = os.fspath(path)
    text, encoding = decoded(_bytes_of(path))
    preprocessing = begin(path, text, call, stubs=True)
    try:
        from .source import Source

        return Source(path, text, encoding, call, preprocessing)
    finally:
        preprocessing.stop()


def begin(path: str, text: str, call: CompilerCall, *, stubs: bool) -> Preprocessing:
    """Start the preprocessor on a file whose text is known, with or without our own headers."""
    data = None
    if _LINE_DIRECTIVE.search(text) or "\n" in path:
        # Lines that claim another place, and names of several lines, would hide where tokens come from.
        data = _LINE_DIRECTIVE.sub("", text).encode("utf-8", "surrogateescape")
    return preprocess(call, path, stubs=stubs, text=data)


def _bytes_of(path: str) -> bytes:
    try:
        if os.path.exists(path) and not os.path.isfile(path):
            kind = "a directory" if os.path.isdir(path) else "not a regular file"
            raise RetileError(f"{path}: this is {kind}; name a C file")
        with open(path, "rb") as file:
            return file.read()
    except FileNotFoundError:
        raise RetileError(f"{path}: there is no such file") from None
    except ValueError:
        raise RetileError(f"{path!r}: this cannot be the name of a file") from None
    except OSError as error:
        raise RetileError(f"{path}: the file cannot be read: {error.strerror}") from None


def decoded(data: bytes) -> tuple[str, str]:
    """The text and the encoding that gives the same bytes back: Latin-1 takes whatever is not UTF-8."""
    try:
        return data.decode("utf-8"), "utf-8"
    except UnicodeDecodeError:
        return data.decode("latin-1"), "latin-1"
