"""The oracle's way from C text to a syntax tree, and its own idea of C types (LP64).

Nothing here is shared with the program under test except pycparser.
"""

from __future__ import annotations

import functools
import re
import subprocess
from dataclasses import dataclass, field
from pathlib import Path

from pycparser import c_ast, c_parser


class Unsupported(Exception):
    """The oracle does not know this piece of C."""


class Undefined(Exception):
    """The execution is undefined in C: a subscript outside its extent, a signed overflow, a value never set."""


# ---------------------------------------------------------------- types


@dataclass(frozen=True)
class Number:
    """An arithmetic type."""

    name: str
    size: int  # bytes
    signed: bool = True
    floating: bool = False
    rank: int = 0

    @property
    def low(self) -> int:
        return -(1 << (8 * self.size - 1)) if self.signed else 0

    @property
    def high(self) -> int:
        return (1 << (8 * self.size - (1 if self.signed else 0))) - 1


@dataclass(frozen=True)
class Void:
    size: int = 1


@dataclass(frozen=True)
class Pointer:
    to: object
    extent: object = None  # declared extent of a parameter written as an array: an int or a Slot
    size: int = 8


@dataclass(frozen=True)
class Slot:
    """An array length that a frame keeps, computed when the declaration was executed."""

    index: int


@dataclass(frozen=True)
class Array:
    of: object
    length: object  # int, Slot, or None where only the initialiser tells


@dataclass
class Struct:
    name: str
    members: dict = field(default_factory=dict)  # name -> (offset, type)
    size: int = 0
    complete: bool = False


@dataclass(frozen=True)
class Function:
    returns: object


CHAR = Number("char", 1, rank=1)
SCHAR = Number("signed char", 1, rank=1)
UCHAR = Number("unsigned char", 1, False, rank=1)
BOOL = Number("_Bool", 1, False, rank=0)
SHORT = Number("short", 2, rank=2)
USHORT = Number("unsigned short", 2, False, rank=2)
INT = Number("int", 4, rank=3)
UINT = Number("unsigned int", 4, False, rank=3)
LONG = Number("long", 8, rank=4)
ULONG = Number("unsigned long", 8, False, rank=4)
LLONG = Number("long long", 8, rank=5)
ULLONG = Number("unsigned long long", 8, False, rank=5)
FLOAT = Number("float", 4, floating=True, rank=10)
DOUBLE = Number("double", 8, floating=True, rank=11)
LDOUBLE = Number("long double", 16, floating=True, rank=12)

NAMED: dict[str, object] = {
    "size_t": ULONG, "ssize_t": LONG, "ptrdiff_t": LONG, "intptr_t": LONG, "uintptr_t": ULONG, "bool": BOOL,
    "int8_t": SCHAR, "uint8_t": UCHAR, "int16_t": SHORT, "uint16_t": USHORT, "int32_t": INT, "uint32_t": UINT,
    "int64_t": LONG, "uint64_t": ULONG, "intmax_t": LONG, "uintmax_t": ULONG,
}


def basic_type(words: list[str]) -> Number | Void:
    """The type that the words of a declaration name, in any order."""
    kinds = sorted(word for word in words if word not in ("int", "signed", "unsigned"))
    unsigned = "unsigned" in words
    table = {
        (): (INT, UINT), ("char",): (SCHAR if "signed" in words else CHAR, UCHAR), ("short",): (SHORT, USHORT),
        ("long",): (LONG, ULONG), ("long", "long"): (LLONG, ULLONG), ("float",): (FLOAT,) * 2,
        ("double",): (DOUBLE,) * 2,
        ("double", "long"): (LDOUBLE,) * 2, ("_Bool",): (BOOL,) * 2, ("void",): (Void(),) * 2,
    }
    if tuple(kinds) not in table:
        raise Unsupported(f"type {' '.join(words)}")
    return table[tuple(kinds)][1 if unsigned else 0]


def promoted(kind: Number) -> Number:
    """C11 6.3.1.1: what a small integer becomes in arithmetic."""
    return INT if not kind.floating and kind.rank < INT.rank else kind


def common(a: Number, b: Number) -> Number:
    """C11 6.3.1.8, the usual arithmetic conversions."""
    if a.floating or b.floating:
        return max((k for k in (a, b) if k.floating), key=lambda k: k.rank)
    a, b = promoted(a), promoted(b)
    if a.signed == b.signed:
        return a if a.rank >= b.rank else b
    unsigned, signed = (a, b) if b.signed else (b, a)
    if unsigned.rank >= signed.rank:
        return unsigned
    if signed.size > unsigned.size:
        return signed
    return {LONG: ULONG, LLONG: ULLONG, INT: UINT}[signed]


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


@functools.lru_cache(maxsize=256)
def parse(text: str, directory: Path | None = None) -> c_ast.FileAST:
    """The syntax tree of a C file; coordinates are lines of the text.  System headers are not read."""
    text = text.replace("\r\n", "\n")
    text = _PRAGMA.sub("", _SYSTEM_INCLUDE.sub("", _without_comments(text)))
    if "#" in text or _LIMIT_WORD.search(text):
        text = _expanded(text, directory)
    return c_parser.CParser().parse(f"{_PRELUDE}\n#line 1 \"file.c\"\n{text}", "file.c")
