"""Random nests of two loops in mixed integer types, for comparison of what is read with what runs."""

from __future__ import annotations

from random import Random

_TYPES = ("int", "int", "int", "unsigned", "long", "size_t", "short", "unsigned char", "unsigned short", "int64_t")


class Nests:
    """Writes one C function per seed, with sizes ``n``, ``m``, ``ld`` and arrays ``depth``, ``echo``."""

    def __init__(self, seed: int) -> None:
        self._random = Random(seed)

    def text(self) -> str:
        """The file; the outer ``for`` stands on line 4."""
        lines = [f"    {self._header('i', None)} {{"]
        if self._chance(0.3):
            lines.append(f"        {self._cell(['i'], 'depth')} = 1;")
        lines.append(f"        {self._header('j', 'i')} {{")
        names = ["i", "j"]
        for number in range(self._random.randint(1, 2)):
            if self._chance(0.3):
                lines.append(f"            {self._one(_TYPES)} at{number} = {self._subscript(names)};")
                names = [*names, f"at{number}"]
            if self._chance(0.3):
                lines.append(f"            if ({self._condition(names)})")
            lines.append(f"            {self._statement(names)}")
        lines += ["        }", "    }"]
        sizes = ", ".join(f"{self._one(_TYPES)} {name}" for name in ("n", "m", "ld"))
        head = f"#include <stddef.h>\n#include <stdint.h>\nvoid sweep({sizes}, double *restrict depth, " \
               "const double *restrict echo) {\n"
        return head + "\n".join(lines) + "\n}\n"

    def _one(self, choices: tuple[str, ...] | list[str]) -> str:
        return self._random.choice(choices)

    def _chance(self, share: float) -> bool:
        return self._random.random() < share

    def _bound(self, outer: str | None) -> str:
        c = self._random.randint(0, 3)
        b = self._one(["n", "m", "n", "m", str(self._random.randint(1, 6)), *([outer, outer] if outer else [])])
        return self._one([b, b, b, f"{b} + {c}", f"{b} - {c}", f"2 * {b}", f"{b} / 2", "(n < m ? n : m)", f"{b} >> 1",
                          f"({b} > {c} ? {b} - {c} : {c})"])

    def _header(self, name: str, outer: str | None) -> str:
        low = self._one(["0", "1", "2", *([outer, f"{outer} + 1"] if outer else [])])
        high, step = self._bound(outer), self._one(["1", "1", "1", "2", "3"])
        up = f"{name}++" if step == "1" else f"{name} += {step}"
        down = f"{name}--" if step == "1" else f"{name} -= {step}"
        rest = self._one([
            *[f"{name} = {low}; {name} < {high}; {up}"] * 3, f"{name} = {low}; {name} <= {high}; {up}",
            f"{name} = {high}; {name}-- > {low};", f"{name} = {high}; {name} > {low}; {down}",
            f"{name} = {high}; {name} >= {low}; {down}", f"{name} = {low}; {name} != {high}; {up}",
            f"{name} = {low}; {name} + 1 < {high} && {name} <= {self._bound(outer)}; {up}"])
        return f"for ({self._one(_TYPES)} {rest})"

    def _subscript(self, names: list[str]) -> str:
        v, w, c = self._one(names), self._one(names), self._random.randint(0, 3)
        return self._one([v, f"{v} + {c}", f"{v} + {w}", f"{v} * 2", f"{v} / 2", f"{v} % 3", f"{v} & 1",
                          f"{v} - {w} + 40", f"({v} << 1) + {c}"])

    def _cell(self, names: list[str], array: str) -> str:
        if len(names) > 1 and self._chance(0.5):
            return f"{array}[{names[0]} * {self._one(['16', 'ld'])} + {names[1]}]"
        return f"{array}[{self._subscript(names)}]"

    def _condition(self, names: list[str]) -> str:
        v = self._one(names)
        return self._one([f"{v} > {self._random.randint(0, 3)}", f"{v} != n", f"{v} % 2 == 0", f"{v} < m - 1",
                          f"echo[{v}] > 0", f"n > {v} && {v} >= 1"])

    def _statement(self, names: list[str]) -> str:
        return f"{self._cell(names, 'depth')} {self._one(['=', '+='])} {self._cell(names, 'echo')} + " \
               f"{self._cell(names, 'depth')};"
