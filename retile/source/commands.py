"""The flags of a file out of ``compile_commands.json`` (Clang documentation, "JSON Compilation Database Format")."""

from __future__ import annotations

import os
import re
import shlex
from typing import Any

from ..model import RetileError
from .compiler import CompilerCall

# Flags that say how the text reads; with their value attached or as the next word.
_WITH_VALUE = ("-D", "-U", "-I", "-include", "-isystem", "-iquote", "-idirafter", "-imacros", "--sysroot", "-isysroot",
               "-iprefix", "-iwithprefix", "-target", "--target", "-arch")  # fmt: skip
_PATHS = frozenset({"-I", "-isystem", "-iquote", "-idirafter", "--sysroot", "-isysroot"})
# Every other flag is left out: what loads plugins, names programs, reads response files, or writes files.
_WHOLE = re.compile(
    r"--?std=[\w+:]+ | -ansi | -pthread | -nostdinc | -O(?:[0-3sgz]|fast)? | -m(?!llvm)[\w=.,+-]+ | --?target=[\w.-]+"
    r"| --sysroot=.* | -f(?:no-)?(?:(?:un)?signed-(?:char|bitfields) | short-(?:enums|wchar) | pack-struct(?:=\d+)?"
    r"| wrapv | trapv | strict-(?:aliasing|overflow) | openmp(?:=\w+|-simd)? | ms-extensions | gnu89-inline | builtin"
    r"| freestanding | hosted | fast-math | math-errno | finite-math-only | associative-math | reciprocal-math"
    r"| signed-zeros | trapping-math | rounding-math | unsafe-math-optimizations | fp-contract=\w+ | fp-model=\w+"
    r"| excess-precision=\w+ | unroll-(?:all-)?loops | (?:tree-)?vectorize | omit-frame-pointer | inline(?:-functions)?"
    r"| common | PIC | PIE | pic | pie)",
    re.VERBOSE,
)
_WRAPPERS = frozenset({"ccache", "sccache", "distcc", "icecc"})
_COMPILER = re.compile(r"(?:[\w.+]+-)*(?:cc|gcc|clang|c89|c99|c17|c23|icc|icx|tcc|pcc)(?:-?\d+(?:\.\d+)*)?(?:\.exe)?")


def flags_from_compile_commands(directory: str, file: str, cc: str | None = None) -> CompilerCall:
    """How ``file`` is compiled according to ``directory/compile_commands.json``.

    Takes the compiler, unless ``cc`` names one, and the flags that say how the text reads (-D, -I, -std and the like);
    paths become absolute.  A database may come from anywhere: flags that are not known to be harmless are left out.
    Raises RetileError if there is no such file, it cannot be read, it has no entry for the file, or its compiler is not
    named like one or by a path relative to the project.
    """
    path = os.path.join(directory, "compile_commands.json")
    entries = _entries(path)
    for entry in entries:
        place = os.path.join(directory, entry["directory"])
        if _same(os.path.join(place, entry["file"]), file):
            return _call(path, entry, place, cc)
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
    try:
        return os.path.realpath(one) == os.path.realpath(other)
    except ValueError:  # a zero byte
        return False


def _call(path: str, entry: dict[str, Any], place: str, cc: str | None) -> CompilerCall:
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
    relative = os.path.sep in compiler and not os.path.isabs(compiler)
    if cc is None and (relative or not _COMPILER.fullmatch(os.path.basename(compiler))):
        raise RetileError(f"{path}: {compiler!r} is not run, because it is "
                          f"{'a program of the project' if relative else 'not named like a C compiler'}; "
                          "name the compiler with --cc")
    return CompilerCall(cc or shlex.quote(compiler), tuple(_reading_flags(words[compilers:], place)))


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
        elif _WHOLE.fullmatch(word):
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
