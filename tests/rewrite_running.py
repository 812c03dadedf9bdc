"""Original and variant in one program, compiled strictly, run under the sanitizers and compared."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
from pathlib import Path

WARNINGS = ("-std=c11", "-Wall", "-Wextra", "-Werror")
SANITIZERS = ("-fsanitize=undefined,address", "-fno-sanitize-recover=all")


def compile_and_run(folder: Path, text: str, *, compiler: str = "gcc", flags: tuple[str, ...] = SANITIZERS,
                    warnings: tuple[str, ...] = WARNINGS, optimize: str = "-O1") -> str:
    """What a program prints; an assertion fails if it does not compile or ends with an error."""
    file, program = folder / "together.c", folder / f"together-{compiler}"
    file.write_bytes(text.encode())
    built = subprocess.run([compiler, *warnings, optimize, *flags, str(file), "-o", str(program), "-lm"],
                           capture_output=True, text=True, timeout=120)
    assert built.returncode == 0, built.stderr + "\n" + text
    # Sanitizers must not take a leak at exit for a failure of the nest.
    done = subprocess.run([str(program)], capture_output=True, text=True, timeout=60,
                          env={**os.environ, "ASAN_OPTIONS": "detect_leaks=0"})
    assert done.returncode == 0, done.stderr + done.stdout + "\n" + text
    return done.stdout


def compilers() -> list[str]:
    """The compilers of this host among the two that are asked for."""
    return [name for name in ("gcc", "clang") if shutil.which(name)]


def together(original: str, variant: str, function: str, main: str) -> str:
    """One program with the original under the name ``original`` and the variant under ``variant``."""
    def renamed(text: str, name: str) -> str:
        return re.sub(rf"\b{function}\b", name, text)

    headers = "#include <stdio.h>\n#include <stdlib.h>\n#include <string.h>\n#include <limits.h>\n#include <stdint.h>\n"
    return headers + renamed(original, "original") + "\n" + renamed(variant, "variant") + "\n" + main
