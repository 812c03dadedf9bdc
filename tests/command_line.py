"""Run retile as a user does: as a process of its own."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
SAMPLES = ROOT / "samples_c"
_PLAIN = {name: value for name, value in os.environ.items()
          if name not in ("NO_COLOR", "FORCE_COLOR", "CLICOLOR_FORCE", "RETILE_TRACEBACK", "COLUMNS")}


@dataclass(frozen=True)
class Ended:
    """What a process left behind."""

    status: int
    out: str
    err: str


def retile(*arguments: str | Path, cwd: Path = ROOT, seconds: float = 60, **environment: str) -> Ended:
    """Run ``retile`` with these arguments and wait for its end."""
    done = subprocess.run([sys.executable, "-m", "retile", *map(str, arguments)], cwd=cwd, capture_output=True,
                          stdin=subprocess.DEVNULL, timeout=seconds, env={**_PLAIN, **environment})
    return Ended(done.returncode, done.stdout.decode("utf-8", "surrogateescape"),
                 done.stderr.decode("utf-8", "surrogateescape"))


def line_of(sample: str, function: str, text: str = r"\bfor\b") -> int:
    """The line of the first match of a pattern behind a function's name; edits of a sample do not break tests."""
    lines = (SAMPLES / sample).read_text(encoding="utf-8").splitlines()
    start = next(number for number, line in enumerate(lines) if f"{function}(" in line or f"{function} (" in line)
    return next(number for number, line in enumerate(lines[start:], start + 1) if re.search(text, line.split("/*")[0]))
