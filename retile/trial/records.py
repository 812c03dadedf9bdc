"""What a campaign of trials found, as values and as a JSON file that can be read back."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ..model import RetileError
from .statistics import Estimate, estimate, speedup

FORMAT = 1
FILLS = ("random", "zero", "diagonal-dominant", "positive")


@dataclass(frozen=True)
class Settings:
    """How trials are run."""

    cc: str | None = None  # None: the compiler that the file was read with
    flags: tuple[str, ...] = ("-O3", "-march=native")  # of the timed builds
    fills: tuple[tuple[str, str], ...] = ()  # (array, way of filling), see FILLS
    seed: int = 1
    seconds: float = 10.0  # for clocking, all kernels together
    rounds: tuple[int, int] = (6, 1000)  # fewest (six give a 95 % interval) and most
    least_rounds: int = 3  # where the fewest would take more than half as long again as ``seconds``
    verify: bool = True
    sanitize: bool = True  # verification builds use the sanitizers where the compiler has them
    trust: bool = False  # variants are only called where their assumptions hold; do not try others
    limit: int = 600  # seconds after which a hanging run is ended


@dataclass(frozen=True)
class Event:
    """Progress: ``done`` of ``total`` steps of a stage."""

    stage: str  # ``judge``, ``verify``, ``build``, ``time``
    done: int
    total: int
    text: str


Progress = Callable[[Event], None]


@dataclass(frozen=True)
class Difference:
    """The first place where a variant leaves something else than the original."""

    array: str
    index: tuple[int, ...]  # row and place in it where rows are known, else the place
    expected: float | int
    found: float | int
    sizes: tuple[tuple[str, int], ...]

    def __str__(self) -> str:
        at = "".join(f"[{number}]" for number in self.index)
        sizes = ", ".join(f"{name} = {value}" for name, value in self.sizes)
        return f"{self.array}{at} is {self.found!r}, the original leaves {self.expected!r}" + (
            f" ({sizes})" if sizes else ""
        )


@dataclass(frozen=True)
class Verification:
    """Whether a variant leaves the same bytes as the original, without contraction.

    Where a plan sets aside the order of floating-point updates, what they change is compared within a tolerance.
    """

    verified: bool
    cases: tuple[tuple[tuple[str, int], ...], ...]  # the sizes at which both ran to the end
    sanitized: bool
    fill: str  # the way arrays without a wish were filled
    difference: Difference | None = None
    failure: str | None = None  # what the compiler, the sanitizer or the system said
    notes: tuple[str, ...] = ()
    loose: tuple[str, ...] = ()  # storages that were compared within a tolerance, not bit for bit
    tolerance: float | None = None  # the largest allowed there, relative to the largest number of the array
    largest_difference: float | None = None  # the largest difference that was met and allowed there


@dataclass(frozen=True)
class Trial:
    """One variant on this host."""

    plan: str
    options: str
    verification: Verification | None  # None: not asked for, or interrupted before
    samples: tuple[float, ...] = ()  # seconds per call, in the order of the rounds
    baseline_samples: tuple[float, ...] = ()  # of the same rounds
    identical: bool | None = None  # the timed builds leave the same bytes; None if not timed
    largest_difference: float | None = None
    largest_relative: float | None = None
    cause: str | None = None  # why timed builds differ
    failure: str | None = None  # why it was not timed
    finding: Mapping[str, Any] | None = None  # what the judge says of the text; None if nobody asked it

    @property
    def judged(self) -> bool | None:
        """What the judge says; None if it was not asked or could not run."""
        return self.finding["judged"] if self.finding is not None else None

    @property
    def verified(self) -> bool:
        """True if verification ran and found nothing, and the judge neither."""
        return self.verification is not None and self.verification.verified and self.judged is not False

    @property
    def seconds(self) -> Estimate | None:
        """Seconds per call; None if not timed."""
        return estimate(self.samples) if self.samples else None

    @property
    def speedup(self) -> Estimate | None:
        """Times faster than the baseline; None if not timed."""
        return speedup(self.baseline_samples, self.samples) if self.samples else None


@dataclass(frozen=True)
class Campaign:
    """A baseline and its variants, verified and timed in one go."""

    address: str
    host: Mapping[str, Any]
    sizes: tuple[tuple[str, int], ...]
    baseline_samples: tuple[float, ...]
    trials: tuple[Trial, ...]
    compiler: str
    compiler_version: str | None
    flags: tuple[str, ...]
    seed: int
    fills: tuple[tuple[str, str], ...]
    fill: str
    source_sha256: str
    measured_at: str  # UTC, ISO 8601
    interrupted: bool = False
    notes: tuple[str, ...] = ()

    @property
    def best(self) -> Trial | None:
        """The fastest trial that was verified; None if there is none."""
        timed = [t for t in self.trials if t.speedup is not None and (t.verified or t.verification is None)]
        return max(timed, key=lambda t: t.speedup.median if t.speedup else 0.0, default=None)

    @property
    def all_verified(self) -> bool:
        """True if no variant failed verification."""
        return all(trial.verified for trial in self.trials)

    def as_json(self) -> dict[str, Any]:
        """The document that ``measure --json`` prints and that result files hold."""
        return {
            "format": FORMAT,
            "address": self.address,
            "host": dict(self.host),
            "sizes": dict(self.sizes),
            "baseline": {"seconds": _estimate_json(self.baseline_samples), "samples": list(self.baseline_samples)},
            "trials": [_trial_json(trial) for trial in self.trials],
            "best": _trial_json(self.best) if self.best else None,
            "interrupted": self.interrupted,
            "compiler": self.compiler,
            "compiler_version": self.compiler_version,
            "flags": list(self.flags),
            "seed": self.seed,
            "fill": self.fill,
            "fills": dict(self.fills),
            "source_sha256": self.source_sha256,
            "measured_at": self.measured_at,
            "notes": list(self.notes),
        }


def _estimate_json(samples: tuple[float, ...]) -> dict[str, float | None] | None:
    return estimate(samples).as_json() if samples else None


def _trial_json(trial: Trial) -> dict[str, Any]:
    verification = trial.verification
    return {
        "plan": trial.plan,
        "options": trial.options,
        "verified": trial.verified,
        "judged": trial.judged,
        "tolerance": verification.tolerance if verification else None,
        "identical": trial.identical,
        "seconds": trial.seconds.as_json() if trial.seconds else None,
        "speedup": trial.speedup.as_json() if trial.speedup else None,
        "samples": list(trial.samples),
        "baseline_samples": list(trial.baseline_samples),
        "largest_difference": trial.largest_difference,
        "largest_relative": trial.largest_relative,
        "cause": trial.cause,
        "failure": trial.failure,
        "verification": _verification_json(verification) if verification else None,
        "judge": dict(trial.finding) if trial.finding is not None else None,
    }


def _verification_json(found: Verification) -> dict[str, Any]:
    difference = found.difference
    return {
        "verified": found.verified,
        "cases": [dict(case) for case in found.cases],
        "sanitized": found.sanitized,
        "fill": found.fill,
        "failure": found.failure,
        "notes": list(found.notes),
        "loose": list(found.loose),
        "tolerance": found.tolerance,
        "largest_difference": found.largest_difference,
        "difference": {
            "array": difference.array,
            "index": list(difference.index),
            "expected": difference.expected,
            "found": difference.found,
            "sizes": dict(difference.sizes),
        }
        if difference
        else None,
    }


def as_text(campaign: Campaign) -> str:
    """The JSON text of a result; numbers that JSON lacks (infinities, NaN) become null."""
    return json.dumps(_finite(campaign.as_json()), indent=1, allow_nan=False) + "\n"


def _finite(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _finite(part) for key, part in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(part) for part in value]
    if isinstance(value, float) and (value != value or value in (float("inf"), float("-inf"))):
        return None
    return value


def write_result(campaign: Campaign, path: str | None = None) -> str:
    """Write a result file, whole or not at all; its path, which without one is made from the time of measuring."""
    from ..source import replace_file

    target = path or f"retile-result-{campaign.measured_at.replace(':', '').replace('-', '')}.json"
    try:
        replace_file(target, as_text(campaign).encode("utf-8"))
    except OSError as problem:
        raise RetileError(f"{target}: cannot be written ({problem.strerror})") from None
    return target


# ---------------------------------------------------------------- reading back

_MOST_BYTES = 64_000_000


def read_result(path: str) -> Campaign:
    """The campaign in a result file; RetileError if the file is missing, too large, or anything else than a result."""
    try:
        file = Path(path)
        if file.stat().st_size > _MOST_BYTES:
            raise RetileError(f"{path}: too large for a result file")
        document = json.loads(file.read_text(encoding="utf-8"))
    except OSError as problem:
        raise RetileError(f"{path}: cannot be read ({problem.strerror})") from None
    except (ValueError, RecursionError) as problem:
        raise RetileError(f"{path}: not a result file ({problem})") from None
    try:
        return _campaign(_Part(document, "the document"))
    except _Wrong as problem:
        raise RetileError(f"{path}: not a result file that can be used: {problem}") from None


class _Wrong(Exception):
    """A field is missing or of the wrong kind."""


class _Part:
    """A JSON object whose fields are taken out with their kinds checked."""

    def __init__(self, value: object, name: str) -> None:
        if not isinstance(value, dict):
            raise _Wrong(f"{name} is no object")
        self.fields, self.name = value, name

    def take(self, field: str, *kinds: type) -> Any:
        """The field, which must be of one of these kinds; ``type(None)`` also stands for a missing one."""
        value = self.fields.get(field)
        allowed = isinstance(value, kinds) and (not isinstance(value, bool) or bool in kinds)
        if not allowed:
            raise _Wrong(f"{self.name} has no usable {field!r}")
        return value

    def texts(self, field: str) -> tuple[str, ...]:
        """A list of strings."""
        return tuple(_every(self.take(field, list), str, field))

    def samples(self, field: str) -> tuple[float, ...]:
        """A list of positive numbers of seconds."""
        found = tuple(float(value) for value in _every(self.take(field, list), (int, float), field))
        if any(not 0 < value < 1e9 for value in found):
            raise _Wrong(f"{self.name} has impossible times in {field!r}")
        return found

    def pairs(self, field: str, kind: type) -> tuple[tuple[str, Any], ...]:
        """An object with values of one kind."""
        held = self.take(field, dict)
        _every(list(held.values()), kind, field)
        return tuple(held.items())

    def parts(self, field: str) -> list[_Part]:
        """A list of objects."""
        return [_Part(value, f"an entry of {field!r}") for value in self.take(field, list)]


def _every(values: list[Any], kind: type | tuple[type, ...], field: str) -> list[Any]:
    if any(not isinstance(value, kind) or isinstance(value, bool) for value in values):
        raise _Wrong(f"{field!r} holds something of the wrong kind")
    return values


_NONE = type(None)


def _campaign(part: _Part) -> Campaign:
    if part.take("format", int) != FORMAT:
        raise _Wrong("it was written in another format; measure again")
    return Campaign(
        address=part.take("address", str),
        host=part.take("host", dict),
        sizes=part.pairs("sizes", int),
        baseline_samples=_Part(part.take("baseline", dict), "the baseline").samples("samples"),
        trials=tuple(_trial(trial) for trial in part.parts("trials")),
        compiler=part.take("compiler", str),
        compiler_version=part.take("compiler_version", str, _NONE),
        flags=part.texts("flags"),
        seed=part.take("seed", int),
        fills=part.pairs("fills", str),
        fill=part.take("fill", str),
        source_sha256=part.take("source_sha256", str),
        measured_at=part.take("measured_at", str),
        interrupted=part.take("interrupted", bool),
        notes=part.texts("notes"),
    )


def _trial(part: _Part) -> Trial:
    held = part.take("verification", dict, _NONE)
    trial = Trial(
        plan=part.take("plan", str),
        options=part.take("options", str),
        verification=_verification(_Part(held, "a verification")) if held is not None else None,
        samples=part.samples("samples"),
        baseline_samples=part.samples("baseline_samples"),
        identical=part.take("identical", bool, _NONE),
        largest_difference=part.take("largest_difference", int, float, _NONE),
        largest_relative=part.take("largest_relative", int, float, _NONE),
        cause=part.take("cause", str, _NONE),
        failure=part.take("failure", str, _NONE),
        finding=_finding(part),
    )
    if len(trial.samples) != len(trial.baseline_samples):
        raise _Wrong("a trial and its baseline have different numbers of samples")
    return trial


def _finding(part: _Part) -> Mapping[str, Any] | None:
    held = part.take("judge", dict, _NONE)
    if held is None:
        return None
    said = _Part(held, "a judge's finding")
    said.take("judged", bool, _NONE)
    said.take("reason", str)
    return held


def _verification(part: _Part) -> Verification:
    held = part.take("difference", dict, _NONE)
    return Verification(
        verified=part.take("verified", bool),
        cases=tuple(tuple(_Part(case, "a case").fields.items()) for case in part.take("cases", list)),
        sanitized=part.take("sanitized", bool),
        fill=part.take("fill", str),
        difference=_difference(_Part(held, "a difference")) if held is not None else None,
        failure=part.take("failure", str, _NONE),
        notes=part.texts("notes"),
        loose=part.texts("loose") if "loose" in part.fields else (),
        tolerance=part.take("tolerance", int, float, _NONE),
        largest_difference=part.take("largest_difference", int, float, _NONE),
    )


def _difference(part: _Part) -> Difference:
    number = (int, float, _NONE)
    nothing = float("nan")
    expected, found = part.take("expected", *number), part.take("found", *number)
    return Difference(
        part.take("array", str),
        tuple(_every(part.take("index", list), int, "index")),
        nothing if expected is None else expected,
        nothing if found is None else found,
        part.pairs("sizes", int),
    )
