"""The judge's own idea of C's types, for machines with 32-bit int and 64-bit long and pointers (LP64).

Nothing here comes from the reading of nests: what the judge finds must not share a mistake with what it judges.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property


class Unsupported(Exception):
    """The judge does not interpret this piece of C; the text says which."""


class Undefined(Exception):
    """The execution is undefined in C: a subscript outside its extent, a signed overflow, a value never set."""


class TooLong(Exception):
    """The execution takes more steps than it was given."""


class Kind:
    """A type of C."""

    size: int = 1  # bytes, where they are constant


@dataclass(frozen=True)
class Number(Kind):
    """An arithmetic type."""

    name: str
    size: int
    signed: bool = True
    floating: bool = False
    rank: int = 0

    @cached_property
    def low(self) -> int:
        """The smallest value of an integer type."""
        return -(1 << (8 * self.size - 1)) if self.signed else 0

    @cached_property
    def high(self) -> int:
        """The largest value of an integer type."""
        return (1 << (8 * self.size - (1 if self.signed else 0))) - 1


@dataclass(frozen=True)
class Void(Kind):
    size: int = 1


@dataclass(frozen=True)
class Pointer(Kind):
    to: Kind
    size: int = 8


@dataclass(frozen=True)
class Length:
    """An array length that was computed when the declaration was executed."""

    name: str  # of the variable in the generated code that keeps it


@dataclass(frozen=True)
class Array(Kind):
    of: Kind
    length: int | Length | None  # None where only the initialiser tells


@dataclass(eq=False)
class Struct(Kind):
    name: str
    members: dict[str, tuple[int, Kind]] = field(default_factory=dict)  # name -> (offset, type)
    size: int = 0
    complete: bool = False

    @cached_property
    def flat(self) -> dict[int, tuple[str, Kind]]:
        """Every cell of the structure: offset -> (name, type)."""
        cells: dict[int, tuple[str, Kind]] = {}
        for name, (at, kind) in self.members.items():
            for offset, (inner, leaf) in cells_of(kind).items():
                cells.setdefault(at + offset, (name + inner if inner[:1] in ("", "[") else f"{name}.{inner}", leaf))
        return cells


@dataclass(frozen=True)
class Function(Kind):
    returns: Kind


def cells_of(kind: Kind) -> dict[int, tuple[str, Kind]]:
    """The cells of an object of a type of constant size: offset -> (name inside the object, type)."""
    if isinstance(kind, Struct):
        return kind.flat
    if not isinstance(kind, Array):
        return {0: ("", kind)}
    if not isinstance(kind.length, int):
        raise Unsupported("an array of variable length inside a structure")
    inner, size = cells_of(kind.of), constant_size(kind.of)
    return {k * size + offset: (f"[{k}]{'.' if name[:1] not in ('', '[') else ''}{name}", leaf)
            for k in range(kind.length) for offset, (name, leaf) in inner.items()}


def constant_size(kind: Kind) -> int:
    """Bytes of a type; Unsupported if they are known only at run time."""
    if not isinstance(kind, Array):
        return kind.size
    if not isinstance(kind.length, int):
        raise Unsupported("the size of an array of variable length")
    return kind.length * constant_size(kind.of)


def element_of(kind: Kind) -> Kind:
    """The innermost element type of an array type."""
    while isinstance(kind, Array):
        kind = kind.of
    return kind


def alike(a: Kind, b: Kind) -> bool:
    """True if cells of the two types can be read as each other: same size, both floating, integer or pointer."""
    if isinstance(a, Number) and isinstance(b, Number):
        return a.size == b.size and a.floating == b.floating
    return a is b or (isinstance(a, Pointer) and isinstance(b, Pointer))


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
VOID = Void()

NAMED: dict[str, Number] = {
    "size_t": ULONG, "ssize_t": LONG, "ptrdiff_t": LONG, "intptr_t": LONG, "uintptr_t": ULONG, "bool": BOOL,
    "int8_t": SCHAR, "uint8_t": UCHAR, "int16_t": SHORT, "uint16_t": USHORT, "int32_t": INT, "uint32_t": UINT,
    "int64_t": LONG, "uint64_t": ULONG, "intmax_t": LONG, "uintmax_t": ULONG,
}
_WORDS: dict[tuple[str, ...], tuple[Kind, Kind]] = {
    (): (INT, UINT), ("char",): (CHAR, UCHAR), ("short",): (SHORT, USHORT), ("long",): (LONG, ULONG),
    ("long", "long"): (LLONG, ULLONG), ("float",): (FLOAT, FLOAT), ("double",): (DOUBLE, DOUBLE),
    ("double", "long"): (LDOUBLE, LDOUBLE), ("_Bool",): (BOOL, BOOL), ("void",): (VOID, VOID),
}


def basic_type(words: list[str]) -> Kind:
    """The type that the words of a declaration name, in any order."""
    kinds = tuple(sorted(word for word in words if word not in ("int", "signed", "unsigned")))
    if kinds not in _WORDS:
        raise Unsupported(f"the type {' '.join(words)}")
    if kinds == ("char",) and "signed" in words:
        return SCHAR
    return _WORDS[kinds]["unsigned" in words]


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
