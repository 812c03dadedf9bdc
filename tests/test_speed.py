"""What an answer costs a user: whole processes, from the start of the interpreter to its end.

``pytest -m benchmark tests/test_speed.py -s`` on a machine that does nothing else.  Beside the time of the clock stands
that of the processor, which other programs disturb less.
"""

from __future__ import annotations

import os
import resource
import statistics
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from command_line import ROOT, SAMPLES, line_of
from plan_grid import plans

import retile

BEAMS = f"samples_c/beamform.c:{line_of('beamform.c', 'form_beams')}"
EIGHT = f"samples_c/relax.c:{line_of('relax.c', 'relax_eight')}"
DEEP = Path(__file__).parent / "deep" / "deep_nests.c"
# As a user's program runs: with the compiled modules kept, which some places for tests forbid.
PLAIN = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
USUAL, LONGEST = 0.3, 2.0  # seconds


def cost(arguments: list[str], times: int) -> tuple[float, float]:
    """The least time of several calls, in seconds: by the clock, and of the processor, children included."""
    spent = [_once(arguments) for _ in range(times)]
    return min(clock for clock, _ in spent), min(processor for _, processor in spent)


def _once(arguments: list[str]) -> tuple[float, float]:
    before, start = resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
    done = subprocess.run([sys.executable, "-m", "retile", *arguments], cwd=ROOT, env=PLAIN, capture_output=True)
    clock, after = time.perf_counter() - start, resource.getrusage(resource.RUSAGE_CHILDREN)
    assert done.returncode in (0, 1), done.stderr.decode()
    return clock, after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime


@pytest.mark.benchmark
@pytest.mark.parametrize("arguments, limit", [
    (["--help"], 0.2), (["check", "--help"], 0.2), (["nests", "samples_c/relax.c"], USUAL),
    (["check", BEAMS, "k:64 j:256 i k j"], USUAL), (["check", EIGHT, "j i"], USUAL)])
def test_answers_come_at_once(arguments: list[str], limit: float) -> None:
    clock, processor = cost(arguments, 7)
    print(f"\nretile {' '.join(arguments)}: {clock:.3f} s, processor {processor:.3f} s (limit {limit} s)")
    assert clock < limit


def asked() -> Iterator[list[str]]:
    """A call of ``nests`` for every file, and one of ``check`` for every plan of a grid over its nests."""
    for file in (*sorted(SAMPLES.glob("*.c")), DEEP):
        name = str(file.relative_to(ROOT))
        yield ["nests", name]
        for found in retile.open_file(file).nests(inner=False):
            for plan in plans(found.nest, 6) if found.nest is not None else ():
                yield ["check", f"{name}:{found.address.line}", plan]


@pytest.mark.benchmark
def test_a_check_of_any_sample_comes_soon() -> None:
    spent = []
    for arguments in asked():
        clock, processor = cost(arguments, 2)
        spent.append((clock, processor, arguments))
        print(f"{clock:6.3f} s  {processor:6.3f} s  retile {' '.join(arguments)}")
    usual, longest = statistics.median(clock for clock, _, _ in spent), max(spent)
    print(f"{len(spent)} calls: median {usual:.3f} s; longest {longest[0]:.3f} s ({' '.join(longest[2])})")
    assert usual < USUAL and longest[0] < LONGEST
