"""The oracle's way from C text to a syntax tree.

Nothing here is shared with the front end of the program under test except pycparser.
"""

from __future__ import annotations

import functools
import re
import subprocess
from pathlib import Path

from pycparser import c_ast, c_parser

from retile.judge.kinds import DOUBLE, INT, LONG, NAMED, UCHAR, UINT, ULONG, TooLong, Undefined, Unsupported, common
from retile.judge.reading import parallel_loops

__all__ = ["DOUBLE", "INT", "LONG", "NAMED", "UCHAR", "UINT", "ULONG", "TooLong", "Undefined", "Unsupported", "common",
           "parallel_loops", "parse"]

# ---------------------------------------------------------------- text

_LIMITS = {
    "CHAR_BIT": "8", "SCHAR_MIN": "(-128)", "SCHAR_MAX": "127", "UCHAR_MAX": "255", "SHRT_MIN": "(-32768)",
    "SHRT_MAX": "32767", "USHRT_MAX": "65535", "INT_MAX": "2147483647", "INT_MIN": "(-2147483647 - 1)",
    "UINT_MAX": "4294967295U", "LONG_MAX": "9223372036854775807L", "LONG_MIN": "(-9223372036854775807L - 1L)",
    "ULONG_MAX": "18446744073709551615UL", "LLONG_MAX": "9223372036854775807LL",
    "LLONG_MIN": "(-9223372036854775807LL - 1LL)", "ULLONG_MAX": "18446744073709551615ULL",
    "SIZE_MAX": "18446744073709551615UL", "UINTPTR_MAX": "18446744073709551615UL",
    "INTPTR_MAX": "9223372036854775807L", "PTRDIFF_MAX": "9223372036854775807L",
    "PTRDIFF_MIN": "(-9223372036854775807L - 1L)", "INT32_MAX": "2147483647", "INT64_MAX": "9223372036854775807L",
    "UINT32_MAX": "4294967295U", "UINT64_MAX": "18446744073709551615UL", "M_PI": "3.14159265358979323846",
    "DBL_EPSILON": "2.2204460492503131e-16", "DBL_MAX": "1.7976931348623157e+308", "NULL": "((void *)0)",
}
_PRELUDE = "".join(f"typedef int {name};\n" for name in NAMED)  # NAMED gives their true widths
_SYSTEM_INCLUDE = re.compile(r"^[ \t]*#[ \t]*include[ \t]*<[^>\n]*>.*$", re.M)
_PRAGMA = re.compile(r"^[ \t]*#[ \t]*pragma.*$", re.M)
_COMMENT = re.compile(r"//[^\n]*|/\*.*?\*/|\"(?:\\.|[^\"\\\n])*\"|'(?:\\.|[^'\\\n])*'", re.S)
_LIMIT_WORD = re.compile(r"\b(?:" + "|".join(_LIMITS) + r")\b")


def _without_comments(text: str) -> str:
    def blank(match: re.Match[str]) -> str:
        found = match.group()
        return re.sub(r"[^\n]", " ", found) if found.startswith("/") else found

    return _COMMENT.sub(blank, text)


def _expanded(text: str, directory: Path | None) -> str:
    words = [f"-D{name}={value}" for name, value in _LIMITS.items()]
    words += ["-D__restrict=restrict", "-D__restrict__=restrict", "-D__attribute__(x)="]
    if directory is not None:
        words.append(f"-I{directory}")
    done = subprocess.run(["cc", "-E", "-x", "c", "-undef", *words, "-"], input=text, capture_output=True, text=True)
    if done.returncode:
        raise Unsupported(done.stderr)
    return done.stdout


_DEFINE = re.compile(r"^[ \t]*#[ \t]*define[ \t]+(\w+)(\([\w, ]*\))?[ \t]*(.*)$")
_WORD = re.compile(r"(?<![\w.])[A-Za-z_]\w*")


def _simply_expanded(text: str) -> str | None:
    """The text with its macros expanded, if they are plain ones of one line; None where that takes a preprocessor.

    Starting one takes longer than all the rest.
    """
    macros: dict[str, tuple[list[str] | None, str]] = {}
    lines = text.split("\n")
    for number, row in enumerate(lines):
        if "#" in row or row.endswith("\\"):
            match = _DEFINE.match(row)
            if match is None or "#" in match[3] or row.endswith("\\") or match[1] in macros:
                return None
            inner = None if match[2] is None else [name.strip() for name in match[2][1:-1].split(",")]
            macros[match[1]] = (inner, match[3])
            lines[number] = ""
        elif macros:
            expanded = _replaced(row, macros, frozenset())
            if expanded is None:
                return None
            lines[number] = expanded
    return "\n".join(lines)


def _replaced(row: str, macros: dict[str, tuple[list[str] | None, str]], busy: frozenset[str]) -> str | None:
    """A line with macros replaced, C11 6.10.3; None where an argument goes on in the next line."""
    out, at = [], 0
    for match in _WORD.finditer(row):
        name = match.group()
        if match.start() < at or name not in macros or name in busy:
            continue
        if '"' in row:
            return None
        names, body = macros[name]
        end = match.end()
        if names is not None:
            arguments, end = _arguments(row, end)
            if arguments is None or len(arguments) != len(names):
                return None
            values = [_replaced(argument.strip(), macros, busy) for argument in arguments]
            if None in values:
                return None
            given = dict(zip(names, values, strict=True))
            body = _WORD.sub(lambda word, given=given: given.get(word.group(), word.group()), body)
        inner = _replaced(body, macros, busy | {name})
        if inner is None:
            return None
        out += [row[at:match.start()], inner]
        at = end
    return "".join([*out, row[at:]])


def _arguments(row: str, at: int) -> tuple[list[str] | None, int]:
    """What stands in the parentheses that open at or after an offset, and the offset behind them."""
    opening = re.compile(r"\s*\(").match(row, at)
    if opening is None:
        return None, at
    depth, parts, start = 1, [], opening.end()
    for place in range(start, len(row)):
        depth += (row[place] == "(") - (row[place] == ")")
        if depth == 0 or (depth == 1 and row[place] == ","):
            parts.append(row[start:place])
            start = place + 1
        if depth == 0:
            return parts, place + 1
    return None, at


@functools.lru_cache(maxsize=256)
def parse(text: str, directory: Path | None = None) -> c_ast.FileAST:
    """The syntax tree of a C file; coordinates are lines of the text.  System headers are not read."""
    text = text.replace("\r\n", "\n")
    text = _PRAGMA.sub("", _SYSTEM_INCLUDE.sub("", _without_comments(text)))
    if "#" in text or _LIMIT_WORD.search(text):
        simple = _simply_expanded(text) if not _LIMIT_WORD.search(text) else None
        text = _expanded(text, directory) if simple is None else simple
    return c_parser.CParser().parse(f"{_PRELUDE}\n#line 1 \"file.c\"\n{text}", "file.c")
