"""Values and memory of the oracle: tagged numbers, objects, accesses, statement instances.

A number from memory carries a tag, a hash of the operation that made it and of its operands' tags; a cell that nobody
wrote yet has a tag of its own.  Two executions that give a cell the same tag computed it by the same operations in the
same tree of operands, so equal tags mean equal bits whatever the data are.  Plain integers (loop counters, sizes) stand
for themselves.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Callable
from dataclasses import dataclass, field

from oracle_text import Number, Pointer, Struct, Undefined, Unsupported


def word(text: str) -> int:
    """A number for a text, the same in every process (``hash`` of a str is not)."""
    return zlib.crc32(text.encode())


class Tagged:
    """A number with the tag of how it came about."""

    __slots__ = ("v", "t")

    def __init__(self, v: int | float, t: int) -> None:
        self.v = v
        self.t = t

    def __repr__(self) -> str:
        return f"{self.v}#{self.t & 0xFFFF:04x}"


def plain(value: Tagged | int):
    """The number without its tag."""
    return value if type(value) is int else value.v


def tag_of(value) -> int:
    """A tag for any value."""
    if type(value) is Tagged:
        return value.t
    if type(value) is tuple:
        return hash((1, word(value[0].name), value[1]))
    return hash((2, value))


class Object:
    """A piece of memory; cells are addressed by byte offset."""

    __slots__ = ("name", "kind", "cells", "type", "iterator", "base", "declared")

    def __init__(self, name: str, kind: str, type_: object = None, base: int = 0, declared: object = None) -> None:
        self.name = name
        self.kind = kind  # "caller", "global", "local"; "block" if declared inside the nest
        self.cells: dict[int, object] = {}
        self.type = type_  # type of an element (caller) or of the whole object
        self.iterator = False
        self.base = base
        self.declared = declared if declared is not None else name  # the same for all executions of a declaration

    def __repr__(self) -> str:
        return f"<{self.name}>"


def cell_name(obj: Object, offset: int) -> str:
    """``a[3]``, ``g->n``, ``p[2].x``, ``s``: a name for a cell that does not depend on the run."""
    kind = obj.type
    if isinstance(kind, Struct) and kind.size:
        index, rest = divmod(offset, kind.size)
        member = _member(kind, rest)
        if obj.kind == "caller":
            return f"{obj.name}->{member}" if index == 0 else f"{obj.name}[{index}].{member}"
        return f"{obj.name}.{member}"
    if isinstance(kind, (Number, Pointer)):
        return f"{obj.name}[{offset // kind.size}]" if obj.kind == "caller" or offset else obj.name
    return f"{obj.name}+{offset}" if offset else obj.name


def _member(kind: Struct, offset: int) -> str:
    name, (at, inner) = max(((n, m) for n, m in kind.members.items() if m[0] <= offset), key=lambda item: item[1][0])
    rest = offset - at
    if isinstance(inner, Struct):
        return f"{name}.{_member(inner, rest)}"
    return f"{name}+{rest}" if rest else name


@dataclass(frozen=True)
class LoopAt:
    """Where a loop stands while a statement runs."""

    name: str
    line: int
    column: int
    value: int  # of the C variable
    first: int  # the variable's value in the loop's first iteration
    step: int | None
    dependent: bool  # the first value depends on something that the nest changes

    @property
    def iteration(self) -> int:
        """The iteration number."""
        if self.step is None:
            raise Unsupported(f"the step of loop {self.name} is not constant")
        return (self.value - self.first) // self.step


@dataclass
class Instance:
    """One execution of a statement of the nest."""

    line: int
    column: int
    kind: str  # "statement" or "condition"
    loops: tuple[LoopAt, ...]  # every loop around it in the function, outermost first
    run: int  # which execution of the nest it belongs to
    accesses: list[tuple[Object, int, bool]]  # (object, offset, writes) in order

    @property
    def iterators(self) -> dict[str, int]:
        return {loop.name: loop.value for loop in self.loops}

    def __repr__(self) -> str:
        what = ", ".join(f"{'=' if w else ''}{cell_name(o, f)}" for o, f, w in self.accesses)
        return f"{self.line}:{self.iterators} {what}"


class TooLong(Exception):
    """The execution takes more steps than it was given."""


@dataclass
class Machine:
    """Memory and log of one execution."""

    sizes: dict[str, int]
    may: bool = False  # branches on data are all taken, so that the log holds what may happen
    uncertain: int = 0  # how many conditions on data stand around what is only run because of ``may``
    steps: int = 2_000_000
    access: list | None = None  # of the statement that runs, if it belongs to the nest
    instances: list[Instance] = field(default_factory=list)
    run: int = 0
    objects: list[Object] = field(default_factory=list)  # those that outlive the function
    read: set = field(default_factory=set)  # (object name, offset) of all cells of the caller that were touched
    written: set = field(default_factory=set)
    result: object = None
    next_base: int = 0x10000

    def new(self, name: str, kind: str, type_: object, declared: object = None) -> Object:
        """A fresh object, far from all others."""
        self.next_base += 1 << 24
        obj = Object(name, kind, type_, self.next_base, declared)
        if kind in ("caller", "global"):
            self.objects.append(obj)
        return obj

    def load(self, obj: Object, offset: int, kind: object) -> object:
        """The value of a cell."""
        value = obj.cells.get(offset)
        if value is None:
            value = obj.cells[offset] = self.initial(obj, offset, kind)
        if self.access is not None:
            self.access.append((obj, offset, False))
        if obj.kind == "caller" or obj.kind == "global":
            self.read.add((obj.name, offset))
        return value

    def store(self, obj: Object, offset: int, value: object) -> None:
        """Give a cell a value."""
        obj.cells[offset] = value
        if self.access is not None:
            self.access.append((obj, offset, True))
        if obj.kind == "caller" or obj.kind == "global":
            self.written.add((obj.name, offset))

    def initial(self, obj: Object, offset: int, kind: object) -> object:
        """What a cell holds that nobody wrote: sizes by name, invented data elsewhere."""
        name = cell_name(obj, offset)
        if obj.kind not in ("caller", "global"):
            raise Undefined(f"{name} is read before it has a value")
        if isinstance(kind, Pointer):
            return (self.new(name.removesuffix("[0]") if "->" in name else name, "caller", element_of(kind.to)), 0)
        if not isinstance(kind, Number):
            raise Unsupported(f"the value of {name}")
        if kind.floating:
            key = hash((word(obj.name), offset))
            return Tagged(((key % 2047) - 1023) / 512.0, key)
        if name in self.sizes:
            return self.sizes[name]
        key = hash((word(obj.name), offset))
        return Tagged(key % 5, key)

    def tick(self) -> None:
        """Count an iteration."""
        self.steps -= 1
        if self.steps < 0:
            raise TooLong


def element_of(kind: object) -> object:
    """The innermost element type of an array type."""
    while hasattr(kind, "of"):
        kind = kind.of
    return kind


# ---------------------------------------------------------------- arithmetic


def float_operation(operator: str, a: float, b: float) -> float:
    """IEEE-like; what matters is only that equal operands give equal results."""
    try:
        if operator == "+":
            return a + b
        if operator == "-":
            return a - b
        if operator == "*":
            return a * b
        if b == 0:
            return math.nan if a == 0 or a != a else math.copysign(math.inf, a) * math.copysign(1, b)
        return a / b
    except OverflowError:
        return math.inf


def integer_operation(operator: str, a: int, b: int, kind: Number, strict: bool) -> int:
    """C arithmetic in an integer type; raises Undefined where C leaves it so (``strict``), otherwise wraps."""
    if operator in "/%":
        if b == 0:
            raise Undefined("division by zero")
        quotient = abs(a) // abs(b) * (1 if (a < 0) == (b < 0) else -1)
        result = quotient if operator == "/" else a - quotient * b
    elif operator in ("<<", ">>"):
        if not 0 <= b < 8 * kind.size or (operator == "<<" and a < 0):
            raise Undefined("shift")
        result = a << b if operator == "<<" else a >> b
    else:
        result = _PLAIN[operator](a, b)
    if kind.low <= result <= kind.high:
        return result
    if kind.signed and strict:
        raise Undefined(f"{a} {operator} {b} overflows {kind.name}")
    return wrapped(result, kind)


def wrapped(value: int, kind: Number) -> int:
    """The value modulo 2^bits, in the type's range."""
    if kind.name == "_Bool":
        return int(value != 0)
    value &= (1 << 8 * kind.size) - 1
    return value - (1 << 8 * kind.size) if value > kind.high else value


_PLAIN = {
    "+": lambda a, b: a + b, "-": lambda a, b: a - b, "*": lambda a, b: a * b,
    "&": lambda a, b: a & b, "|": lambda a, b: a | b, "^": lambda a, b: a ^ b,
}
COMPARE = {
    "<": lambda a, b: a < b, "<=": lambda a, b: a <= b, ">": lambda a, b: a > b, ">=": lambda a, b: a >= b,
    "==": lambda a, b: a == b, "!=": lambda a, b: a != b,
}


# ---------------------------------------------------------------- run-time helpers


def truth(value: object) -> bool:
    """Whether C takes the branch."""
    if type(value) is tuple:
        return True
    return bool(plain(value))


def target_of(value: object) -> tuple[Object, int]:
    if type(value) is not tuple:
        raise Undefined("access through a null pointer")
    return value


def address_of(value: object) -> int:
    return value[0].base + value[1] if type(value) is tuple else plain(value)


def to_float(kind: Number, target: Number, code: Callable[[list], object]) -> Callable[[list], object]:
    if kind.floating:
        if target.size >= kind.size:
            return code
        mark = word(f"to {target.name}")

        def narrow(env: list) -> Tagged:
            value = code(env)
            return Tagged(value.v, hash((mark, value.t)))

        return narrow

    def widen(env: list) -> Tagged:
        value = code(env)
        return Tagged(float(plain(value)), tag_of(value))

    return widen


def to_integer(value: Tagged, target: Number) -> Tagged:
    number = int(value.v) if math.isfinite(value.v) else 0
    return Tagged(wrapped(number, target), hash((word("to integer"), value.t)))


def narrowed(value: object, target: Number) -> object:
    if type(value) is int:
        return wrapped(value, target)
    return Tagged(wrapped(value.v, target), value.t)


_MARKS = {operator: word(operator) for operator in ("+", "-", "*", "/", "%", "<<", ">>", "&", "|", "^", *COMPARE)}


def calculate(operator: str, a: object, b: object, kind: Number) -> object:
    """``a op b`` in a type that both operands have."""
    if type(a) is int and type(b) is int:
        return integer_operation(operator, a, b, kind, True)
    if kind.floating:
        return Tagged(float_operation(operator, a.v, b.v), hash((_MARKS[operator], a.t, b.t)))
    mark = hash((_MARKS[operator], tag_of(a), tag_of(b)))
    return Tagged(integer_operation(operator, plain(a), plain(b), kind, False), mark)


def compare(operator: str, a: object, b: object) -> object:
    """The int that C's comparison gives."""
    result = int(COMPARE[operator](plain(a), plain(b)))
    if type(a) is int and type(b) is int:
        return result
    return Tagged(result, hash((_MARKS[operator], tag_of(a), tag_of(b))))
