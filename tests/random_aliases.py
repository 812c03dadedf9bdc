"""Random functions in which one piece of memory has several names, and callers that let their arguments overlap.

Arrays, matrices, structures, rows and tables of pointers are reached through parameters with and without ``restrict``,
locals, globals, offsets, addresses of elements, pointers that are set in the nest, before it, or between its runs, and
exchanged.  Nothing here is undefined: what a restrict parameter leads to is reached only through it.
"""

from __future__ import annotations

from dataclasses import dataclass
from random import Random

HEAD = """\
#include <stddef.h>
struct swath { double d[8]; double *h; double *rows[4]; long n; };
struct sounding { double x, y; };
static double kept[64];
double shared[64];
static double *port;
static struct swath base;
double chart[8][4];
"""

# How a parameter is declared, what kind of name it is, and what leads to it in the caller.
_PARAMETERS = {
    "line": "double *{0}",
    "lone": "double *restrict {0}",
    "only": "double *const {0}",
    "grid": "double {0}[][4]",
    "rows": "double (*{0})[4]",
    "swath": "struct swath *{0}",
    "cells": "struct sounding *{0}",
    "table": "double **{0}",
    "lone grid": "double (*restrict {0})[4]",
    "lone swath": "struct swath *restrict {0}",
}
_NAMES = ("depth", "echo", "tide", "drift", "track")


@dataclass(frozen=True)
class AliasCase:
    """A file, the lines of its loops, and the function to run: ``sweep`` itself, or a caller with overlapping arguments."""

    text: str
    lines: tuple[int, ...]  # of the for statements in ``sweep``, outermost first
    run: str


class _Writer:
    def __init__(self, seed: int) -> None:
        self.random = Random(seed)
        self.names: dict[str, str] = {}  # name -> kind
        self.spare = [f"q{number}" for number in range(9)]

    def pick(self, *options: str) -> str:
        return self.random.choice(options)

    def chance(self, percent: int) -> bool:
        return self.random.randrange(100) < percent

    # ------------------------------------------------------------ subscripts

    def far(self) -> str:
        """A subscript of a long row: up to 25."""
        c = self.random.randint(0, 3)
        return self.pick("i", "j", f"i + {c}", f"j + {c}", "i + j", "4 * i + j", "i * n + j", f"2 * j + {c}", f"{c}", "3 - j + i",
                         "j * n + i", "i * 4 + 3 - j")

    def near(self) -> str:
        """A subscript of a short row: 0 to 3."""
        return self.pick("j", "j", "3 - j", str(self.random.randint(0, 3)), "j / 2", "i & 3")

    # ------------------------------------------------------------ cells and addresses

    def cell(self, name: str) -> str:
        """One double reached through a name."""
        kind, e, c = self.names[name].removeprefix("lone ").replace("lone", "line").replace("only", "line"), self.far(), self.near()
        match kind:
            case "line" | "array":
                return self.pick(*[f"{name}[{e}]"] * 4, f"*({name} + {e})", f"({name} + 1)[{e}]", f"*&{name}[{e}]",
                                 f"(&{name}[{c}])[i]")
            case "grid" | "rows" | "chart":
                return self.pick(*[f"{name}[i][{c}]"] * 2, f"{name}[j][{c}]", f"(*({name} + i))[{c}]", f"*({name}[i + 1] + {c})",
                                 f"(*{name})[{c}]", f"{name}[i + 1][{c}]")
            case "swath":
                return self.pick(f"{name}->d[{c}]", f"{name}->h[{e}]", f"{name}->rows[{c}][{e}]", f"(*{name}).d[{c} + 1]",
                                 f"{name}[i].d[{c}]", f"{name}[0].h[{e}]", f"({name} + 1)->d[{c}]", f"(*{name}).h[{e}]",
                                 f"{name}->rows[0][{e}]", f"*({name}->d + {c})")
            case "base":
                return self.pick(f"{name}.d[{c}]", f"{name}.h[{e}]", f"{name}.rows[{c}][{e}]", f"(&{name})->d[{c}]")
            case "cells":
                return self.pick(f"{name}[{e}].x", f"{name}[{e}].y", f"({name} + i)->x", f"(&{name}[j])->y", f"(*({name} + {c})).x")
            case "table":
                return self.pick(f"{name}[{c}][{e}]", f"(*{name})[{e}]", f"{name}[0][{e}]", f"*({name}[j] + i)", f"**{name}")
        return name  # a scalar

    def address(self, fixed: bool) -> str:
        """The address of some double; ``fixed``: without iterators."""
        while True:
            name = self.random.choice(list(self.names))
            kind = self.names[name]
            k = self.pick("", f" + {self.random.randint(1, 3)}") if fixed else self.pick("", " + i", " + i * n", " + 4 * i", " + 2", " + i + 1")
            at = self.pick("0", "1") if fixed else self.pick("0", "i", "1")
            found = {
                "line": [f"{name}{k}", f"&{name}[{at}]"], "array": [f"{name}{k}", f"&{name}[{at}]"],
                "grid": [f"{name}[{at}]", f"&{name}[{at}][0]", f"*{name}", f"&{name}[0][{at}]"],
                "swath": [f"{name}->h{k}", f"{name}->d", f"&{name}->d[1]", f"{name}->rows[{at}]"],
                "base": [f"{name}.h{k}", f"{name}.d"], "cells": [f"&{name}[{at}].x", f"&{name}->y"],
                "table": [f"{name}[{at}]", f"*{name}"], "scalar": [f"&{name}"],
            }[_plain(kind)]
            return self.random.choice(found)

    # ------------------------------------------------------------ the function

    def parameters(self) -> list[str]:
        found = []
        for name in _NAMES[: self.random.randint(1, 4)]:
            kind = self.pick("line", "line", "line", *_PARAMETERS)
            self.names[name] = kind
            found.append(_PARAMETERS[kind].format(name))
        return found

    def globals(self) -> None:
        for name, kind in (("kept", "array"), ("shared", "array"), ("port", "line"), ("base", "base"), ("chart", "chart")):
            if self.chance(12):
                self.names[name] = kind

    def locals(self) -> list[str]:
        """Declarations and assignments before the nest; pointers among them become names."""
        lines = []
        if self.chance(15):
            lines.append("double own[64] = {0};")
            self.names["own"] = "array"
        if self.chance(12):
            lines.append("double level = 1;")
            self.names["level"] = "scalar"
        for _ in range(self.random.choice([0, 0, 1, 1, 1, 2, 2, 3])):
            lines += self.local_pointer()
        return lines

    def local_pointer(self) -> list[str]:
        name, value = self.spare.pop(0), self.address(True)
        swaths = [n for n, kind in self.names.items() if kind == "swath"]
        grids = [n for n, kind in self.names.items() if _plain(kind) == "grid"]
        if swaths and self.chance(25):
            value = self.random.choice(swaths) + self.pick("", " + 1")
            self.names[name] = "swath"
            return self.declared("struct swath *", name, value)
        if grids and self.chance(25):
            value = self.random.choice(grids) + self.pick("", " + 1")
            self.names[name] = "rows"
            return [f"double (*{name})[4] = {value};"]
        if self.chance(10):
            value = f"n > 2 ? {value} : {self.address(True)}"
        lines = self.declared("double *", name, value)
        self.names[name] = "line"
        if self.chance(12):
            lines.append(f"if (n == 3) {name} = {self.address(True)};")
        if self.chance(10):
            lines.append(f"{name}{self.pick('++', ' += 2')};")
        return lines

    def declared(self, type_: str, name: str, value: str) -> list[str]:
        return self.random.choice([[f"{type_}{name} = {value};"], [f"{type_}{name} = {value};"], [f"{type_}{name};", f"{name} = {value};"]])

    def between(self) -> list[str]:
        """What happens to pointers before each run of the inner loops."""
        lines = []
        ours = [n for n, kind in self.names.items() if kind == "line" and (n in _NAMES or n.startswith("q") or n == "port")]
        if len(ours) > 1 and self.chance(50):
            a, b = self.random.sample(ours, 2)
            lines.append(f"{{ double *swap = {a}; {a} = {b}; {b} = swap; }}")
        if ours and self.chance(35):
            a = self.random.choice(ours)
            lines.append(f"{a} = {self.address(True)};")
        if ours and self.chance(25):
            lines.append(f"{self.random.choice(ours)}{self.pick('++', ' += 3')};")
        swaths = [n for n, kind in self.names.items() if kind == "swath"]
        if swaths and self.chance(35):
            lines.append(f"{self.random.choice(swaths)}->h = {self.address(True)};")
        return lines

    def body(self) -> list[str]:
        lines = []
        if self.chance(30):
            name = self.spare.pop(0)
            lines.append(f"double *{name} = {self.address(False)};")
            self.names[name] = "line"
        if self.chance(10):
            name = self.spare.pop(0)
            lines.append(f"double {name} = {self.any()};")
            self.names[name] = "scalar"
        for _ in range(self.random.choice([1, 1, 2, 2, 3])):
            lines.append(f"{self.any()} {self.pick('=', '=', '+=')} {self.any()}{self.pick('', f' + {self.any()}')};")
        return lines

    def any(self) -> str:
        return self.cell(self.random.choice(list(self.names)))


def _plain(kind: str) -> str:
    kind = kind.removeprefix("lone ")
    return {"lone": "line", "only": "line", "rows": "grid", "chart": "grid"}.get(kind, kind)


def alias_case(seed: int) -> AliasCase:
    """The case of a seed."""
    writer = _Writer(seed)
    parameters = writer.parameters()
    kinds = dict(writer.names)
    writer.globals()
    before = writer.locals()
    again = writer.chance(40)
    between = writer.between() if again else []
    body = writer.body()
    lines = HEAD.splitlines()
    lines.append(f"void sweep(int n, {', '.join(parameters)}) {{")
    lines += [f"    {line}" for line in before]
    loops = []
    if again:
        lines.append("    for (int t = 0; t < 2; t++) {")
        loops.append(len(lines))
        lines += [f"        {line}" for line in between]
    lines += ["    for (int i = 0; i < n; i++)", "        for (int j = 0; j < 4; j++) {"]
    loops += [len(lines) - 1, len(lines)]
    lines += [f"            {line}" for line in body]
    lines += ["        }", *(["    }"] if again else []), "}"]
    calling = _caller(writer, kinds) if writer.chance(70) or {"port", "base"} & set(writer.names) else []
    return AliasCase("\n".join([*lines, *calling]) + "\n", tuple(loops), "caller" if calling else "sweep")


def _caller(writer: _Writer, kinds: dict[str, str]) -> list[str]:
    """A function that calls ``sweep`` with arguments that overlap where nothing forbids it."""
    given = {"line": "double *", "swath": "struct swath *", "cells": "struct sounding *", "grid": "double (*", "table": "double **"}
    own, arguments, sources, setup = [], [], ["shared", "&chart[0][0]", "base.d", "kept"], []
    for number, (name, kind) in enumerate(kinds.items()):
        plain, fresh = _plain(kind), f"x{number}"
        declared = f"double (*{fresh})[4]" if plain == "grid" else f"{given[plain]}{fresh}"
        if kind.startswith("lone"):
            own.append(declared)
            arguments.append(fresh)
            continue
        if plain == "table" or not writer.chance(60):
            own.append(declared)
            arguments.append(fresh)
            sources += {"line": [fresh], "grid": [f"*{fresh}"], "cells": [f"&{fresh}->x"], "swath": [f"{fresh}->d", f"{fresh}->h"],
                        "table": [f"*{fresh}"]}[plain]
            if plain == "swath":
                setup.append(f"{fresh}->{writer.pick('h', 'rows[0]', 'rows[1]')} = {writer.random.choice(sources)};")
            if plain == "table":
                setup.append(f"{fresh}[{writer.random.randint(0, 3)}] = {writer.random.choice(sources)};")
            continue
        value = f"{writer.random.choice(sources)}{writer.pick('', '', ' + 1', ' + 3', ' + 4')}"
        cast = {"line": "", "grid": "(double (*)[4])", "cells": "(struct sounding *)", "swath": "(struct swath *)"}[plain]
        if plain == "swath":
            swaths = [one for one in own if "swath" in one and "*x" in one]
            value = swaths[0].split("*")[1] if swaths and not swaths[0].endswith("restrict") else "&base"
            cast = ""
        arguments.append(f"{cast}({value})" if cast else value)
    setup += [f"port = {writer.random.choice(sources)};", f"base.h = {writer.random.choice(sources)};"]
    setup += [f"base.rows[{k}] = {writer.random.choice(sources)};" for k in range(4)]
    return [f"void caller({', '.join(['int n', *own])}) {{", *(f"    {line}" for line in setup),
            f"    sweep(n, {', '.join(arguments)});", "}"]
