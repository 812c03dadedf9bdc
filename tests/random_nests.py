"""Random loop nests in C and random plans for them.

One generator, two sources of choices: a seeded ``random.Random`` (fast, for long runs) and hypothesis (which shrinks a
failure).  A case is a whole C file with one function; every statement and every loop stands on a line of its own.
"""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Protocol

from hypothesis import strategies as st

ARRAYS = ("depth", "echo", "swath", "tide", "drift", "track")
ITERATORS = ("t", "i", "j", "k")
SIZES = ("n", "m", "w")
SIGNED = ("int", "int", "int", "int", "long", "short")
UNSIGNED = ("unsigned", "size_t", "unsigned char", "unsigned short")


class Choices(Protocol):
    """Where a generator's decisions come from."""

    def between(self, low: int, high: int) -> int: ...

    def pick(self, options: Sequence[Any]) -> Any: ...

    def chance(self, percent: int) -> bool: ...


class Seeded:
    """Choices of a seeded generator of random numbers."""

    def __init__(self, seed: int) -> None:
        self.random = random.Random(seed)

    def between(self, low: int, high: int) -> int:
        return self.random.randint(low, high)

    def pick(self, options: Sequence[Any]) -> Any:
        return options[self.random.randrange(len(options))]

    def chance(self, percent: int) -> bool:
        return self.random.randrange(100) < percent


class Drawn:
    """Choices that hypothesis draws; the first option and ``False`` are the simplest."""

    def __init__(self, draw: Any) -> None:
        self.draw = draw

    def between(self, low: int, high: int) -> int:
        return self.draw(st.integers(low, high))

    def pick(self, options: Sequence[Any]) -> Any:
        return options[self.draw(st.integers(0, len(options) - 1))]

    def chance(self, percent: int) -> bool:
        return self.draw(st.integers(0, 99)) >= 100 - percent


@dataclass(frozen=True)
class Case:
    """A C file with a nest and a plan for it."""

    text: str
    line: int
    plan: str
    sizes: tuple[str, ...]
    function: str = "survey"

    def __str__(self) -> str:
        numbered = "\n".join(f"{k:3} {line}" for k, line in enumerate(self.text.splitlines(), 1))
        return f"plan {self.plan} at line {self.line}\n{numbered}"


@dataclass
class Loop:
    """A loop while it is being generated."""

    name: str
    line: int
    depth: int
    parent: Loop | None
    children: list[Loop] = field(default_factory=list)
    up_by_one: bool = True


@dataclass
class Writer:
    """The file while it grows."""

    choose: Choices
    kind: str = "int"  # type of the iterators
    lines: list[str] = field(default_factory=list)
    arrays: dict[str, str] = field(default_factory=dict)  # name -> form
    scalars: list[str] = field(default_factory=list)  # scalars of the function that statements may use
    loops: list[Loop] = field(default_factory=list)
    budget: int = 4  # statements still allowed
    sloppy: bool = False  # extents are only as large as the loops: some sizes are undefined

    def put(self, level: int, text: str) -> int:
        self.lines.append("    " * level + text)
        return len(self.lines)

    # ------------------------------------------------------------ forms

    def affine(self, names: list[str], low: int = -2, high: int = 2) -> str:
        """A random affine form of some iterators."""
        choose = self.choose
        if not names or choose.chance(6):
            return str(choose.between(0, 3))
        terms = [choose.pick(names)]
        if len(names) > 1 and choose.chance(35):
            terms.append(choose.pick([name for name in names if name != terms[0]]))
        text = terms[0] if choose.chance(88) else f"2 * {terms[0]}"
        for name in terms[1:]:
            text += choose.pick([" + ", " - "]) + name
        shift = choose.between(low, high) if choose.chance(45) else 0
        if shift:
            text += f" {'+' if shift > 0 else '-'} {abs(shift)}"
        if choose.chance(5):
            text = f"({text}) / 2"
        if choose.chance(5):
            text += f" + {choose.pick(SIZES)}"
        return text

    def simple(self, names: list[str], shift: int) -> str:
        """An iterator with a small shift that stays inside the declared extent."""
        if not names:
            return str(self.choose.between(0, 2))
        name = self.choose.pick(names)
        return f"{name} + {shift}" if shift else name

    def cell(self, name: str, names: list[str]) -> str:
        """An access of one of the arrays."""
        form, choose = self.arrays[name], self.choose
        if form == "pointer":
            return f"{name}[{self.affine(names)}]"
        if form == "flat":
            row, column = self.affine(names, 0, 1), self.affine(names, -1, 1)
            product = f"({row}) * w" if " " in row else f"{row} * w"
            return f"{name}[{product} + {column}]"
        if form == "cells":
            return f"{name}[{self.affine(names)}].{choose.pick(['low', 'high'])}"
        count = {"line": 1, "grid": 2, "chart": 2, "volume": 3}[form]
        forms = []
        for _ in range(count):
            coupled = len(names) > 1 and choose.chance(15)
            shift = choose.between(0, 2) if choose.chance(45) else 0
            if coupled:
                forms.append(f"{choose.pick(names)} + {choose.pick(names)}")
            else:
                forms.append(self.simple(names, shift))
        return name + "".join(f"[{form}]" for form in forms)

    # ------------------------------------------------------------ statements

    def operand(self, names: list[str]) -> str:
        choose = self.choose
        if self.scalars and choose.chance(20):
            return choose.pick(self.scalars)
        if names and choose.chance(8):
            return choose.pick(names)
        return self.cell(choose.pick(list(self.arrays)), names)

    def value(self, names: list[str]) -> str:
        choose = self.choose
        text = self.operand(names)
        if choose.chance(60):
            text += choose.pick([" * ", " + ", " - "]) + self.operand(names)
        if choose.chance(20):
            text = f"0.5 * ({text})"
        if choose.chance(5):
            text = f"{self.cell(choose.pick(list(self.arrays)), names)} > 0.0 ? {text} : 1.0"
        return text

    def statement(self, level: int, names: list[str]) -> None:
        choose = self.choose
        self.budget -= 1
        if self.scalars and choose.chance(25):
            self.put(level, f"{choose.pick(self.scalars)} {choose.pick(['+=', '+=', '='])} {self.value(names)};")
            return
        target = self.cell(choose.pick(list(self.arrays)), names)
        operator = choose.pick(["=", "=", "=", "+=", "+=", "-=", "*="])
        self.put(level, f"{target} {operator} {self.value(names)};")

    def guarded(self, level: int, names: list[str]) -> None:
        """A statement, perhaps under a condition."""
        choose = self.choose
        if not names or not choose.chance(20):
            self.statement(level, names)
            return
        a = choose.pick(names)
        b = choose.pick([name for name in names if name != a] or ["n"])
        data = f"{self.cell(choose.pick(list(self.arrays)), names)} > 0.25"
        condition = choose.pick([f"{a} < {b}", f"{a} != {b}", f"{a} >= 2", f"{a} % 2 == 0", f"{a} + {b} < n", data,
                                 f"{a} == 1 || {b} > 2", f"{a} > 0 && {b} < m"])
        self.put(level, f"if ({condition}) {{")
        self.statement(level + 1, names)
        if choose.chance(25) and self.budget > 0:
            self.put(level, "} else {")
            self.statement(level + 1, names)
        self.put(level, "}")

    # ------------------------------------------------------------ loops

    def header(self, name: str, names: list[str]) -> tuple[str, bool]:
        """The header of a loop and whether it counts up by one."""
        choose, size = self.choose, self.choose.pick(SIZES)
        outer = choose.pick(names) if names and choose.chance(40) else None
        declared = f"{self.kind} " if self.kind else ""
        low, high = self.bounds(size, outer)
        step = choose.pick([2, 3]) if choose.chance(15) else 1
        if choose.chance(20):
            return self.downwards(name, declared, low, high, step), False
        relation = choose.pick(["<", "<", "<", "<="])
        if low in ("0", "1") and high == size and step == 1 and choose.chance(4):
            relation = "!="
        after = f"{name}++" if step == 1 else f"{name} += {step}"
        return f"for ({declared}{name} = {low}; {name} {relation} {high}; {after}) {{", step == 1

    def bounds(self, size: str, outer: str | None) -> tuple[str, str]:
        choose = self.choose
        if outer is None:
            lows = ["0", "0", "0", "0", "1", "2", "(n < 3 ? n : 3)"]
            highs = [size, size, size, f"{size} - 1", "4", f"{size} / 2 + 1", f"({size} < 5 ? {size} : 5)"]
            return choose.pick(lows), choose.pick(highs)
        return choose.pick([
            (outer, size), (f"{outer} + 1", size), ("0", outer), ("0", f"{outer} + 1"),
            (f"{outer} > 1 ? {outer} - 1 : 0", f"({outer} + 2 < {size} ? {outer} + 2 : {size})"),
            ("0", f"{size} - {outer}"), (outer, f"{outer} + 3"), ("0", f"2 * {outer}"), (f"{outer} / 2", size)])

    def downwards(self, name: str, declared: str, low: str, high: str, step: int) -> str:
        unsigned = self.kind in UNSIGNED
        if step == 1 and (unsigned or self.choose.chance(30)):
            return f"for ({declared}{name} = {high}; {name}-- > {low if '?' not in low else 0};) {{"
        if unsigned:
            low = "1"
        after = f"{name}--" if step == 1 else f"{name} -= {step}"
        limit = low if "?" not in low else "0"
        relation = ">" if unsigned else self.choose.pick([">=", ">"])
        return f"for ({declared}{name} = {high} - 1; {name} {relation} {limit}; {after}) {{"

    def loop(self, level: int, names: list[str], left: int, parent: Loop | None) -> None:
        """A loop with what is in it; ``left`` loops may still be nested."""
        choose = self.choose
        name = ITERATORS[len(names)]
        text, plain = self.header(name, names)
        line = self.put(level, text)
        me = Loop(name, line, len(names), parent, up_by_one=plain)
        self.loops.append(me)
        if parent:
            parent.children.append(me)
        inner = [*names, name]
        private = left > 1 and choose.chance(12)
        if private:
            self.put(level + 1, "double sum = 0.0;")
            self.scalars.append("sum")
        perfect = choose.chance(60)
        if left <= 1:
            for _ in range(1 if perfect else min(max(self.budget, 1), choose.between(1, 2))):
                self.guarded(level + 1, inner)
        else:
            if not perfect and not private and self.budget > 1 and choose.chance(60):
                self.guarded(level + 1, inner)
            self.loop(level + 1, inner, left - 1, me)
            if not perfect and self.budget > 0 and choose.chance(25):
                self.loop(level + 1, inner, 1, me)
            if not perfect and self.budget > 0 and choose.chance(50):
                self.guarded(level + 1, inner)
        if private:
            self.scalars.remove("sum")
            if self.budget > -1:
                self.put(level + 1, f"{self.cell(choose.pick(list(self.arrays)), inner)} = sum;")
        self.put(level, "}")


def _declare(writer: Writer) -> tuple[list[str], list[str]]:
    """Parameters of the function and lines above it."""
    choose = writer.choose
    names = list(ARRAYS[:choose.between(1, 3)])
    element = choose.pick(["double", "double", "double", "float", "int"])
    extra = " + 3" if not choose.chance(15) else ""
    parameters, above = [], ["#include <stddef.h>"]
    for name in names:
        form = choose.pick(["pointer", "grid", "grid", "pointer", "line", "flat", "chart", "volume", "cells"])
        writer.arrays[name] = form
        if form == "chart":
            above.append(f"static {element} {name}[24][24];")
        elif form == "cells":
            if "struct sounding { double low; double high; };" not in above:
                above.append("struct sounding { double low; double high; };")
            parameters.append(f"struct sounding *{name}")
        else:
            big = "n + m + w + 3" if extra and choose.chance(60) else None
            shape = {"line": 1, "grid": 2, "volume": 3}.get(form)
            if shape is None:
                parameters.append(f"{element} *{'restrict ' if choose.chance(50) else ''}{name}")
            else:
                dims = "".join(f"[{big or size + extra}]" for size in SIZES[:shape])
                parameters.append(f"{element} {name}{dims}")
    return parameters, above


def nest(choose: Choices) -> tuple[Writer, str, int]:
    """A random file, and the line of its outermost loop."""
    writer = Writer(choose)
    writer.kind = choose.pick(SIGNED) if choose.chance(80) else choose.pick(UNSIGNED)
    parameters, above = _declare(writer)
    size_type = "int" if choose.chance(70) else writer.kind
    for line in above:
        writer.put(0, line)
    result = choose.chance(15)
    sizes = ", ".join(f"{size_type} {name}" for name in SIZES)
    writer.put(0, f"{'double' if result else 'void'} survey({', '.join([sizes, *parameters])}) {{")
    if result:
        writer.put(1, "double total = 0.0;")
        writer.scalars.append("total")
    elif choose.chance(12):
        writer.put(1, "double level;")
        writer.scalars.append("level")
        writer.put(1, "level = 1.0;")
    if choose.chance(12):
        writer.put(1, f"{writer.kind} {', '.join(ITERATORS)};")
        writer.kind = ""
    depth = choose.pick([2, 2, 3, 3, 1, 4])
    writer.budget = choose.pick([1, 2, 2, 3, 4])
    writer.loop(1, [], depth, None)
    if result:
        writer.put(1, "return total;")
    writer.put(0, "}")
    return writer, "\n".join(writer.lines) + "\n", writer.loops[0].line


def plan(choose: Choices, writer: Writer, root: Loop) -> str:
    """A random plan that names a set of loops closed towards the outside."""
    named = [root]
    for loop in writer.loops:
        if loop.parent in named and loop is not root and choose.chance(85):
            named.append(loop)
    count = {name: sum(1 for loop in writer.loops if loop.name == name) for name in ITERATORS}
    labels = {id(loop): loop.name if count[loop.name] == 1 else f"{loop.name}@{loop.line}" for loop in named}
    order = list(named)
    if not choose.chance(35):
        order = []
        rest = list(named)
        while rest:
            order.append(rest.pop(choose.between(0, len(rest) - 1)))
    terms = [labels[id(loop)] for loop in order]
    for loop in named:
        for chunk in _chunks(choose):
            at = terms.index(labels[id(loop)])
            mine = [k for k in range(at) if terms[k].startswith(labels[id(loop)] + ":")]
            terms.insert(choose.between(mine[-1] + 1 if mine else 0, at), f"{labels[id(loop)]}:{chunk}")
    chain = [loop for loop in named if loop.parent is None or loop is root or loop.parent in named]
    if len(chain) > 1 and choose.chance(18):
        _skew(choose, terms, [loop for loop in named if len(loop.children) <= 1], labels)
    return " ".join(terms)


def _chunks(choose: Choices) -> list[int]:
    if not choose.chance(55):
        return []
    if choose.chance(12):
        return choose.pick([[6, 2], [5, 2], [4, 2]])
    return [choose.pick([2, 2, 2, 3, 3, 3, 4, 4, 5, 5, 1, 64])]


def _skew(choose: Choices, terms: list[str], loops: list[Loop], labels: dict[int, str]) -> None:
    """Put in a skewed term, beside the bare loops or instead of one."""
    if len(loops) < 2:
        return
    a, b = loops[0], loops[-1]
    first, second = labels[id(a)], labels[id(b)]
    form = choose.pick([f"({first}+{second})", f"(2*{first}+{second})", f"({second}-{first})", f"({first}-{second})"])
    if choose.chance(60):
        at = min(terms.index(first), terms.index(second))
        terms.insert(choose.between(0, at), f"{form}:{choose.pick([2, 3, 4])}")
    else:
        terms[terms.index(second)] = form
        for term in [term for term in terms if term.startswith(second + ":")]:
            terms.remove(term)


def case(choose: Choices) -> Case:
    """A random nest with a random plan."""
    writer, text, line = nest(choose)
    inner = [loop for loop in writer.loops if loop.children and loop.parent]
    root = choose.pick(inner) if inner and choose.chance(12) else writer.loops[0]
    return Case(text, root.line, plan(choose, writer, _subtree(writer, root)), SIZES)


def _subtree(writer: Writer, root: Loop) -> Loop:
    """The loop, after the writer's list was cut down to the loops in it."""
    def inside(loop: Loop | None) -> bool:
        return loop is root or (loop is not None and inside(loop.parent))

    writer.loops = [loop for loop in writer.loops if inside(loop)]
    return root


def seeded_case(seed: int) -> Case:
    """The case of a seed."""
    return case(Seeded(seed))


@st.composite
def cases(draw: Any) -> Case:
    """Cases for hypothesis."""
    return case(Drawn(draw))
