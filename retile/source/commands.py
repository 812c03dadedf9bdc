"""The flags of a file out of ``compile_commands.json`` (Clang documentation, "JSON Compilation Database Format")."""

from __future__ import annotations

import os
import shlex
from typing import Any

from ..model import RetileError
from .compiler import CompilerCall

# Flags that say how the text reads; with their value attached or as the next word.
_WITH_VALUE = ("-D", "-U", "-I", "-include", "-isystem", "-iquote", "-idirafter", "-imacros", "--sysroot", "-isysroot",
               "-iprefix", "-iwithprefix", "-target", "--target", "-arch")  # fmt: skip
_PATHS = frozenset({"-I", "-isystem", "-iquote", "-idirafter", "--sysroot", "-isysroot"})
_STARTS = ("-std=", "-m", "-f", "--std=", "-O", "-ansi", "-pthread", "-nostdinc", "-target=", "--target=", "--sysroot=")
_WRAPPERS = frozenset({"ccache", "sccache", "distcc", "icecc"})


def flags_from_compile_commands(directory: str, file: str) -> CompilerCall:
    """How ``file`` is compiled according to ``directory/compile_commands.json``.

    Takes the compiler and the flags that say how the text reads (-D, -I, -std and the like); paths become absolute.
    Raises RetileError if there is no such file, it cannot be read, or it has no entry for the file.
    """
    path = os.path.join(directory, "compile_commands.json")
    entries = _entries(path)
    for entry in entries:
        place = os.path.join(directory, entry["directory"])
        if _same(os.path.join(place, entry["file"]), file):
            return _call(path, entry, place)
    known = ", ".join(sorted({entry["file"] for entry in entries})[:5]) or "none"
    raise RetileError(
        f"{path}: there is no entry for {file} (it has {known}{', ...' if len(entries) > 5 else ''}); "
        "build the file once with the database switched on, or give its flags with -D, -I and -std"
    )


def _entries(path: str) -> list[dict[str, Any]]:
    import json

    try:
        with open(path, encoding="utf-8") as file:
            entries = json.load(file)
    except FileNotFoundError:
        raise RetileError(f"{path}: there is no such file; -p names the directory that holds it") from None
    except OSError as error:
        raise RetileError(f"{path}: the file cannot be read: {error.strerror}") from None
    except (ValueError, RecursionError) as error:
        raise RetileError(f"{path}: this is not JSON: {error}") from None
    if not isinstance(entries, list):
        raise RetileError(f"{path}: a list of entries was expected")
    for number, entry in enumerate(entries, 1):
        if not _is_entry(entry):
            raise RetileError(f"{path}: entry {number} lacks 'directory', 'file' or 'command', or they are no text")
    return entries


def _is_entry(entry: Any) -> bool:
    if not isinstance(entry, dict) or not all(isinstance(entry.get(key), str) for key in ("directory", "file")):
        return False
    arguments = entry.get("arguments")
    if isinstance(arguments, list):
        return bool(arguments) and all(isinstance(word, str) for word in arguments)
    return isinstance(entry.get("command"), str)


def _same(one: str, other: str) -> bool:
    return os.path.realpath(one) == os.path.realpath(other)


def _call(path: str, entry: dict[str, Any], place: str) -> CompilerCall:
    words = entry.get("arguments")
    if not isinstance(words, list):
        try:
            words = shlex.split(entry["command"])
        except ValueError as error:
            raise RetileError(f"{path}: the command for {entry['file']} cannot be read: {error}") from None
    if not words:
        raise RetileError(f"{path}: the command for {entry['file']} is empty")
    compilers = 2 if os.path.basename(words[0]) in _WRAPPERS and len(words) > 1 else 1
    compiler = words[compilers - 1]
    if os.path.sep in compiler:
        compiler = os.path.abspath(os.path.join(place, compiler))
    return CompilerCall(shlex.quote(compiler), tuple(_reading_flags(words[compilers:], place)))


def _reading_flags(words: list[str], place: str) -> list[str]:
    flags: list[str] = []
    index = 0
    while index < len(words):
        word = words[index]
        name = next((flag for flag in _WITH_VALUE if word == flag), None)
        if name is not None:
            if index + 1 < len(words):
                flags += [name, _absolute(name, words[index + 1], place)]
            index += 2
            continue
        attached = next(
            (flag for flag in ("-D", "-U", "-I", "-isystem", "-iquote", "-idirafter") if word.startswith(flag)), None
        )
        if attached is not None:
            flags.append(attached + _absolute(attached, word[len(attached) :], place))
        elif word.startswith(_STARTS) and not word.startswith(("-fsyntax-only", "-fplugin", "-MF")):
            flags.append(word)
        index += 1
    return flags


def _absolute(flag: str, value: str, place: str) -> str:
    """A path of the entry as it is from anywhere; other values as they are."""
    if flag in _PATHS and not value.startswith("="):
        return os.path.abspath(os.path.join(place, value))
    if flag in ("-include", "-imacros") and os.path.exists(os.path.join(place, value)):
        return os.path.abspath(os.path.join(place, value))
    return value
