"""The compiler call that a user's options, or a compilation database, stand for.

The database is the file ``compile_commands.json`` that build systems write: a list of entries with ``directory``,
``file`` and either ``arguments`` or ``command``.
"""

from __future__ import annotations

import json
import os
import shlex
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..model import RetileError

if TYPE_CHECKING:
    from ..source import CompilerCall

# Flags that decide what the preprocessor and the parser see: joined or followed by a value, a folder, or alone.
_VALUED = ("-D", "-U", "-include")
_FOLDERS = ("-I", "-isystem", "-iquote", "-idirafter")
_PREFIXES = ("-std=", "-m", "-ansi", "-nostdinc", "-fms-", "-fshort-", "-funsigned-char", "-fsigned-char")


@dataclass(frozen=True)
class CompilerOptions:
    """What the user said about compiling."""

    cc: str | None
    flags: tuple[str, ...]  # in the order that decides: definitions first, -U wins over -D as POSIX c99 has it
    database: str | None  # directory of a compile_commands.json

    def call_for(self, file: str) -> CompilerCall:
        """The compiler call for a file: the database's flags first, then the user's own.

        Raises RetileError if the database cannot be read or has no entry for the file.
        """
        from ..source import CompilerCall

        if self.database is None:
            return CompilerCall(self.cc or "cc", self.flags)
        compiler, flags = flags_from_database(Path(self.database), file)
        return CompilerCall(self.cc or compiler, (*flags, *self.flags))


def flags_from_database(directory: Path, file: str) -> tuple[str, tuple[str, ...]]:
    """The compiler and the flags that matter to retile, for a file that a compilation database names."""
    path = directory / "compile_commands.json"
    wanted = os.path.realpath(file)
    for entry in _entries(path):
        base = Path(directory, entry["directory"])
        if os.path.realpath(base / entry["file"]) == wanted:
            words = entry["arguments"] if "arguments" in entry else shlex.split(entry["command"])
            if words:
                return words[0], _kept(words[1:], base)
    raise RetileError(f"{path}: there is no entry for {file}.\n"
                      "Build it once more with the database switched on, or give -D, -I, -U and -std instead of -p.")


def _entries(path: Path) -> list[dict[str, Any]]:
    try:
        entries = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise RetileError(f"{path}: cannot be read: {error.strerror}.\n"
                          "-p takes the directory that holds a compile_commands.json.") from error
    except ValueError as error:
        raise RetileError(f"{path}: is not JSON: {error}.") from error
    if not isinstance(entries, list) or not all(_is_entry(entry) for entry in entries):
        raise RetileError(f"{path}: is not a list of entries with directory, file, and command or arguments.")
    return entries


def _is_entry(entry: object) -> bool:
    if not isinstance(entry, dict) or not all(isinstance(entry.get(key), str) for key in ("directory", "file")):
        return False
    arguments = entry.get("arguments")
    listed = isinstance(arguments, list) and all(isinstance(word, str) for word in arguments)
    return listed or ("arguments" not in entry and isinstance(entry.get("command"), str))


def _kept(words: Sequence[str], base: Path) -> tuple[str, ...]:
    kept: list[str] = []
    left = iter(words)
    for word in left:
        flag = next((flag for flag in sorted((*_VALUED, *_FOLDERS), key=len, reverse=True) if word.startswith(flag)), None)
        if flag is not None:
            value = word[len(flag):] or next(left, "")
            kept += [flag, str(base / value)] if flag in _FOLDERS else [flag, _included(flag, value, base)]
        elif word.startswith(_PREFIXES):
            kept.append(word)
    return tuple(kept)


def _included(flag: str, value: str, base: Path) -> str:
    beside = base / value
    return str(beside) if flag == "-include" and beside.exists() else value
