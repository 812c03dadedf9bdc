"""Brute force: what a nest does at given small sizes, and what a plan does to that order.

``verdict_at`` numbers the statement instances of a real execution by the plan's definition and looks at every pair that
shares a cell: no dependence theory, and nothing of the program under test but the interpreter of its judge.
``compare`` lets that judge compare a rewritten text with the original by what it computes.
"""

from __future__ import annotations

import functools
import math
import re
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from oracle_run import Program
from oracle_text import TooLong, Undefined, Unsupported, parallel_loops, parse
from oracle_values import Instance, LoopAt, cell_name
from retile.judge.judge import Judge, Setting
from retile.judge.program import Program as Judged
from retile.judge.tags import Book

__all__ = ["Aligned", "Clash", "Log", "Outcome", "TooLong", "Undefined", "Unsupported", "compare", "judge_of",
           "observe", "parse_terms", "times_of", "verdict_at"]


class Log(list[Instance]):
    """Statement instances in their order, and the loops of the nest in text order."""

    def __init__(self, instances: Iterable[Instance], loops: Sequence[LoopAt]) -> None:
        super().__init__(instances)
        self.loops = loops


# ---------------------------------------------------------------- plans


@dataclass(frozen=True)
class Term:
    """One term of a plan: coefficients of loops, and the chunk."""

    loops: tuple[tuple[str, int], ...]
    chunk: int | None
    skewed: bool


_LOOP = r"[A-Za-z_]\w*(?:@\d+)?"
_TERM = re.compile(rf"(?:({_LOOP})|\(([^()]*)\))(?::(\d+))?")


def parse_terms(plan: str) -> tuple[Term, ...]:
    """The terms of a plan's text, options left out."""
    terms = []
    for text in plan.split(";")[0].split():
        match = _TERM.fullmatch(text)
        if match is None:
            raise Unsupported(f"term {text}")
        name, form, chunk = match.groups()
        size = int(chunk) if chunk else None
        terms.append(Term(((name, 1),), size, False) if name else Term(_form(form), size, True))
    return tuple(terms)


def _form(text: str) -> tuple[tuple[str, int], ...]:
    found = []
    for part in re.finditer(rf"([+-]?)(?:(\d+)\*)?({_LOOP})", text):
        sign, factor, name = part.groups()
        found.append((name, (-1 if sign == "-" else 1) * int(factor or 1)))
    return tuple(found)


# ---------------------------------------------------------------- time


def _is(loop: LoopAt, name: str) -> bool:
    base, _, line = name.partition("@")
    return loop.name == base and (not line or loop.line == int(line))


def _coordinate(loop: LoopAt, skewed: bool) -> int:
    """Where an iteration of a loop stands, for a bare term or inside a skewed one."""
    if skewed:
        return loop.value if loop.step == 1 else loop.iteration
    if loop.dependent:
        return loop.value if (loop.step or 1) > 0 else -loop.value
    return loop.iteration


# (line, loop, value): the statements of the line stand where the loop, which is not around them, has this value.
Aligned = Sequence[tuple[int, str, Callable[[dict[str, int]], int], bool]]


@dataclass
class _Loops:
    """The loops that a plan names."""

    starts: dict[str, tuple[int, int]]
    seen: dict[str, LoopAt]

    @staticmethod
    def of(terms: Iterable[Term], instances: Log) -> _Loops:
        starts: dict[str, tuple[int, int]] = {}
        seen: dict[str, LoopAt] = {}
        for name in {name for term in terms for name, _ in term.loops}:
            known = next((loop for loop in instances.loops if _is(loop, name)), None)
            if known is None:
                raise Unsupported(f"no loop {name}")
            starts[name] = (known.line, known.column)
            ran = (loop for instance in instances for loop in instance.loops if _is(loop, name))
            seen[name] = next(ran, known)
        return _Loops(starts, seen)

    def around(self, instance: Instance, name: str, aligned: Aligned, chunk: bool) -> LoopAt | None:
        """The loop at the instance; one that is not around it if the plan says at which of its values it stands."""
        found = next((loop for loop in instance.loops if _is(loop, name)), None)
        if found is None:
            for line, loop, value, chunks_only in aligned:
                if line == instance.line and loop == name and (chunk or not chunks_only):
                    return replace(self.seen[name], value=value(instance.iterators))
        return found


def _moment(term: Term, instance: Instance, loops: _Loops, aligned: Aligned) -> float:
    """The instance's place with regard to one term; before or after the loop for a statement outside it."""
    total, around = 0, [loops.around(instance, name, aligned, term.chunk is not None) for name, _ in term.loops]
    for (name, factor), loop in zip(term.loops, around, strict=True):
        if loop is None:
            return -math.inf if (instance.line, instance.column) < loops.starts[name] else math.inf
        total += factor * _coordinate(loop, term.skewed)
    if term.chunk is None:
        return total
    unit = term.chunk * (abs(around[0].step) if around[0].dependent and not term.skewed else 1)
    return total // unit


def times_of(instances: Log, plan: str, aligned: Aligned = ()) -> list[tuple[float, ...]]:
    """The time vector of every instance under a plan."""
    terms = parse_terms(plan)
    loops = _Loops.of(terms, instances)
    return [tuple(_moment(term, instance, loops, aligned) for term in terms) for instance in instances]


# ---------------------------------------------------------------- observation


@functools.lru_cache(maxsize=64)
def _program(text: str, line: int | None, directory: Path | None) -> Program:
    return Program(text, line, directory)


def observe(text: str, function: str, line: int, sizes: dict[str, int], *, may: bool = False, steps: int = 100_000,
            directory: Path | None = None) -> Log:
    """The statement instances of the nest at ``line``, in order; raises Undefined if the call is undefined in C."""
    program = _program(text, line, directory)
    return Log(program.run(function, sizes, may=may, steps=steps).instances, program.loops)


@dataclass(frozen=True)
class Clash:
    """Two instances that share a cell and that a plan puts in the other order."""

    cell: str
    first: Instance
    second: Instance
    private: bool  # the cell is a scalar of the function or of the nest


@dataclass
class Outcome:
    """What a plan does to one execution."""

    instances: Log
    clashes: list[Clash] = field(default_factory=list)  # at most one per cell
    stale: list[Clash] = field(default_factory=list)  # reads that see another write when the plan's order is replayed

    @property
    def contradicts_legal(self) -> bool:
        """True if a verdict ``legal`` would be wrong.

        A reversed pair on memory of the caller or on an array is wrong.  One on a scalar of the function is only wrong
        if some read then sees another value, because a scalar that every iteration writes anew may be reused.
        """
        return bool(self.stale) or any(not clash.private for clash in self.clashes)


def verdict_at(text: str, function: str, line: int, plan: str, sizes: dict[str, int], *, may: bool = False,
               aligned: Aligned = (), steps: int = 100_000, directory: Path | None = None) -> Outcome:
    """All clashes of a plan at given sizes; pairs within one execution of the nest only."""
    instances = observe(text, function, line, sizes, may=may, steps=steps, directory=directory)
    outcome = Outcome(instances)
    for run in sorted({instance.run for instance in instances}):
        part = Log((instance for instance in instances if instance.run == run), instances.loops)
        times = times_of(part, plan, aligned)
        outcome.clashes += _reversed_pairs(part, times)
        outcome.stale += _stale_reads(part, times)
    return outcome


def _key(access: tuple) -> tuple:
    obj, offset, _ = access
    return (obj.kind, obj.declared, offset)


def _is_scalar(obj: object) -> bool:
    return obj.kind in ("local", "block") and getattr(obj.type, "of", None) is None and hasattr(obj.type, "floating")


def _reversed_pairs(instances: Log, times: list[tuple]) -> list[Clash]:
    latest_write: dict = {}
    latest: dict = {}
    found: dict = {}
    for at, instance in enumerate(instances):
        for access in instance.accesses:
            key, writes = _key(access), access[2]
            before = latest.get(key) if writes else latest_write.get(key)
            if before is not None and times[before] > times[at] and key not in found:
                private = _is_scalar(access[0])
                found[key] = Clash(cell_name(access[0], access[1]), instances[before], instance, private)
            for record in (latest, latest_write) if writes else (latest,):
                if key not in record or times[record[key]] < times[at]:
                    record[key] = at
    return list(found.values())


def _replay(instances: Log, order: list[int]) -> tuple[dict, dict]:
    """Who wrote what each read sees, and the last write of each cell."""
    writer: dict = {}
    seen: dict = {}
    for at in order:
        for number, access in enumerate(instances[at].accesses):
            key = _key(access)
            if access[2]:
                writer[key] = (at, number, access[0])
            else:
                seen[at, number] = writer.get(key)
    return seen, writer


def _stale_reads(instances: Log, times: list[tuple]) -> list[Clash]:
    original = list(range(len(instances)))
    seen, last = _replay(instances, original)
    seen_now, last_now = _replay(instances, sorted(original, key=lambda at: (times[at], at)))
    found = []
    for (at, number), writer in seen.items():
        if seen_now[at, number] != writer:
            obj, offset, _ = instances[at].accesses[number]
            found.append(Clash(cell_name(obj, offset), instances[writer[0]] if writer else instances[at], instances[at],
                               _is_scalar(obj)))
    for key, (at, _, obj) in last.items():
        if last_now[key][:2] != last[key][:2] and not _is_scalar(obj):
            found.append(Clash(str(key), instances[last_now[key][0]], instances[at], False))
    return found


# ---------------------------------------------------------------- tags


@functools.lru_cache(maxsize=16)
def judge_of(original: str, function: str, directory: Path | None = None) -> Judge:
    """The judge for variants of a text; the original runs once per sizes, whatever the number of variants."""
    return Judge(Judged(parse(original, directory), Book()), function)


@functools.lru_cache(maxsize=64)
def _variant(judge: Judge, text: str, directory: Path | None) -> Judged:
    return Judged(parse(text, directory), judge.book, parallel_loops(text))


def compare(original: str, variant: str, function: str, sizes: dict[str, int], *, steps: int = 200_000,
            directory: Path | None = None, reassociate: bool = False) -> list[str]:
    """What is wrong with the variant at these sizes; empty if nothing.  Raises Undefined if the original is."""
    judge = judge_of(original, function, directory)
    judge.steps = steps
    program = _variant(judge, variant, directory)
    return judge.compare(program, Setting.of(sizes), judge.rules(program, reassociate))
