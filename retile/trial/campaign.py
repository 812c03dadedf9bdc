"""The driver: take a nest out of its file, build it and its variants, verify them, time them, keep the records."""

from __future__ import annotations

import hashlib
import os
import shutil
import signal
import threading
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from .. import host
from ..model import Nest, RetileError, Variant
from ..scratch import Scratch
from .build import Workshop, compiler_version, harness
from .kernel import kernel_of
from .layout import Bench, Layout, job, unknown_fills
from .memory import plain
from .records import FILLS, Campaign, Difference, Event, Progress, Settings, Trial, Verification
from .run import Run, run
from .sizes import checked
from .statistics import Estimate, median
from .verification import Case, Fill, Verifier, bytes_of, difference_of

if TYPE_CHECKING:
    from ..judge import Finding
    from ..source import Source

_BUSY = 1.15  # elapsed over computing time from which other programs are suspected
_WIDE = 1.5  # upper over lower end of an interval that says little
_COPIES = 3  # the arrays themselves, what they held first, what the original leaves


class Stopped(KeyboardInterrupt):
    """The process was asked to end (SIGTERM)."""


@contextmanager
def stoppable() -> Iterator[None]:
    """Turn SIGTERM into an exception while trials run, so that children end and folders go."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return

    def stop(number: int, frame: Any) -> None:
        raise Stopped

    before = signal.signal(signal.SIGTERM, stop)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


@contextmanager
def workshop(source: Source, settings: Settings) -> Iterator[Workshop]:
    """A scratch folder with a compiler; the folder is gone afterwards, whatever happens."""
    scratch = Scratch("trial")
    try:
        call = replace(source.call, cc=settings.cc or source.call.cc)
        if shutil.which(call.command[0]) is None:
            raise RetileError(f"the compiler {call.cc} is not there; name another with --cc")
        yield Workshop(scratch.folder, call, os.path.dirname(os.path.abspath(source.path)))
    finally:
        scratch.remove()


def verify(source: Source, nest: Nest, variant: Variant, settings: Settings = Settings()) -> Verification:
    """Whether one variant leaves the same bytes as the original; see ``verify_all``."""
    return verify_all(source, nest, [variant], settings)[0]


def verify_all(
    source: Source, nest: Nest, variants: Sequence[Variant], settings: Settings = Settings()
) -> list[Verification]:
    """Verify variants of one nest, which share the original's build and runs.

    Both sides are compiled without contraction, with the sanitizers where the compiler has them, and run at awkward
    sizes.  A variant that does not compile, stops or differs is a Verification that says so.  Raises RetileError if the
    nest cannot be run on its own or there is no compiler.
    """
    _check(settings)
    with workshop(source, settings) as shop, stoppable():
        bench = _bench(source, nest, variants, settings)
        original, texts = _texts(bench, variants)
        pairs = list(zip(variants, texts))
        return Verifier(bench, shop, settings).verify(pairs, original, lambda text: None)


def measure(
    source: Source,
    nest: Nest,
    variants: Sequence[Variant],
    sizes: Mapping[str, int],
    settings: Settings = Settings(),
    on_progress: Progress | None = None,
    command: str = "retile measure",
    judge: Callable[[Variant], Finding] | None = None,
) -> Campaign:
    """Judge and verify variants and time them against the original at the given sizes, round by round in one process.

    ``sizes`` are by name as the nest's parameters are shown; ``command`` is what the user typed, for the message that
    names a missing size; ``judge`` says of a variant what it computes, by its text.  Ctrl-C and SIGTERM end the campaign early; what was measured so far is returned with
    ``interrupted`` set.  Raises RetileError for sizes that are missing, unknown or undefined, for arrays that do not
    fit into memory, and where ``verify_all`` does.
    """
    _check(settings)
    with workshop(source, settings) as shop, stoppable():
        bench = _bench(source, nest, variants, settings)
        chosen = checked(bench, sizes, command)
        case = Case(chosen, _layout(bench, chosen))
        _check_memory(nest, bytes_of(bench, case.layout))
        state = _State(bench, shop, settings, case, list(variants), on_progress, judge)
        try:
            state.run()
        except KeyboardInterrupt:
            state.interrupted = True
        return state.campaign(source)


def _check(settings: Settings) -> None:
    for name, way in settings.fills:
        if way not in FILLS:
            raise RetileError(f"{name} cannot be filled {way!r}; ways of filling are {', '.join(FILLS)}")
    if not settings.seconds > 0:
        raise RetileError("the time for measuring must be more than 0 seconds")


def _bench(source: Source, nest: Nest, variants: Sequence[Variant], settings: Settings) -> Bench:
    bench = Bench(kernel_of(source, nest, [variant.nest_text for variant in variants]))
    unknown = unknown_fills(bench, dict(settings.fills))
    if unknown:
        names = sorted({cell.name for cell in bench.kernel.memory.cells})
        raise RetileError(
            f"{nest.address}: the nest has nothing named {', '.join(unknown)} to fill; it has {', '.join(names)}"
        )
    return bench


def _texts(bench: Bench, variants: Sequence[Variant]) -> tuple[bytes, list[bytes]]:
    kernel = bench.kernel
    return kernel.text(), [kernel.text(variant.nest_text, variant.includes) for variant in variants]


def _layout(bench: Bench, sizes: dict[str, int]) -> Layout:
    try:
        return bench.layout(sizes)
    except RetileError as problem:
        shown = ", ".join(f"{name} = {value}" for name, value in sizes.items())
        raise RetileError(f"{bench.nest.address}: {problem}; the sizes are {shown or 'fixed'}") from None


def _check_memory(nest: Nest, needed: int) -> None:
    """The arrays must fit, with their copies."""
    try:
        text = Path("/proc/meminfo").read_text(encoding="ascii")
        free = next(int(line.split()[1]) * 1024 for line in text.splitlines() if line.startswith("MemAvailable"))
    except (OSError, StopIteration, ValueError):
        return
    if _COPIES * needed > free:
        raise RetileError(
            f"{nest.address}: the arrays take about {needed >> 20} MiB, {_COPIES} copies are kept and only "
            f"{free >> 20} MiB are free; choose smaller sizes"
        )


@dataclass
class _State:
    """A campaign on its way; whatever happens, ``campaign`` gives what is there."""

    bench: Bench
    shop: Workshop
    settings: Settings
    case: Case
    variants: list[Variant]
    on_progress: Progress | None
    judge: Callable[[Variant], Finding] | None = None
    trials: list[Trial] = field(default_factory=list)
    fill: Fill = Fill("random")
    clocked: list[int] = field(default_factory=list)  # trial numbers of the kernels that are timed, in their order
    clock: Run = field(default_factory=Run)
    interrupted: bool = False
    notes: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.trials = [Trial(variant.plan.order_text, options_text(variant), None) for variant in self.variants]

    def run(self) -> None:
        original, texts = _texts(self.bench, self.variants)
        if self.judge is not None:
            self._judge(self.judge)
        if self.settings.verify:
            self._verify(original, texts)
        self._time(original, texts)

    def _judge(self, judge: Callable[[Variant], Finding]) -> None:
        for number, variant in enumerate(self.variants):
            self.tell("judge", number, len(self.variants), self.trials[number].plan)
            found = judge(variant)
            failure = None if found.judged is not False else f"it computes something else: {found.reason}"
            self.trials[number] = replace(self.trials[number], finding=found.as_json(), failure=failure)

    def tell(self, stage: str, done: int, total: int, text: str) -> None:
        """Report progress, if anybody listens."""
        if self.on_progress is not None:
            self.on_progress(Event(stage, done, total, text))

    def _verify(self, original: bytes, texts: list[bytes]) -> None:
        steps = iter(range(1_000_000))
        verifier = Verifier(self.bench, self.shop, self.settings)
        open_ones = [number for number, trial in enumerate(self.trials) if trial.failure is None]  # not judged wrong
        results = verifier.verify(
            [(self.variants[number], texts[number]) for number in open_ones],
            original,
            lambda text: self.tell("verify", next(steps), len(open_ones) + 1, text),
        )
        for number, result in zip(open_ones, results):
            failure = result.failure or _differs(result.difference)
            self.trials[number] = replace(self.trials[number], verification=result, failure=failure)

    def _time(self, original: bytes, texts: list[bytes]) -> None:
        good = [number for number, trial in enumerate(self.trials) if trial.failure is None]
        self.tell("build", 0, 1, f"{len(good) + 1} kernels")
        baseline, *built = self.shop.kernels(
            "timed", [original, *(texts[number] for number in good)], [*self.shop.call.flags, *self.settings.flags]
        )
        if baseline.path is None:
            raise RetileError(
                f"{self.bench.nest.address}: the nest cannot be built on its own:\n{baseline.complaint}"
            )
        paths = [baseline.path]
        for number, kernel in zip(good, built):
            if kernel.path is None:
                self.trials[number] = replace(self.trials[number], failure=kernel.complaint)
            else:
                paths.append(kernel.path)
                self.clocked.append(number)
        self._clock(paths)

    def _clock(self, paths: list[Path]) -> None:
        prefix = self.bench.kernel.prefix
        program = harness(self.shop.call.command, False, prefix)
        fills = {plain(name): way for name, way in self.settings.fills}
        verifier = Verifier(self.bench, self.shop, replace(self.settings, sanitize=False))
        self.fill = verifier.choose_fill(paths[0], program, self.case)
        self.notes += self.fill.notes
        fewest, most = self.settings.rounds
        while True:
            self.tell("time", 0, len(paths), f"{self.settings.seconds:g} s for {len(paths)} kernels")
            text = (
                job(self.case.layout, self.bench, fills, self.fill.way)
                + f"prepare {self.settings.seed}\nverify 0 {len(paths) - 1}\n"
                f"clock {self.settings.seconds} {min(fewest, self.settings.least_rounds)} {fewest} {most}\n"
            )
            self.clock = Run()
            limit = self.settings.limit + self.settings.seconds
            run(program, prefix, paths, text, limit, self.clock)
            if self.clock.finished or self.clock.late:
                break
            self._drop(paths)
        if self.clock.late:
            self.notes.append(f"clocking was ended after {limit:g} s")

    def _drop(self, paths: list[Path]) -> None:
        """Leave out the kernel that ended a run."""
        unloadable = next(self.clock.of("unloadable"), None)
        kernel = int(unloadable[0]) if unloadable else self.clock.last_kernel()
        reason = self.clock.reason()
        outside = next(self.clock.of("outside"), None)
        if outside:
            reason = f"it writes outside {self.bench.kernel.memory.blocks[int(outside[1])].name}"
        if not kernel:
            raise RetileError(f"{self.bench.nest.address}: the original does not run at these sizes: {reason}")
        number = self.clocked.pop(kernel - 1)
        paths.pop(kernel)
        self.trials[number] = replace(self.trials[number], failure=f"the timed build stops: {reason}")

    # ------------------------------------------------------------ records

    def campaign(self, source: Source) -> Campaign:
        """What is known so far."""
        rounds = self._rounds()
        baseline = tuple(times[0] for times in rounds)
        for kernel, number in enumerate(self.clocked, 1):
            samples = tuple(times[kernel] for times in rounds)
            self.trials[number] = self._compared(
                replace(self.trials[number], samples=samples, baseline_samples=baseline), kernel
            )
        self._warn(baseline)
        nest, settings = self.bench.nest, self.settings
        return Campaign(
            address=str(nest.address),
            host=host.describe().as_json(),
            sizes=tuple(self.case.sizes.items()),
            baseline_samples=baseline,
            trials=tuple(self.trials),
            compiler=self.shop.call.cc,
            compiler_version=compiler_version(self.shop.call.command),
            flags=(*self.shop.call.flags, *settings.flags),
            seed=settings.seed,
            fills=settings.fills,
            fill=self.fill.way,
            source_sha256=hashlib.sha256(source.encode(source.text)).hexdigest(),
            measured_at=datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ"),
            interrupted=self.interrupted,
            notes=tuple(dict.fromkeys(self.notes)),
        )

    def _rounds(self) -> list[list[float]]:
        """The times of all complete rounds, by kernel; a time of 0 counts as one tick of a nanosecond."""
        kernels = len(self.clocked) + 1
        times: dict[int, dict[int, float]] = {}
        for number, kernel, seconds, _ in self.clock.of("time"):
            times.setdefault(int(number), {})[int(kernel)] = max(float(seconds), 1e-9)
        return [
            [times[number][kernel] for kernel in range(kernels)]
            for number in sorted(times)
            if len(times[number]) == kernels
        ]

    def _compared(self, trial: Trial, kernel: int) -> Trial:
        """Add how the timed build's outputs compare with the baseline's."""
        if any(int(answer[0]) == kernel for answer in self.clock.of("same")):
            return replace(trial, identical=True)
        for answer in self.clock.of("wrong"):
            if int(answer[0]) == kernel:
                return replace(
                    trial,
                    identical=False,
                    largest_difference=float(answer[2]),
                    largest_relative=float(answer[3]),
                    cause=self._cause(trial),
                )
        return trial

    def _cause(self, trial: Trial) -> str:
        found = {answer[0]: answer for answer in ([str(int(a[0])), *a[1:]] for a in self.clock.of("differs"))}
        place = ""
        for kernel, number in enumerate(self.clocked, 1):
            if self.trials[number].plan == trial.plan and str(kernel) in found:
                place = f"; first at {difference_of(self.bench, self.case, found[str(kernel)][1:])}"
        if any(flag in self.settings.flags for flag in ("-ffast-math", "-Ofast", "-fassociative-math")):
            return f"the flags let the compiler reassociate floating-point operations{place}"
        if trial.verification and trial.verification.loose:
            return f"updates run in another order{place}"
        if trial.verified:
            return (
                "without contraction both leave the same bytes: with these flags the compiler fuses multiplications "
                f"and additions in one and not in the other (-ffp-contract=off prevents it){place}"
            )
        return f"not known{place}"

    def _warn(self, baseline: tuple[float, ...]) -> None:
        step = host.timer_step().value
        if baseline and isinstance(step, float) and min(baseline) < 100 * step:
            self.notes.append(
                f"one call takes {min(baseline):.3g} s and the clock steps by {step:.3g} s; "
                "choose larger sizes for times that can be told apart"
            )
        elapsed, used = (sum(float(answer[at]) for answer in self.clock.of("time")) for at in (2, 3))
        if elapsed > _BUSY * used and elapsed > 0.05:
            self.notes.append(
                f"the processor was shared: {elapsed:.3g} s went by for {used:.3g} s of computing; "
                "measure again on a quiet machine"
            )
        if baseline and len(baseline) < 6:
            self.notes.append(
                f"{len(baseline)} rounds are too few for an interval (6 are needed): a round takes about "
                f"{median(self._lengths()):.3g} s; give more --seconds or choose smaller sizes"
            )
        wide = [trial.plan for trial in self.trials if _is_wide(trial.speedup)]
        if wide:
            named = ", ".join(f'"{plan}"' for plan in wide)
            self.notes.append(
                f"the interval of {named} is wide: its ends differ by more than a factor of {_WIDE:g}; "
                "give more --seconds or measure on a quiet machine"
            )

    def _lengths(self) -> list[float]:
        return [sum(times) for times in self._rounds()]


def _is_wide(found: Estimate | None) -> bool:
    return found is not None and found.low is not None and found.high is not None and found.high > _WIDE * found.low


def _differs(difference: Difference | None) -> str | None:
    return f"it leaves other results than the original: {difference}" if difference else None


def options_text(variant: Variant) -> str:
    """The options of a variant's plan as they are typed after the ``;``."""
    _, _, options = variant.plan.text.partition(";")
    return options.strip()
