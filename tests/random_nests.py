"""Random loop nests in C, over the whole language that is accepted.

A nest is a C file with one function, ``survey``; every statement and every loop stands on a line of its own.  Its
sizes are ``n``, ``m``, ``w`` and perhaps ``chart.rows``.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from hypothesis import strategies as st

from random_cells import Array, Arrays
from random_choices import Choices, Drawn, Seeded

ITERATORS = ("t", "i", "j", "k", "x")
SIGNED = ("int", "int", "int", "int", "long", "short")
UNSIGNED = ("unsigned", "size_t", "unsigned char", "unsigned short")


@dataclass(frozen=True)
class RandomNest:
    """A C file and the line of a nest in it."""

    text: str
    line: int
    outermost: int  # line of the loop around all others
    sizes: tuple[str, ...] = ("n", "m", "w")
    function: str = "survey"

    def __str__(self) -> str:
        numbered = "\n".join(f"{k:3} {line}" for k, line in enumerate(self.text.splitlines(), 1))
        return f"nest at line {self.line}\n{numbered}"


@dataclass
class Writer:
    """The file while it grows."""

    choose: Choices
    arrays: Arrays
    kind: str = "int"  # type of the iterators; empty if they are declared before the nest
    lines: list[str] = field(default_factory=list)
    scalars: list[str] = field(default_factory=list)  # scalars of the function that statements may use
    inner: list[int] = field(default_factory=list)  # lines of the loops that have loops inside, but the outermost
    first: int = 0  # line of the outermost loop
    budget: int = 4  # statements still allowed

    def put(self, level: int, text: str) -> int:
        self.lines.append("    " * level + text)
        return len(self.lines)

    # ------------------------------------------------------------ statements

    def operand(self, names: list[str], floating: bool) -> str:
        choose = self.choose
        if self.scalars and floating and choose.chance(20):
            return choose.pick(self.scalars)
        if names and choose.chance(8):
            return choose.pick(names)
        return self.arrays.read(names, floating)

    def value(self, names: list[str], floating: bool) -> str:
        choose = self.choose
        text = self.operand(names, floating)
        if choose.chance(60):
            text += choose.pick([" * ", " + ", " - "] if floating else [" + ", " - "]) + self.operand(names, floating)
        if floating and choose.chance(20):
            text = choose.pick([f"0.5 * ({text})", f"0.25 * ({text})", f"fabs({text})", f"-({text})"])
        if choose.chance(5):
            test = choose.pick([f"{self.arrays.any(names)} > 1", *(f"{name} > 1" for name in names)])
            text = f"{test} ? {text} : 1"
        return text

    def statement(self, level: int, names: list[str]) -> None:
        choose = self.choose
        self.budget -= 1
        if self.scalars and choose.chance(25):
            self.put(level, self._scalar_update(choose.pick(self.scalars), names))
            return
        array = choose.pick([*self.arrays.all, *self.arrays.rows])
        target = self.arrays.cell(array, names)
        operators = ["=", "=", "=", "+=", "+=", "-="] + (["*="] if array.floating else ["^=", "|="])
        operator, value = choose.pick(operators), self.value(names, array.floating)
        if array.floating and choose.chance(6):
            self.put(level, f"{target} = {value} > {target} ? {value} : {target};")
        else:
            self.put(level, f"{target} {operator} {value};")

    def _scalar_update(self, name: str, names: list[str]) -> str:
        choose, value = self.choose, self.value(names, True)
        if choose.chance(12):
            return f"{name} = {name} < {value} ? {value} : {name};"
        return f"{name} {choose.pick(['+=', '+=', '='])} {value};"

    def guarded(self, level: int, names: list[str]) -> None:
        """A statement, perhaps under a condition."""
        choose = self.choose
        if not names or not choose.chance(22):
            self.statement(level, names)
            return
        a = choose.pick(names)
        b = choose.pick([name for name in names if name != a] or ["n"])
        data = f"{self.arrays.any(names)} > {choose.pick(['0', '1'])}"
        condition = choose.pick([
            f"{a} < {b}", f"{a} != {b}", f"{a} >= 2", f"{a} % 2 == 0", f"{a} + {b} < n", data, f"!({a} < {b})",
            f"{a} == 1 || {b} > 2", f"{a} > 0 && {b} < m", f"{a} > 0 && {data}", f"{a} == {b}", f"{a} % 3 != 1"])
        self.put(level, f"if ({condition}) {{")
        self.statement(level + 1, names)
        if choose.chance(25) and self.budget > 0:
            self.put(level, "} else {")
            self.statement(level + 1, names)
        self.put(level, "}")

    # ------------------------------------------------------------ loops

    def header(self, name: str, names: list[str]) -> str:
        """The header of a loop, up to its closing parenthesis."""
        choose, size = self.choose, self.choose.pick(self.arrays.sizes)
        outer = choose.pick(names) if names and choose.chance(40) else None
        kind = choose.pick(["int", "long", "unsigned", "size_t", "short"]) if self.kind and choose.chance(8) else self.kind
        declared = f"{kind} " if kind else ""
        low, high = self.bounds(size, outer)
        step = choose.pick([2, 2, 3]) if choose.chance(15) else 1
        if choose.chance(20):
            return self.downwards(name, declared, low, high, step, kind in UNSIGNED)
        relation = choose.pick(["<", "<", "<", "<="])
        if low in ("0", "1") and high == size and step == 1 and choose.chance(4):
            relation = "!="
        after = choose.pick([f"{name}++", f"{name}++", f"++{name}", f"{name} += 1"]) if step == 1 else \
            choose.pick([f"{name} += {step}", f"{name} = {name} + {step}"])
        condition = f"{name} {relation} {high}"
        if choose.chance(4):
            condition += f" && {name} < {choose.pick(self.arrays.sizes)}"
        return f"for ({declared}{name} = {low}; {condition}; {after})"

    def bounds(self, size: str, outer: str | None) -> tuple[str, str]:
        choose = self.choose
        if outer is None:
            lows = ["0", "0", "0", "0", "0", "0", "0", "1", "1", "2", "(n < 3 ? n : 3)", "n % 2", "MIN(m, 2)"]
            highs = [size, size, size, size, f"{size} - 1", "4", f"{size} / 2 + 1", f"({size} < 5 ? {size} : 5)",
                     f"({size} + 2) / 3", f"{size} % 4 + 1", f"MIN({size}, m)"]
            return choose.pick(lows), choose.pick(highs)
        return choose.pick([
            (outer, size), (f"{outer} + 1", size), ("0", outer), ("0", f"{outer} + 1"), (f"{outer} % 2", size),
            (f"{outer} > 1 ? {outer} - 1 : 0", f"({outer} + 2 < {size} ? {outer} + 2 : {size})"),
            (f"MAX({outer}, 1)", f"MIN({outer} + 3, {size})"), ("0", f"{size} - {outer}"), (outer, f"{outer} + 3"),
            ("0", f"2 * {outer}"), (f"{outer} / 2", size), (f"2 * {outer}", f"2 * {outer} + 2")])

    def downwards(self, name: str, declared: str, low: str, high: str, step: int, unsigned: bool) -> str:
        compound = "?" in low or "(" in low or "%" in low or "/" in low
        if step == 1 and (unsigned or self.choose.chance(30)):
            return f"for ({declared}{name} = {high}; {name}-- > {0 if compound else low};)"
        if unsigned:
            low = "1"
        after = f"{name}--" if step == 1 else f"{name} -= {step}"
        limit = "0" if compound else low
        relation = ">" if unsigned else self.choose.pick([">=", ">"])
        return f"for ({declared}{name} = {high} - 1; {name} {relation} {limit}; {after})"

    def loop(self, level: int, names: list[str], left: int) -> None:
        """A loop with what is in it; ``left`` loops may still be nested."""
        choose, name = self.choose, ITERATORS[len(names)]
        header = self.header(name, names)
        bare = choose.chance(15) and left <= 1
        line = self.put(level, header + ("" if bare else " {"))
        self.first = self.first or line
        if names and left > 1:
            self.inner.append(line)
        inner = [*names, name]
        if bare:
            self.statement(level + 1, inner)
            return
        before = list(self.scalars), list(self.arrays.rows)
        closing = self._between(level + 1, inner) if left > 1 else None
        self._body(level + 1, inner, left, quiet=closing is not None)
        self.scalars, self.arrays.rows = before
        if closing is not None and self.budget > -1:
            self.put(level + 1, closing)
        self.put(level, "}")

    def _between(self, level: int, names: list[str]) -> str | None:
        """What may stand between two loops: an accumulator (the statement that stores it is given back), a scalar, a row."""
        choose = self.choose
        floating = [a for a in self.arrays.all if a.floating]
        if choose.chance(12) and floating and "sum" not in self.scalars:
            outside = "level" in self.scalars and choose.chance(40)
            name = "level" if outside else "sum"
            self.put(level, f"{'' if outside else 'double '}{name} = {choose.pick(['0.0', self.arrays.any(names)])};")
            self.scalars = [name]
            return f"{self.arrays.cell(choose.pick(floating), names)} {choose.pick(['=', '=', '+='])} {name};"
        if choose.chance(8) and "factor" not in self.scalars:
            self.put(level, f"double factor = {self.value(names, True)};")
            self.scalars.append("factor")
        pointers = [a for a in self.arrays.all if a.form in ("flat", "pointer")]
        if choose.chance(10) and pointers and not self.arrays.rows:
            array = choose.pick(pointers)
            start = choose.pick([f"{array.name} + {names[-1]} * w", f"&{array.name}[{names[-1]} * w]",
                                 f"{array.name} + {choose.between(0, 3)}"])
            self.put(level, f"{array.element} *row = {start};")
            self.arrays.rows = [Array("row", "row", array.element)]
        return None

    def _body(self, level: int, names: list[str], left: int, quiet: bool) -> None:
        choose = self.choose
        perfect = choose.chance(60)
        if left <= 1:
            for _ in range(1 if perfect else min(max(self.budget, 1), choose.between(1, 2))):
                self.guarded(level, names)
            return
        if not perfect and not quiet and self.budget > 1 and choose.chance(60):
            self.guarded(level, names)
        self.loop(level, names, left - 1)
        if not perfect and self.budget > 0 and choose.chance(30):
            self.loop(level, names, 1)
        if not perfect and self.budget > 0 and choose.chance(50):
            self.guarded(level, names)


_HEAD = ["#include <math.h>", "#include <stddef.h>", "#define MIN(a, b) ((a) < (b) ? (a) : (b))",
         "#define MAX(a, b) ((a) > (b) ? (a) : (b))"]


def nest(choose: Choices) -> RandomNest:
    """A random nest."""
    writer = Writer(choose, Arrays(choose))
    writer.kind = choose.pick(SIGNED) if choose.chance(82) else choose.pick(UNSIGNED)
    # Products of three unsigned sizes may wrap in so many ways that such nests take seconds each.
    writer.arrays.declare(cubes=writer.kind not in UNSIGNED or choose.chance(10))
    size_type = "int" if choose.chance(70) else writer.kind
    result = choose.chance(12)
    sizes = ", ".join(f"{size_type} {name}" for name in ("n", "m", "w"))
    for line in [*_HEAD, *writer.arrays.above]:
        writer.put(0, line)
    writer.put(0, f"{'double' if result else 'void'} survey({', '.join([sizes, *writer.arrays.parameters])}) {{")
    _declare_locals(writer, result)
    writer.budget = choose.pick([1, 2, 2, 3, 4])
    writer.loop(1, [], choose.pick([2, 2, 2, 2, 2, 3, 3, 3, 3, 1, 1, 4, 4, 5]))
    if result:
        writer.put(1, "return total;")
    writer.put(0, "}")
    line = choose.pick(writer.inner) if writer.inner and choose.chance(10) else writer.first
    return RandomNest("\n".join(writer.lines) + "\n", line, writer.first, tuple(writer.arrays.sizes))


def _declare_locals(writer: Writer, result: bool) -> None:
    choose = writer.choose
    if result:
        writer.put(1, "double total = 0.0;")
        writer.scalars.append("total")
    elif choose.chance(12):
        writer.put(1, "double level = 1.0;")
        writer.scalars.append("level")
    if choose.chance(10):
        writer.put(1, f"{writer.kind} {', '.join(ITERATORS)};")
        writer.kind = ""


def seeded_nest(seed: int) -> RandomNest:
    """The nest of a seed."""
    return nest(Seeded(seed))


@st.composite
def nests(draw: Any) -> RandomNest:
    """Nests for hypothesis."""
    return nest(Drawn(draw))
