"""Long runs over random nests: a tally of what was compared, and every failure as a file of its own.

``python tests/campaign.py FIRST COUNT [FOLDER]`` examines the nests of COUNT seeds from FIRST on, each with 30 plans, and
prints the tally; the same runs as a test with ``pytest -m long tests/test_random.py --pairs N --seed S``.
"""

from __future__ import annotations

import resource
import sys
import time
import traceback
from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

from examination import Effort, examine
from many_variants import SANITIZED
from random_choices import Seeded
from random_nests import RandomNest, seeded_nest

# In turn: two compilers, three levels of optimisation, and the sanitizers.
BUILDS = (("gcc", ("-O1",)), ("gcc", SANITIZED), ("gcc", ("-O2",)), ("gcc", ("-O1",)), ("gcc", ("-O3", "-march=native")),
          ("clang", ("-O1",)), ("gcc", ("-O1",)), ("clang", SANITIZED), ("gcc", ("-O1",)), ("clang", ("-O3",)))


@dataclass
class Tally:
    """What a run did."""

    counts: Counter = field(default_factory=Counter)
    failed: list[str] = field(default_factory=list)
    seconds: float = 0.0  # of processor time, compilers and programs included
    building: float = 0.0  # the part of these

    def lines(self) -> list[str]:
        """The tally as text."""
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
        pairs = self.counts["pairs"]
        return [*(f"{count:8} {what}" for what, count in sorted(self.counts.items(), key=lambda item: (-item[1], item[0]))),
                f"{len(self.failed):8} failures",
                f"{pairs / self.seconds if self.seconds else 0:8.1f} pairs per second of processor time ({self.seconds:.0f} s, of which "
                f"{self.building:.0f} s to build and run), peak memory {peak:.0f} MB"]


def effort_of(seed: int, clang: bool = True) -> Effort:
    """What is done for the nest of a seed."""
    compiler, flags = BUILDS[seed % len(BUILDS)]
    return Effort(build=compiler if clang else "gcc", flags=flags, instead=seed % 8 == 0)


def run(seeds: Iterable[int], folder: Path | None = None, pairs: int | None = None, effort: Effort | None = None) -> Tally:
    """Examine the nests of some seeds, until so many pairs are done; failures are saved in the folder."""
    tally, start = Tally(), _processor_times()
    for seed in seeds:
        if pairs is not None and tally.counts["pairs"] >= pairs:
            break
        nest = seeded_nest(seed)
        try:
            finding = examine(nest, Seeded(seed + (1 << 40)), seed, effort or effort_of(seed))
        except Exception as crash:  # whatever it is, it must be kept and must not end the run
            _failed(tally, folder, seed, nest, "", f"{type(crash).__name__}: {crash}\n{traceback.format_exc(limit=-6)}")
            continue
        tally.counts["nests"] += 1
        tally.counts.update(finding.counts)
        for plan, problem in finding.problems[:3]:  # what one cause does to all plans of a nest is seen in a few
            _failed(tally, folder, seed, nest, plan, problem)
        tally.counts["problems"] += len(finding.problems)
        own, others = (now - then for now, then in zip(_processor_times(), start, strict=True))
        tally.seconds, tally.building = own + others, others
        if folder is not None and seed % 10 == 9:
            (folder / "tally.txt").write_text("\n".join([f"up to seed {seed}", *tally.lines()]) + "\n")
    return tally


def _failed(tally: Tally, folder: Path | None, seed: int, nest: RandomNest, plan: str, problem: str) -> None:
    tally.failed.append(f"seed {seed}, plan {plan}: {problem}\n{nest}")
    if folder is not None:
        (folder / f"seed_{seed}_{len(tally.failed)}.txt").write_text(tally.failed[-1])


def _processor_times() -> tuple[float, float]:
    """Seconds of this process and of those it started."""
    used = (resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))
    own, others = (usage.ru_utime + usage.ru_stime for usage in used)
    return own, others


def main() -> None:
    """The command."""
    first, count = int(sys.argv[1]), int(sys.argv[2])
    folder = Path(sys.argv[3]) if len(sys.argv) > 3 else None
    if folder is not None:
        folder.mkdir(parents=True, exist_ok=True)
    tally = run(range(first, first + count), folder)
    print("\n".join([*tally.lines(), *tally.failed]))


if __name__ == "__main__":
    main()
