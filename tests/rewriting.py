"""C text in, variant out, and both in one program, compiled strictly and run under the sanitizers."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
from dataclasses import dataclass
from pathlib import Path

from retile.dependence import analyse
from retile.model import Nest, Variant, Verdict
from retile.nest import read_nest
from retile.plan import judge, parse_plan
from retile.rewrite import diff, rewrite
from retile.source import CompilerCall, Source, open_source

WARNINGS = ("-std=c11", "-Wall", "-Wextra", "-Werror")
SANITIZERS = ("-fsanitize=undefined,address", "-fno-sanitize-recover=all")


@dataclass(frozen=True)
class Case:
    """An open file with the nest that starts at its first ``for``, or at the marked line."""

    source: Source
    nest: Nest

    def variant(self, plan: str, **options: object) -> Variant:
        """The variant of a plan, which must be legal."""
        dependences = analyse(self.nest)
        judgement = judge(self.nest, dependences, parse_plan(plan, self.nest))
        assert judgement.verdict is Verdict.LEGAL, judgement
        return rewrite(self.source, self.nest, dependences, judgement.plan, judgement, **options)  # type: ignore[arg-type]

    def diff(self, variant: Variant) -> str:
        """The patch to a variant."""
        return diff(self.source, variant)


def case_of(folder: Path, text: str, line: int | None = None, flags: tuple[str, ...] = ()) -> Case:
    """The case of a text, written to ``survey.c`` as it is."""
    path = folder / "survey.c"
    path.write_bytes(text.encode())
    source = open_source(str(path), CompilerCall(flags=flags))
    if line is None:
        line = next(number for number, row in enumerate(text.split("\n"), 1) if re.match(r"[ \t]*for\b", row))
    found = read_nest(source, line)
    assert found.nest is not None, found.refusals
    return Case(source, found.nest)


def rewritten(folder: Path, text: str, plan: str, **options: object) -> str:
    """The nest's new text, without the remark above it; the rest of the file is checked to have stayed as it was."""
    case = case_of(folder, text)
    variant = case.variant(plan, **options)
    before, after = text[:case.nest.span.start], text[case.nest.span.end:]
    assert variant.text.endswith(after)
    included = "".join(f"#include {header}\n" for header in variant.includes)
    assert variant.text.startswith(before) or variant.text.replace(included, "", 1).startswith(before)
    return without_remark(variant.nest_text)


def without_remark(text: str) -> str:
    """A nest's text behind the comment that retile puts above it, each line without the indentation of the first."""
    match = re.match(r"/\* Loops reordered.*?\*/\r?\n([ \t]*)|(?://[^\n]*\n([ \t]*))+", text, re.DOTALL)
    assert match is not None, text
    indent = match[1] if match[1] is not None else match[2]
    lines = text[match.end():].split("\n")
    return "\n".join([lines[0], *(line.removeprefix(indent) for line in lines[1:])])


def compile_and_run(folder: Path, text: str, *, compiler: str = "gcc", flags: tuple[str, ...] = SANITIZERS,
                    warnings: tuple[str, ...] = WARNINGS, optimize: str = "-O1") -> str:
    """What a program prints; an assertion fails if it does not compile or ends with an error."""
    file, program = folder / "together.c", folder / f"together-{compiler}"
    file.write_bytes(text.encode())
    built = subprocess.run([compiler, *warnings, optimize, *flags, str(file), "-o", str(program), "-lm"],
                           check=False, capture_output=True, text=True, timeout=120)
    assert built.returncode == 0, built.stderr + "\n" + text
    # Sanitizers must not take a leak at exit for a failure of the nest.
    done = subprocess.run([str(program)], check=False, capture_output=True, text=True, timeout=60,
                          env={**os.environ, "ASAN_OPTIONS": "detect_leaks=0"})
    assert done.returncode == 0, done.stderr + done.stdout + "\n" + text
    return done.stdout


def compilers() -> list[str]:
    """The compilers of this host among the two that are asked for."""
    return [name for name in ("gcc", "clang") if shutil.which(name)]


HEADERS = "#include <stdio.h>\n#include <stdlib.h>\n#include <string.h>\n#include <limits.h>\n#include <stdint.h>\n"


def renamed(text: str, function: str, name: str) -> str:
    """The text with one function under another name."""
    return re.sub(rf"\b{function}\b", name, text)


def together(original: str, variants: list[str], main: str, function: str = "survey") -> str:
    """One program: the original under the name ``original``, the variants as ``variant0``, ``variant1`` ..."""
    parts = [renamed(original, function, "original")]
    parts += [renamed(text, function, f"variant{number}") for number, text in enumerate(variants)]
    return HEADERS + "\n".join(parts) + "\n" + main
