"""Many variants of one function in one program, compiled, run and compared bit for bit with the original.

The file's own lines above the function stand once; original and variants follow under names of their own.  Every call
gets fresh memory, exactly as much as the original may touch, so that the sanitizers see an access beside it.
"""

from __future__ import annotations

import re
import subprocess
import tempfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

# Size zero belongs to the domain, also where the type of a parameter formally needs one more.
SANITIZED = ("-O1", "-fsanitize=address,undefined", "-fno-sanitize=vla-bound", "-fno-sanitize-recover=all")
_COMMON = ("-std=c11", "-w", "-ffp-contract=off", "-fno-omit-frame-pointer", "-pipe")
_POINTER = re.compile(r"(const )?([\w ]+?) ?\*\s*(restrict )?(\w+)")
_ARRAY = re.compile(r"(const )?([\w ]+?) (\w+)((?:\[[^\]]*\])+)")
_GLOBAL = re.compile(r"^static (\w[\w ]*?) (\w+)((?:\[\d+\])+);$", re.MULTILINE)
_WRAPPING = re.compile(r"(?<!const )\b(?:int|long) (?:\*|\w+\[)")


@dataclass(frozen=True)
class Printed:
    """A variant's file, the values of its named chunks, and at which settings it may run."""

    text: str
    label: str
    names: tuple[tuple[str, int], ...] = ()
    allowed: tuple[bool, ...] = ()  # per setting
    shared: bool = True  # may run with overlapping pointers


@dataclass(frozen=True)
class Setting:
    """Sizes, and per array of the caller the bytes that the original may touch: first, and behind the last."""

    sizes: Mapping[str, int]
    extents: Mapping[str, tuple[int, int]]


@dataclass(frozen=True)
class _Area:
    """A pointer parameter or a global array."""

    name: str
    element: str
    owned: bool  # memory is made for it (a parameter), else it is there (a global)
    shares: bool  # may overlap others of its type

    @property
    def kind(self) -> str:
        return {"double": "d", "struct sounding": "d", "float": "f"}.get(self.element, "i")


def problems(text: str, function: str, variants: Sequence[Printed], settings: Sequence[Setting], *,
             compiler: str = "gcc", flags: Sequence[str] = ("-O1",), seconds: float = 60.0) -> list[str]:
    """What the variants do otherwise than the original; empty if nothing."""
    program = _program(text, function, variants, settings)
    with tempfile.TemporaryDirectory(prefix="variants-") as folder:
        file, made = Path(folder, "all.c"), Path(folder, "all")
        file.write_text(program)
        wrap = ("-fwrapv",) if _WRAPPING.search(text) else ()  # sums of their elements may overflow: that is not the point
        built = subprocess.run([compiler, *_COMMON, *flags, *wrap, str(file), "-o", str(made), "-lm"], check=False,
                               capture_output=True, text=True, timeout=300)
        if built.returncode:
            return [f"{compiler} {' '.join(flags)} does not build it: {built.stderr[:2000]}"]
        try:
            done = subprocess.run([str(made)], check=False, capture_output=True, text=True, timeout=seconds,
                                  env={"ASAN_OPTIONS": "detect_leaks=0", "PATH": "/usr/bin"})
        except subprocess.TimeoutExpired as late:
            return [f"a variant does not end: {(late.stdout or b'')[-300:]!r}"]
    found = [_with_label(line, variants) for line in done.stdout.splitlines() if line.startswith("differs")]
    if done.returncode and not found:
        running = [line for line in done.stdout.splitlines() if line.startswith("runs")][-1:]
        found = [f"status {done.returncode} in {_with_label(' '.join(running), variants)}: {done.stderr[:1500]}"]
    return found[:5]


def _with_label(line: str, variants: Sequence[Printed]) -> str:
    match = re.search(r"variant (\d+)", line)
    return f"{line} ({variants[int(match[1]) - 1].label})" if match and int(match[1]) else line


# ---------------------------------------------------------------- the program


def _program(text: str, function: str, variants: Sequence[Printed], settings: Sequence[Setting]) -> str:
    head, kind, parameters, _ = _split(text, function)
    areas = _areas(head, parameters)
    sizes = [p.split()[-1] for p in parameters if not _POINTER.fullmatch(p) and not _ARRAY.fullmatch(p)]
    included = sorted({line for v in variants for line in _split(v.text, function)[0].splitlines() if "#include" in line})
    parts = ["#include <stdio.h>", "#include <stdlib.h>", "#include <string.h>", "#include <stdint.h>", *included, head,
             f"typedef {kind} Call({', '.join(parameters)});", _renamed(text, function, 0)]
    for number, variant in enumerate(variants, 1):
        parts += [f"#define {name} {value}" for name, value in variant.names]
        parts.append(_renamed(variant.text, function, number))
        parts += [f"#undef {name}" for name, _ in variant.names]
    parts += [_tables(areas, variants, settings, sizes, "chart" in head), _memory(areas), _call(areas, parameters, sizes, kind)]
    return "\n".join([*parts, _MAIN])


def _split(text: str, function: str) -> tuple[str, str, list[str], str]:
    """Lines above the function, its return type, its parameters, and the function from its parameters on."""
    match = re.search(rf"^(void|double) {function}\((.*)\) \{{$", text, re.MULTILINE)
    if match is None:
        raise ValueError("no function")
    depth, parameters = 0, [""]
    for letter in match[2]:
        depth += {"[": 1, "(": 1, "]": -1, ")": -1}.get(letter, 0)
        if letter == "," and not depth:
            parameters.append("")
        else:
            parameters[-1] += letter
    return text[:match.start()], match[1], [p.strip() for p in parameters], text[match.start():]


def _renamed(text: str, function: str, number: int) -> str:
    return "__attribute__((noinline)) " + re.sub(rf"\b{function}\(", f"version{number}(", _split(text, function)[3], count=1)


def _areas(head: str, parameters: list[str]) -> list[_Area]:
    found = []
    for text in parameters:
        pointer, array = _POINTER.fullmatch(text), _ARRAY.fullmatch(text)
        if pointer:
            found.append(_Area(pointer[4], pointer[2], True, not pointer[3]))
        elif array:
            found.append(_Area(array[3], array[2], True, True))
    found += [_Area(match[2], match[1], False, False) for match in _GLOBAL.finditer(head)]
    return found + ([_Area("chart.depth", "double", False, False)] if "} chart;" in head else [])


def _tables(areas: list[_Area], variants: Sequence[Printed], settings: Sequence[Setting], sizes: list[str], chart: bool) -> str:
    def row(values: Sequence[object]) -> str:
        return "{" + ", ".join(str(value) for value in values or [0]) + "}"

    extents = [row([row(s.extents.get(a.name, (0, 0))) for a in areas]) for s in settings]
    values = [row([s.sizes[name] for name in (*sizes, *(["chart.rows"] if chart else []))]) for s in settings]
    allowed = [row([1] * len(settings))] + [row([int(x) for x in v.allowed]) for v in variants]
    shared = row([1, *(int(v.shared) for v in variants)])
    table = row([f"version{number}" for number in range(len(variants) + 1)])
    return (f"enum {{ VERSIONS = {len(variants) + 1}, SETTINGS = {len(settings)}, AREAS = {len(areas)} }};\n"
            f"static const long extents[SETTINGS][AREAS + 1][2] = {row(extents)};\n"
            f"static const long sizes[SETTINGS][{len(sizes) + 1}] = {row(values)};\n"
            f"static const char allowed[VERSIONS][SETTINGS] = {row(allowed)};\n"
            f"static const char shared[VERSIONS] = {shared};\n"
            f"static Call *const versions[VERSIONS] = {table};\n")


def _memory(areas: list[_Area]) -> str:
    """Where each area lies, how it is filled, and how two of it are compared."""
    groups = {}
    for area in areas:
        if area.shares:
            groups.setdefault(area.element, []).append(area)
    group = {area.name: number for number, members in enumerate(groups.values(), 1) if len(members) > 1 for area in members}
    own = [f"    case {k}: return (unsigned char *){a.name};" for k, a in enumerate(areas) if not a.owned]
    size = [f"    case {k}: return sizeof {a.name};" for k, a in enumerate(areas) if not a.owned]
    kinds = "".join(a.kind for a in areas) + "."
    width = ", ".join(["sizeof(double)" if a.kind == "d" else f"sizeof({a.element})" for a in areas] + ["1"])
    step = ", ".join([f"sizeof({a.element})" for a in areas] + ["1"])
    return (f"static const char kinds[] = \"{kinds}\";\nstatic const size_t widths[] = {{{width}}};\nstatic const long steps[] = {{{step}}};\n"
            f"static const int groups[] = {{{', '.join([str(group.get(a.name, 0)) for a in areas] + ['0'])}}};\n"
            "static unsigned char *resident(int a) {\n    switch (a) {\n" + "\n".join(own) +
            "\n    }\n    return 0;\n}\nstatic long resident_size(int a) {\n    switch (a) {\n" + "\n".join(size) +
            "\n    }\n    return 0;\n}\n")


def _call(areas: list[_Area], parameters: list[str], sizes: list[str], kind: str) -> str:
    places = {area.name: number for number, area in enumerate(areas)}
    arguments = []
    for text in parameters:
        pointer, array = _POINTER.fullmatch(text), _ARRAY.fullmatch(text)
        name = pointer[4] if pointer else array[3] if array else text.split()[-1]
        arguments.append(f"(void *)at[{places[name]}]" if name in places else f"sizes[s][{sizes.index(name)}]")
    rows = f"    chart.rows = (int)sizes[s][{len(sizes)}];\n" if "chart.depth" in places else ""
    result = "return " if kind == "double" else ""
    return (f"static double call(int version, int s, unsigned char **at) {{\n{rows}    {result}versions[version]"
            f"({', '.join(arguments)});\n{'' if result else '    return 0;'}\n}}\n")


_MAIN = r"""
static unsigned mixed(unsigned x) { x ^= x >> 16; x *= 0x7feb352dU; x ^= x >> 15; x *= 0x846ca68bU; return x ^ x >> 16; }
static void fill(unsigned char *memory, long bytes, int a, unsigned seed) {
    for (long k = 0; k * (long)widths[a] < bytes; k++) {
        unsigned x = mixed((unsigned)k * 31u + (unsigned)a * 7919u + seed);
        double real = ((int)(x % 2047u) - 1023) / 512.0;
        float single = (float)real;
        long whole = x % 5u;
        memcpy(memory + k * (long)widths[a], kinds[a] == 'd' ? (void *)&real : kinds[a] == 'f' ? (void *)&single :
               (void *)&whole, widths[a]);
    }
}
/* Equal bits, or both no number: which of two such a compiler hands on is its own choice. */
static long first_difference(const unsigned char *a, const unsigned char *b, long bytes, int area) {
    long w = (long)widths[area];
    for (long k = 0; k < bytes; k += w) {
        if (!memcmp(a + k, b + k, (size_t)w)) continue;
        double x = 0, y = 0;
        float u = 0, v = 0;
        if (kinds[area] == 'd') { memcpy(&x, a + k, 8); memcpy(&y, b + k, 8); if (x != x && y != y) continue; }
        if (kinds[area] == 'f') { memcpy(&u, a + k, 4); memcpy(&v, b + k, 4); if (u != u && v != v) continue; }
        return k;
    }
    return -1;
}
struct memory { unsigned char *start[AREAS + 1], *at[AREAS + 1]; long bytes[AREAS + 1]; double result; };
/* shift < 0: memory of its own for each; else members of a group lie that many elements apart in one piece. */
static void run(struct memory *m, int version, int s, int shift) {
    memset(m, 0, sizeof *m);
    for (int a = 0; a < AREAS; a++) {
        long low = extents[s][a][0], high = extents[s][a][1], before = 0;
        int first = a;
        if (resident(a)) {
            m->at[a] = resident(a);
            fill(m->at[a], resident_size(a), a, 5);
            continue;
        }
        for (int b = 0; shift >= 0 && groups[a] && b < AREAS; b++) {
            if (groups[b] != groups[a]) continue;
            long moved = shift * steps[a] * before++;
            if (b < first) first = b;
            if (extents[s][b][0] + moved < low) low = extents[s][b][0] + moved;
            if (extents[s][b][1] + moved > high) high = extents[s][b][1] + moved;
        }
        if (first < a) {
            long number = 0;
            for (int b = 0; b < a; b++) number += groups[b] == groups[a];
            m->at[a] = m->at[first] + shift * steps[a] * number;
            continue;
        }
        m->bytes[a] = high - low;
        m->start[a] = malloc((size_t)(high - low));
        fill(m->start[a], high - low, a, 3);
        m->at[a] = m->start[a] - low;
    }
    m->result = call(version, s, m->at);
    for (int a = 0; a < AREAS; a++)
        if (resident(a)) {
            m->bytes[a] = resident_size(a);
            m->start[a] = memcpy(malloc((size_t)m->bytes[a]), resident(a), (size_t)m->bytes[a]);
        }
}
static void release(struct memory *m) {
    for (int a = 0; a < AREAS; a++) free(m->start[a]);
}
int main(void) {
    static const int shifts[] = {-1, 0, 1, 3};
    int wrong = 0, grouped = 0;
    for (int a = 0; a < AREAS; a++) grouped |= groups[a];
    for (int s = 0; s < SETTINGS; s++)
        for (int mode = 0; mode < (grouped ? 4 : 1); mode++) {
            struct memory original, variant;
            printf("runs variant 0 setting %d shift %d\n", s, shifts[mode]);
            fflush(stdout);
            run(&original, 0, s, shifts[mode]);
            for (int v = 1; v < VERSIONS; v++) {
                if (!allowed[v][s] || (mode && !shared[v])) continue;
                printf("runs variant %d setting %d shift %d\n", v, s, shifts[mode]);
                fflush(stdout);
                run(&variant, v, s, shifts[mode]);
                int same = !memcmp(&original.result, &variant.result, sizeof(double)) ||
                    (original.result != original.result && variant.result != variant.result);
                if (!same && ++wrong) printf("differs: variant %d setting %d shift %d result\n", v, s, shifts[mode]);
                for (int a = 0; a < AREAS; a++) {
                    long at = first_difference(original.start[a], variant.start[a], original.bytes[a], a);
                    if (at >= 0 && ++wrong)
                        printf("differs: variant %d setting %d shift %d array %d byte %ld\n", v, s, shifts[mode], a, at);
                }
                release(&variant);
            }
            release(&original);
        }
    return wrong != 0;
}
"""


__all__ = ["SANITIZED", "Printed", "Setting", "problems"]
