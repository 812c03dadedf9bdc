"""What a number is made of: every operation on every pair of operands gets one tag, wherever it is executed.

A tag is the number of an entry in a ``Book``; an entry is an operation and the tags of its operands, a cell as it was
at the start, or a constant.  The same operation on the same operands gives the same entry, so two executions that leave
the same tag in a cell computed it by the same operations in the same tree of operands: equal bits whatever the data
are.  This is value numbering (Cocke and Schwartz, "Programming Languages and Their Compilers", 1970), done while a
program runs.  Unlike a hash, an entry can be read: it is the history of a number.

Integers have their value from the start, since subscripts and bounds need it, and those made of constants alone stand
for themselves.  Floating-point values are worked out when a branch asks for one.
"""

from __future__ import annotations

import math
import zlib
from collections.abc import Callable
from typing import Any, NoReturn

from .kinds import DOUBLE, INT, Number, Undefined


def word(text: str) -> int:
    """A number for a text, the same in every process (``hash`` of a str is not)."""
    return zlib.crc32(text.encode("utf-8", "surrogatepass"))


class Unset:
    """What a variable holds that has no value; whatever is done with it is undefined."""

    def _undefined(self, *others: object) -> NoReturn:
        raise Undefined("a variable is read before it has a value")

    __add__ = __radd__ = __sub__ = __rsub__ = __mul__ = __rmul__ = __and__ = __rand__ = __or__ = __ror__ = _undefined
    __xor__ = __rxor__ = __lt__ = __le__ = __gt__ = __ge__ = __neg__ = __invert__ = __bool__ = __index__ = _undefined
    __eq__ = __ne__ = __mod__ = __rmod__ = __floordiv__ = __hash__ = __getitem__ = _undefined

    def __repr__(self) -> str:
        return "no value"


UNSET = Unset()


class Operation(dict[Any, int]):
    """A table from operands (a tag, or a tuple of them) to the tag of the result; missing ones are entered."""

    __slots__ = ("book", "name", "kind", "python")

    def __init__(self, book: Book, name: str, kind: Number) -> None:
        super().__init__()
        self.book, self.name, self.kind = book, name, kind  # the type of the operation; of the target for a conversion
        self.python = f"{_WORDS.get(name, name if name.isidentifier() else 'choose')}_{len(book.operations)}"

    def __missing__(self, operands: Any) -> int:
        tag = self[operands] = self.book.enter(self, operands)
        return tag

    @property
    def unsigned(self) -> bool:
        """True if the operation wraps around."""
        return not self.kind.signed and not self.kind.floating


class Whole(Operation):
    """An operation with an integer result, which is worked out at once."""

    __slots__ = ("work", "reals")

    def __init__(self, book: Book, name: str, kind: Number, work: Callable[..., int], reals: bool = False) -> None:
        super().__init__(book, name, kind)
        self.work, self.reals = work, reals  # reals: the operands are floating-point numbers

    def __missing__(self, operands: Any) -> int:
        book = self.book
        tags = operands if type(operands) is tuple else (operands,)
        value = self.work(*(map(book.real, tags) if self.reals else (book.values[tag] for tag in tags)))
        if not self.reals and all(tag in book.constants for tag in tags):
            tag = book.integers[value]
        else:
            tag = book.enter(self, operands, value)
        self[operands] = tag
        return tag


class _ToFloating(Operation):
    """Conversion to a floating-point type; a constant stays one."""

    __slots__ = ()

    def __missing__(self, operand: Any) -> int:
        book = self.book
        constant = operand in book.constants
        tag = self[operand] = book.reals[float(book.values[operand])] if constant else book.enter(self, operand)
        return tag


class _Constants(Operation):
    """Constants by their value."""

    __slots__ = ()

    def __missing__(self, value: Any) -> int:
        tag = self[value] = self.book.enter(self, value, value)
        if not self.kind.floating:
            self.book.constants.add(tag)
        return tag


class _Initial(Operation):
    """Cells as they were at the start, by (name of the object, offset): small integers, any fractions."""

    __slots__ = ()

    def __missing__(self, cell: Any) -> int:
        key = hash((word(cell[0]), cell[1]))
        value = ((key % 1000003) - 500001) / 65536.0 if self.kind.floating else key % 5
        tag = self[cell] = self.book.enter(self, cell, value)
        return tag


class Book:
    """All entries of an original and its variants."""

    def __init__(self) -> None:
        self.entries: list[tuple[Operation, Any]] = []
        self.operations: dict[tuple[str, str], Operation] = {}
        self.values: list[Any] = []  # None where nobody has asked yet
        self.constants: set[int] = set()  # integers that are made of constants alone
        self.integers = _Constants(self, "constant", INT)
        self.reals = _Constants(self, "constant", DOUBLE)
        self.initial_integers = _Initial(self, "initial", INT)
        self.initial_reals = _Initial(self, "initial", DOUBLE)
        self.names: dict[tuple[str, int], str] = {}  # of the cells whose initial values were read

    def enter(self, operation: Operation, operands: Any, value: Any = None) -> int:
        """A new entry."""
        self.entries.append((operation, operands))
        self.values.append(value)
        return len(self.values) - 1

    def operation(self, name: str, kind: Number, work: Callable[..., int] | None = None,
                  reals: bool = False) -> Operation:
        """The table of an operation of C in a type, or of a function; ``work`` for those with an integer result."""
        found = self.operations.get((name, kind.name))
        if found is None:
            if work is not None:
                found = Whole(self, name, kind, work, reals)
            else:
                found = (_ToFloating if name == "convert" else Operation)(self, name, kind)
            self.operations[name, kind.name] = found
        return found

    def operands(self, tag: int) -> tuple[int, ...]:
        """The tags of an entry's operands; none for constants and initial cells."""
        operation, operands = self.entries[tag]
        if isinstance(operation, (_Constants, _Initial)):
            return ()
        return operands if type(operands) is tuple else (operands,)

    def real(self, tag: int) -> float:
        """The value of an entry; chains of operations may be long, so no recursion."""
        value = self.values[tag]
        if value is not None:
            return value
        waiting = [tag]
        while waiting:
            at = waiting[-1]
            open_ones = [other for other in self.operands(at) if self.values[other] is None]
            if open_ones:
                waiting += open_ones
                continue
            waiting.pop()
            operation = self.entries[at][0]
            self.values[at] = work_out(operation.name, [self.values[other] for other in self.operands(at)])
        return self.values[tag]


# ---------------------------------------------------------------- floating-point values

_WORDS = {"+": "add", "-": "subtract", "*": "multiply", "/": "divide", "%": "remainder", "<<": "left", ">>": "right",
          "&": "both", "|": "either", "^": "differ", "<": "less", "<=": "at_most", ">": "greater", ">=": "at_least",
          "==": "equal", "!=": "unequal"}  # names in the generated code
EXTREMES: dict[str, Callable[..., Any]] = {
    "a < b ? a : b": lambda a, b: a if a < b else b, "a < b ? b : a": lambda a, b: b if a < b else a,
    "a <= b ? a : b": lambda a, b: a if a <= b else b, "a <= b ? b : a": lambda a, b: b if a <= b else a,
    "a > b ? a : b": lambda a, b: a if a > b else b, "a > b ? b : a": lambda a, b: b if a > b else a,
    "a >= b ? a : b": lambda a, b: a if a >= b else b, "a >= b ? b : a": lambda a, b: b if a >= b else a,
}
_FUNCTIONS: dict[str, Callable[..., float]] = {
    "sqrt": math.sqrt, "fabs": abs, "sin": math.sin, "cos": math.cos, "tan": math.tan, "exp": math.exp,
    "log": math.log, "log10": math.log10, "floor": math.floor, "ceil": math.ceil, "pow": math.pow, "atan2": math.atan2,
    "hypot": math.hypot, "fmod": math.fmod, "fmax": max, "fmin": min, "fma": lambda a, b, c: a * b + c,
    "+": lambda a, b: a + b, "-": lambda a, b: a - b, "*": lambda a, b: a * b, "negate": lambda a: -a, **EXTREMES,
}


def known_function(name: str) -> str | None:
    """The function of <math.h> that a name stands for, without the suffix of its type; None if it is none of ours."""
    for base in (name, name[:-1]):
        if base in _FUNCTIONS and base.isidentifier() and base != "negate":
            return base
    return None


def work_out(name: str, values: list[float]) -> float:
    """IEEE-like; what matters is only that equal operands give equal results."""
    try:
        if name == "/":
            return _quotient(*values)
        if name == "convert":
            return float(values[0])
        if name in _FUNCTIONS:
            return float(_FUNCTIONS[name](*values))
    except OverflowError:
        return math.inf
    except ValueError:
        return math.nan
    return (word(f"{name}{values}") % 1021) / 64.0 - 8.0  # a function that the file only declares


def _quotient(a: float, b: float) -> float:
    if b == 0:
        return math.nan if a == 0 or a != a else math.copysign(math.inf, a) * math.copysign(1, b)
    return a / b
