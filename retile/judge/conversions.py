"""Operands in other types, and helpers that all generated expressions use."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

from .arithmetic import wrapped
from .declarations import Declarations, Unit, Variable
from .kinds import INT, Array, Kind, Length, Number, Pointer, Struct, Unsupported, Void, alike, element_of
from .tags import Book
from .writer import Operand, Writer, as_integer


class Conversions(Declarations, Writer):
    """Converts operands; ``Places`` builds on it."""

    def __init__(self, unit: Unit, book: Book, namespace: dict[str, Any], facts: set[tuple[str, int]]) -> None:
        Declarations.__init__(self, unit)
        Writer.__init__(self)
        self.book, self.namespace, self.facts = book, namespace, facts
        self.uncertain = 0  # how many conditions stand around what is only run because both branches are wanted

    # ------------------------------------------------------------ hooks for those who want to know every access

    notes = False  # accesses are told, so that everything is worked out where it stands

    def note(self, obj: str, key: str, writes: bool) -> None:
        """A cell of memory is accessed."""

    def note_variable(self, variable: Variable, writes: bool) -> None:
        """A variable that lives in a Python variable is accessed."""

    def both(self, condition: Any) -> bool:
        """True if both branches of a condition are to be run."""
        return False

    # ------------------------------------------------------------ helpers

    def learn(self, fact: str, variable: Variable) -> None:
        """Note a fact about a variable's declaration, for the next time the function is generated."""
        self.facts.add((fact, variable.declared))

    def table(self, name: str, kind: Number, work: Callable[..., int] | None = None, reals: bool = False) -> str:
        """The name of an operation's table in the generated code."""
        found = self.book.operation(name, kind, work, reals)
        return self.known(found, found.python)

    def known(self, value: Any, name: str) -> str:
        """A name in the generated code for a value of ours."""
        self.namespace[name] = value
        return name

    def kind_name(self, kind: Kind) -> str:
        """A name in the generated code for a type."""
        return self.known(kind, f"kind_{id(kind)}")

    def plain(self, value: int, kind: Kind = INT) -> Operand:
        """A constant."""
        return Operand(kind, "plain", str(value))

    def data(self, operand: Operand) -> str:
        """The tag of a number."""
        if operand.held == "data":
            return operand.text
        if operand.held != "plain":
            raise Unsupported("a pointer where a number should be")
        value = as_integer(operand.text)
        return f"integers[{operand.text}]" if value is None else str(self.book.integers[value])

    def number(self, operand: Operand) -> str:
        """The plain number that an operand is."""
        if operand.held == "plain":
            return operand.text
        if operand.held != "data" or not isinstance(operand.kind, Number):
            raise Unsupported("a pointer where a number should be")
        return f"real({operand.text})" if operand.kind.floating else f"values[{operand.text}]"

    def integer(self, operand: Operand) -> str:
        """The value of an integer, for subscripts and lengths."""
        if not isinstance(operand.kind, Number) or operand.kind.floating:
            raise Unsupported("a subscript that is no integer")
        return self.number(operand)

    def _signed(self, text: str, kind: Kind) -> str:
        """A subscript, where it may have wrapped: what it reaches on machines whose addresses have 64 bits."""
        if not isinstance(kind, Number) or kind.signed or kind.size < 8 or text.isdigit():
            return text
        text = self.atom(text)
        return f"({text} - {1 << 64} if {text} >= {1 << 63} else {text})"

    def size_text(self, kind: Kind) -> str:
        """Bytes of a type."""
        if not isinstance(kind, Array):
            return str(kind.size)
        length = kind.length.name if isinstance(kind.length, Length) else str(kind.length)
        inner = self.size_text(kind.of)
        if inner.isdigit() and length.isdigit():
            return str(int(inner) * int(length))
        return f"({length} * {inner})"

    # ------------------------------------------------------------ conversions

    def convert(self, value: Operand, target: Kind) -> Operand:
        """The value in another type."""
        kind = value.kind
        if kind == target or isinstance(target, (Void, Struct)):
            return value
        if isinstance(target, Pointer):
            return self._to_pointer(value, target)
        if not isinstance(target, Number):
            raise Unsupported("a conversion to this type")
        if value.held == "pointer":
            if target.name == "_Bool":
                return Operand(target, "plain", f"(1 if {value.text} else 0)")
            if target.floating:
                raise Unsupported("a pointer as a number")
            return Operand(target, "plain", f"({value.text}.base + {value.offset})")
        if not isinstance(kind, Number):
            raise Unsupported("the value of a call that has none")
        if value.held == "plain":
            return self._plain_to(value, kind, target)
        return Operand(target, "data", self._data_to(value, kind, target))

    def _to_pointer(self, value: Operand, target: Pointer) -> Operand:
        if value.held == "plain" and value.text == "0":
            return Operand(target, "pointer", "null", "0")
        if value.held != "pointer" or not isinstance(value.kind, Pointer):
            raise Unsupported("a number as a pointer")
        was, wanted = element_of(value.kind.to), element_of(target.to)
        if not isinstance(wanted, Void) and not alike(was, wanted) and not self.uncertain:
            self.emit(f"{value.text}.seen_as({self.kind_name(wanted)})")
        return Operand(target, "pointer", value.text, value.offset)

    def _plain_to(self, value: Operand, kind: Number, target: Number) -> Operand:
        constant = as_integer(value.text)
        if target.floating:
            text = f"reals[float({value.text})]" if constant is None else str(self.book.reals[float(constant)])
            return Operand(target, "data", text)
        if constant is not None:
            return Operand(target, "plain", str(wrapped(constant, target)))
        if target.name == "_Bool":
            return Operand(target, "plain", f"(1 if {value.text} else 0)")
        if target.low <= kind.low and kind.high <= target.high:
            return Operand(target, "plain", value.text)
        mask = (1 << 8 * target.size) - 1
        if not target.signed:
            return Operand(target, "plain", f"({value.text} & {mask})")
        half = target.high + 1
        return Operand(target, "plain", f"((({value.text}) + {half} & {mask}) - {half})")

    def _data_to(self, value: Operand, kind: Number, target: Number) -> str:
        if target.floating:
            if kind.floating and target.size >= kind.size:
                return value.text
            return f"{self.table('convert', target)}[{value.text}]"
        if kind.floating:
            return f"{self.table('truncate', target, lambda a: _truncated(a, target), True)}[{value.text}]"
        if target.low <= kind.low and kind.high <= target.high and target.name != "_Bool":
            return value.text
        return f"{self.table('convert', target, lambda a: wrapped(a, target))}[{value.text}]"


def _truncated(value: float, kind: Number) -> int:
    return wrapped(int(value), kind) if math.isfinite(value) else 0
