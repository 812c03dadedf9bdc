"""Random arrays and accesses of the nests of ``random_nests``: what can stand in a statement.

Every array has a form; ``Arrays.cell`` writes an access that fits it, mostly inside the declared extents.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from random_choices import Choices

NAMES = ("depth", "echo", "swath", "tide", "drift", "track")
SIZES = ("n", "m", "w")
FLOATING = ("double", "double", "double", "float")
INTEGER = ("int", "unsigned", "long", "short", "unsigned char")
_EXTENTS = {"line": 1, "grid": 2, "volume": 3, "fixed": 2}
_FORMS = ("pointer", "grid", "grid", "pointer", "line", "flat", "flat", "fixed", "volume", "cells", "cube")


@dataclass(frozen=True)
class Array:
    """One array: its name, how it is declared, and the type of its elements."""

    name: str
    form: str
    element: str

    @property
    def floating(self) -> bool:
        return self.element in ("double", "float", "struct sounding")


@dataclass
class Arrays:
    """The arrays of a file and the text that declares them."""

    choose: Choices
    all: list[Array] = field(default_factory=list)
    above: list[str] = field(default_factory=list)  # lines at file level
    parameters: list[str] = field(default_factory=list)
    map: bool = False  # an array of subscripts
    chart: bool = False  # a global struct with a size and a grid
    rows: list[Array] = field(default_factory=list)  # pointers to rows, set inside the nest
    sizes: list[str] = field(default_factory=lambda: list(SIZES))

    # ------------------------------------------------------------ declarations

    def declare(self, cubes: bool) -> None:
        """Choose the arrays; ``cubes``: also those with three subscripts made flat."""
        choose, forms = self.choose, [form for form in _FORMS if cubes or form != "cube"]
        loose = "" if choose.chance(15) else " + 3"  # without room for shifts some sizes are undefined
        floating = choose.chance(85)
        for name in NAMES[:choose.between(1, 3)]:
            element = choose.pick(FLOATING if floating or choose.chance(30) else INTEGER)
            self._array(Array(name, choose.pick(forms), element), loose)
        if choose.chance(8):
            self.map = True
            self.parameters.append("const int *restrict map")
        if choose.chance(8):
            self.chart = True
            self.above.append("static struct { int rows; double depth[24][24]; } chart;")
            self.all.append(Array("chart.depth", "fixed", "double"))
            self.sizes.append("chart.rows")
        if choose.chance(12):
            self._macros()

    def _array(self, array: Array, room: str) -> None:
        choose, name, form = self.choose, array.name, array.form
        if form == "cells":
            array = Array(name, form, "struct sounding")
            text = "struct sounding { double low; double high; };"
            self.above += [text] if text not in self.above else []
        if form == "fixed" and choose.chance(60):
            self.above.append(f"static {array.element} {name}[24][24];")
        elif form in _EXTENTS:
            roomy = room and choose.chance(60)
            extents = ["[24]", "[24]"] if form == "fixed" else \
                [f"[{'n + m + w + 3' if roomy else size + room}]" for size in SIZES[:_EXTENTS[form]]]
            self.parameters.append(f"{array.element} {name}{''.join(extents)}")
        else:
            self.parameters.append(f"{array.element} *{'restrict ' if choose.chance(50) else ''}{name}")
        self.all.append(array)

    def _macros(self) -> None:
        flat = [a for a in self.all if a.form == "flat"]
        if flat:
            self.above.append(f"#define AT(row, column) {flat[0].name}[(row) * w + (column)]")
            self.all.append(Array("AT", "macro", flat[0].element))

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
        if choose.chance(7):
            text = choose.pick([f"({text}) / 2", f"({text}) % 3", f"(({text}) & 1)", f"(({text}) >> 1)"])
        if choose.chance(5):
            text += f" + {choose.pick(SIZES)}"
        return text

    def simple(self, names: list[str]) -> str:
        """A form that stays inside the declared extents, as far as the loops do."""
        choose = self.choose
        if not names:
            return str(choose.between(0, 2))
        name = choose.pick(names)
        if len(names) > 1 and choose.chance(12):
            return f"{name} + {choose.pick(names)}"
        if choose.chance(8):
            return choose.pick([f"{name} % 2", f"{name} / 2", f"{name} % 3"])
        shift = choose.between(0, 2) if choose.chance(45) else 0
        return f"{name} + {shift}" if shift else name

    def cell(self, array: Array, names: list[str]) -> str:
        """An access of an array."""
        choose, name, form = self.choose, array.name, array.form
        if form in ("pointer", "row"):
            return f"{name}[{self.affine(names, *((0, 2) if form == 'row' else (-2, 2)))}]"
        if form == "flat":
            return f"{name}[{self._product(self.affine(names, 0, 1), 'w')} + {self.affine(names, -1, 1)}]"
        if form == "cube":
            plane = self._product(self._product(self.affine(names, 0, 1), "m") + " + " + self.simple(names), "w")
            return f"{name}[{plane} + {self.affine(names, 0, 1)}]"
        if form == "macro":
            return f"{name}({self.affine(names, 0, 1)}, {self.affine(names, 0, 1)})"
        if form == "cells":
            return f"{name}[{self.affine(names)}].{choose.pick(['low', 'high'])}"
        return name + "".join(f"[{self.simple(names)}]" for _ in range(_EXTENTS[form]))

    @staticmethod
    def _product(text: str, size: str) -> str:
        return f"({text}) * {size}" if " " in text else f"{text} * {size}"

    def any(self, names: list[str], floating: bool | None = None) -> str:
        """An access of any array, or of one with elements of a kind."""
        fitting = [a for a in (*self.all, *self.rows) if floating is None or a.floating == floating]
        return self.cell(self.choose.pick(fitting or self.all), names)

    def read(self, names: list[str], floating: bool) -> str:
        """An access to read; into integers go integers alone, so that no conversion is undefined."""
        choose = self.choose
        flat = [a for a in self.all if a.form in ("pointer", "line") and (floating or not a.floating)]
        if self.map and flat and choose.chance(25):
            return f"{choose.pick(flat).name}[map[{choose.pick(names)}]]" if names else f"{choose.pick(flat).name}[map[1]]"
        return self.any(names, None if floating else False)
