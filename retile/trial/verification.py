"""Do variants leave the same bytes as the original?  Both are built without contraction and run at awkward sizes."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from ..model import AssumptionCode, Plan, RetileError, Variant
from .build import Built, Workshop, can_sanitize, harness, strict_flags
from .layout import Bench, Layout, job, overlapping
from .memory import Block, plain, value_of
from .records import Difference, Settings, Verification
from .run import Run, run
from .sizes import uncovered, verification_sizes
from .tolerance import inexact_outputs

_FILLS = ("random", "diagonal-dominant", "positive")
_MOST_BYTES = 1 << 28  # of one case's arrays


@dataclass(frozen=True)
class Case:
    """One set of sizes to verify at."""

    sizes: dict[str, int]
    layout: Layout
    overlap: str = ""  # which pointers overlap, in words


@dataclass
class _Candidate:
    """A variant on its way through the cases."""

    built: Built
    plan: Plan
    loose: tuple[str, ...] = ()  # storages that the plan lets round differently
    allowed: float = 0.0  # the largest relative difference that was allowed there
    met: float = 0.0  # the largest difference that was met there
    passed: list[Case] = field(default_factory=list)
    difference: Difference | None = None
    failure: str | None = None

    @property
    def open(self) -> bool:
        return self.difference is None and self.failure is None


@dataclass(frozen=True)
class Fill:
    """How arrays are filled, and what was noticed about it."""

    way: str
    notes: tuple[str, ...] = ()


def bytes_of(bench: Bench, layout: Layout) -> int:
    """About how many bytes the arrays of a layout take (elements of unknown size counted as 8 bytes)."""
    widths = {plain(storage.object): storage.element_bytes for storage in bench.nest.storages}
    blocks = bench.kernel.memory.blocks
    return sum((widths.get(blocks[number].name) or 8) * extent.count for number, extent in layout.extents.items())


class Verifier:
    """Verifies the variants of one nest together."""

    def __init__(self, bench: Bench, workshop: Workshop, settings: Settings) -> None:
        self.bench, self.workshop, self.settings = bench, workshop, settings
        self.sanitize = settings.sanitize and can_sanitize(workshop.call.command)
        self.prefix = bench.kernel.prefix
        self.program = harness(workshop.call.command, self.sanitize, self.prefix)
        self.flags = strict_flags([*workshop.call.flags, *settings.flags], self.sanitize)
        self.fills = {plain(name): way for name, way in settings.fills}
        self.notes: list[str] = []

    def cases(self, variants: Sequence[Variant]) -> list[Case]:
        """The sizes to verify at, each with its layout; RetileError if there is no case at all."""
        found: list[Case] = []
        problem = ""
        for sizes in verification_sizes(self.bench, [variant.plan for variant in variants], self.settings.trust):
            try:
                layout = self.bench.layout(sizes)
            except RetileError as reason:
                problem = str(reason)
                continue
            if bytes_of(self.bench, layout) <= _MOST_BYTES:
                found.append(Case(sizes, layout))
        if not found or (problem and not any(self.bench.work(case.sizes) for case in found)):
            problem = problem or "no sizes satisfy what the nest needs"
            raise RetileError(f"{self.bench.nest.address}: there is nothing to verify at: {problem}")
        return found if self.settings.trust else found + self._overlapping(found, variants)

    def _overlapping(self, cases: Sequence[Case], variants: Sequence[Variant]) -> list[Case]:
        """Cases in which pointers overlap that the variants assume do not: they must notice."""
        pairs = {
            assumption.storages
            for variant in variants
            if variant.judgement is not None
            for assumption in variant.judgement.assumptions
            if assumption.code is AssumptionCode.NO_OVERLAP and len(assumption.storages) == 2
        }
        found = []
        some = [case for case in cases if self.bench.work(case.sizes) > 0][-2:]
        for first, second in sorted(pairs):
            for case in some:
                for shift in (0, 1):
                    layout = overlapping(case.layout, self.bench, first, second, shift)
                    if layout is not None:
                        found.append(replace(case, layout=layout, overlap=f"{first} and {second} overlap"))
        return found

    def verify(
        self, texts: Sequence[tuple[Variant, bytes]], original: bytes, step: Callable[[str], None]
    ) -> list[Verification]:
        """One verification for each variant's text; ``step`` is told what is done next."""
        step(f"build {len(texts) + 1} kernels")
        baseline, *built = self.workshop.kernels("strict", [original, *(text for _, text in texts)], self.flags)
        if baseline.path is None:
            raise RetileError(
                f"{self.bench.nest.address}: the nest cannot be built on its own:\n{baseline.complaint}"
            )
        candidates = [
            _Candidate(
                kernel, variant.plan, inexact_outputs(self.bench.nest, variant.plan), failure=kernel.complaint
            )
            for kernel, (variant, _) in zip(built, texts)
        ]
        cases = self.cases([variant for variant, _ in texts])
        fill = self.choose_fill(
            baseline.path, self.program, max(cases, key=lambda case: self.bench.work(case.sizes))
        )
        self._run_all(baseline.path, candidates, cases, fill, step)
        return [self._result(candidate, fill) for candidate in candidates]

    def choose_fill(self, baseline: Path, program: Path, case: Case) -> Fill:
        """The first way of filling after which the original leaves changed and finite outputs at these sizes."""
        tried: list[tuple[str, int, int]] = []
        stopped = ""
        for way in _FILLS:
            found = self._original(baseline, program, case, way)
            counts = next(found.of("changed"), None)
            if counts is None:
                stopped = found.reason()
                continue
            changed, finite = int(counts[0]), int(counts[1])
            if changed and finite == changed:
                note = (
                    ()
                    if not tried and not stopped
                    else (
                        f"arrays are filled {way}: {_FILLS[0]} values "
                        + ("stop the original" if not tried else "give infinite results or none at all"),
                    )
                )
                return Fill(way, note)
            tried.append((way, changed, finite))
        if not tried:
            raise RetileError(
                f"{self.bench.nest.address}: the original does not run on its own at {_sizes_text(case)}: {stopped}"
            )
        way, changed, finite = max(tried, key=lambda entry: (entry[2], entry[1]))
        what = (
            "no output changes"
            if not changed
            else f"{changed - finite} of {changed} changed outputs are not finite"
        )
        return Fill(way, (f"arrays are filled {way}, which proves little: {what}; choose with --fill",))

    def _original(self, baseline: Path, program: Path, case: Case, way: str) -> Run:
        text = job(case.layout, self.bench, self.fills, way) + f"prepare {self.settings.seed}\nverify 0 0\n"
        return run(program, self.prefix, [baseline], text, self.settings.limit)

    def _run_all(
        self,
        baseline: Path,
        candidates: list[_Candidate],
        cases: list[Case],
        fill: Fill,
        step: Callable[[str], None],
    ) -> None:
        """Run all cases; after a crash the rest goes on in a new process without the one that crashed."""
        left = list(cases)
        while left and any(candidate.open for candidate in candidates):
            running = [candidate for candidate in candidates if candidate.open]
            step(f"run {len(left)} sizes")
            paths = [baseline, *(candidate.built.path for candidate in running if candidate.built.path)]
            found = run(self.program, self.prefix, paths, self._job(left, running, fill), self.settings.limit)
            done = self._understand(found, running, left)
            if found.finished:
                return
            original_failed = self._blame(found, running, left[done])
            left = left[done + 1 :] if original_failed else left[done:]

    def _job(self, cases: Sequence[Case], running: Sequence[_Candidate], fill: Fill) -> str:
        parts = [f"tolerant {number}\n" for number, candidate in enumerate(running, 1) if candidate.loose]
        names = {name for candidate in running for name in candidate.loose}
        memory = self.bench.kernel.memory
        parts += [f"loose {cell.number}\n" for name in sorted(names) for cell in memory.cells_of(name)]
        for number, case in enumerate(cases):
            parts.append(
                f"case {number}\n{job(case.layout, self.bench, self.fills, fill.way)}"
                f"prepare {self.settings.seed}\nverify 0 {len(running)}\n"
            )
        return "".join(parts)

    def _understand(self, found: Run, running: list[_Candidate], cases: list[Case]) -> int:
        """Note what was compared; the number of the last case that began."""
        at = 0
        for answer in found.answers:
            if answer[0] == "case":
                at = int(answer[1])
            elif answer[0] == "same":
                candidate = running[int(answer[1]) - 1]
                if cases[at] not in candidate.passed:
                    candidate.passed.append(cases[at])
            elif answer[0] == "within":
                candidate = running[int(answer[1]) - 1]
                candidate.allowed = max(candidate.allowed, float(answer[2]))
                candidate.met = max(candidate.met, float(answer[3]))
            elif answer[0] == "differs":
                candidate = running[int(answer[1]) - 1]
                candidate.difference = candidate.difference or difference_of(self.bench, cases[at], answer[2:])
            elif answer[0] == "moved":
                running[int(answer[1]) - 1].failure = "it changes a pointer that the original leaves alone"
        return at

    def _blame(self, found: Run, running: list[_Candidate], case: Case) -> bool:
        """Note who ended a run; True if it was the original, which is then no witness at these sizes."""
        reason = found.reason() + f" at {_sizes_text(case)}"
        outside, unloadable = next(found.of("outside"), None), next(found.of("unloadable"), None)
        kernel = int(unloadable[0]) if unloadable else found.last_kernel()
        if outside:
            name = self.bench.shown(self.bench.kernel.memory.blocks[int(outside[1])].name)
            reason = f"it writes outside {name} at {_sizes_text(case)}"
        if kernel is None or (unloadable and kernel == 0):
            raise RetileError(f"{self.bench.nest.address}: the nest cannot be run on its own: {found.reason()}")
        if kernel == 0:
            self.notes.append(f"the original itself stops: {reason}")
        else:
            running[kernel - 1].failure = found.reason() if unloadable else reason
        return kernel == 0

    def _result(self, candidate: _Candidate, fill: Fill) -> Verification:
        cases = [case.sizes for case in candidate.passed]
        notes = [*fill.notes, *self.notes]
        if candidate.open:
            notes += uncovered(self.bench, [candidate.plan], cases)
        if self.settings.sanitize and not self.sanitize:
            notes.append(f"{self.workshop.call.cc} has no sanitizers here; only the borders of arrays were watched")
        failure = candidate.failure
        if candidate.open and not cases:
            failure = "the original ran at none of the sizes"
        return Verification(
            verified=candidate.open and bool(cases),
            cases=tuple(tuple(case.items()) for case in cases),
            sanitized=self.sanitize,
            fill=fill.way,
            difference=candidate.difference,
            failure=failure,
            notes=tuple(notes),
            loose=tuple(name for name in candidate.loose if self.bench.kernel.memory.cells_of(name)),
            tolerance=candidate.allowed if candidate.loose else None,
            largest_difference=candidate.met if candidate.loose else None,
        )


def difference_of(bench: Bench, case: Case, words: Sequence[str]) -> Difference:
    """The harness's words ``cell space number kind expected found`` as a difference."""
    cell = bench.kernel.memory.cells[int(words[0])]
    values = [float(word) if words[3] == "f" else int(word) for word in words[4:6]]
    index = _index(bench, case, bench.kernel.memory.blocks[cell.block], int(words[1]), int(words[2]))
    return Difference(bench.shown(cell.name), index, values[0], values[1], tuple(case.sizes.items()))


def _index(bench: Bench, case: Case, block: Block, space: int, number: int) -> tuple[int, ...]:
    """The subscripts of an element, as far as rows are known."""
    extent = case.layout.extents.get(block.number)
    if len([level for level in block.levels if level]) > 1:
        return space, number
    if not block.levels or block.levels[-1] == 0:
        return ()
    if len(block.dims) > 1:
        index: tuple[int, ...] = ()
        for dim in reversed(block.dims[1:]):
            length = max(1, value_of(dim, bench.scope, case.layout.values))
            number, place = divmod(number, length)
            index = (place, *index)
        return number, *index
    if extent and extent.row > 0 and extent.before == 0:
        return divmod(number, extent.row)
    return (number - extent.before if extent else number,)


def _sizes_text(case: Case) -> str:
    sizes = ", ".join(f"{name} = {value}" for name, value in case.sizes.items()) or "its fixed sizes"
    return f"{sizes}, where {case.overlap}" if case.overlap else sizes
