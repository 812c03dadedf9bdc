"""One execution of a nest as arrays of numbers: does an order keep its conflicts?

The instances come from the interpreter's log.  A pair conflicts if both touch a cell that outlives the instance and one
writes it; it is enough to look at neighbours in the history of each cell, because an order is transitive.  Every
instance gets a time vector from the plan's text alone, as the plan is defined.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from oracle import Log, Unsupported
from oracle_values import Instance, LoopAt

FAR = 1 << 50  # before and after all values of a loop
_LOOP = r"[A-Za-z_]\w*(?:@\d+)?"
_TERM = re.compile(rf"(?:({_LOOP})|\(([^()]*)\))(?::(\w+))?")

# (line, loop, value, chunks only): the statements of the line stand where the loop, which is not around them, has this value
Aligned = list[tuple[int, str, Callable[[dict[str, int]], int], bool]]


@dataclass(frozen=True)
class Term:
    """One term of a plan: coefficients of loops, and the chunk or its name."""

    loops: tuple[tuple[str, int], ...]
    chunk: str | None
    skewed: bool


def terms_of(plan: str) -> tuple[Term, ...]:
    """The terms of a plan's text, options left out."""
    found = []
    for text in plan.split(";")[0].split():
        match = _TERM.fullmatch(text)
        if match is None:
            raise Unsupported(f"term {text}")
        name, form, chunk = match.groups()
        found.append(Term(((name, 1),) if name else _form(form), chunk, not name))
    return tuple(found)


def threaded(plan: str) -> int | None:
    """Which term's iterations threads share, by the options of a plan's text."""
    match = re.search(r"threads at (\S+?)(?:,|$)", plan)
    return None if match is None else plan.split(";")[0].split().index(match[1])


def _form(text: str) -> tuple[tuple[str, int], ...]:
    parts = re.finditer(rf"([+-]?)(?:(\d+)\*)?({_LOOP})", text)
    return tuple((m[3], (-1 if m[1] == "-" else 1) * int(m[2] or 1)) for m in parts)


def _is(loop: LoopAt, name: str) -> bool:
    base, _, line = name.partition("@")
    return loop.name == base and line in ("", str(loop.line))


class Execution:
    """What ran, in the original order."""

    def __init__(self, log: Log) -> None:
        self.log = log
        self.lines = np.array([(i.line, i.column) for i in log], dtype=np.int64).reshape(-1, 2)
        self.pairs = np.array(list(_conflicts(log)), dtype=np.int64).reshape(-1, 2)
        self._loops: dict[str, tuple[LoopAt, np.ndarray, np.ndarray, np.ndarray]] = {}

    def reversed(self, plan: str, aligned: Aligned = [], cuts: Mapping[str, int] = {}) -> np.ndarray:  # noqa: B006
        """The numbers of those pairs that the plan puts the other way round."""
        times = self.times(plan, aligned, cuts)
        return np.flatnonzero(earlier(times[self.pairs[:, 1]], times[self.pairs[:, 0]]))

    def raced(self, plan: str, aligned: Aligned = [], cuts: Mapping[str, int] = {}) -> np.ndarray:  # noqa: B006
        """The numbers of those pairs that lie in different iterations of the loop that threads share."""
        level = threaded(plan)
        if level is None:
            return np.array([], dtype=np.int64)
        times = self.times(plan, aligned, cuts)
        one, other = times[self.pairs[:, 0]], times[self.pairs[:, 1]]
        return np.flatnonzero((one[:, :level] == other[:, :level]).all(axis=1) & (one[:, level] != other[:, level]))

    def told(self, pair: int) -> str:
        """A conflicting pair in words."""
        first, second = (self.log[at] for at in self.pairs[pair])
        return f"{first} before {second}"

    def times(self, plan: str, aligned: Aligned = [], cuts: Mapping[str, int] = {}) -> np.ndarray:  # noqa: B006
        """The time vector of every instance; equal ones stay in the original order."""
        terms = terms_of(plan)
        return np.stack([self._moment(term, aligned, cuts) for term in terms], axis=1)

    def _moment(self, term: Term, aligned: Aligned, cuts: Mapping[str, int]) -> np.ndarray:
        chunk = None if term.chunk is None else cuts[term.chunk] if term.chunk in cuts else int(term.chunk)
        total, place = np.zeros(len(self.log), dtype=np.int64), np.zeros(len(self.log), dtype=np.int64)
        unit = chunk
        for name, factor in term.loops:
            known, around, value, number = self._loop(name)
            around, value, number = self._with_aligned(name, known, around, value, number, aligned, chunk is not None)
            dependent = known.dependent and not term.skewed
            by_value = dependent or (term.skewed and known.step == 1)
            coordinate = (value if (known.step or 1) > 0 or term.skewed else -value) if by_value else number
            total += factor * coordinate
            missing = ~around & (place == 0)
            before = (self.lines[:, 0] < known.line) | ((self.lines[:, 0] == known.line) & (self.lines[:, 1] < known.column))
            place = np.where(missing, np.where(before, -1, 1), place)
            unit = unit and (chunk * abs(known.step) if dependent else chunk)
        total = total // unit if unit else total
        return np.where(place == 0, total, place * FAR)

    def _loop(self, name: str) -> tuple[LoopAt, np.ndarray, np.ndarray, np.ndarray]:
        """A loop; which instances are in it, its values and its iteration numbers there."""
        if name not in self._loops:
            known = next((loop for loop in self.log.loops if _is(loop, name)), None)
            if known is None:
                raise Unsupported(f"no loop {name}")
            at = [next((loop for loop in i.loops if loop.line == known.line and loop.column == known.column), None)
                  for i in self.log]
            seen = next((loop for loop in at if loop is not None), known)
            self._loops[name] = (seen, np.array([loop is not None for loop in at], dtype=bool),
                                 np.array([0 if loop is None else loop.value for loop in at], dtype=np.int64),
                                 np.array([0 if loop is None else loop.iteration for loop in at], dtype=np.int64))
        return self._loops[name]

    def _with_aligned(self, name: str, loop: LoopAt, around: np.ndarray, value: np.ndarray, number: np.ndarray,
                      aligned: Aligned, chunk: bool) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        for line, of, form, chunks_only in aligned:
            if of == name and (chunk or not chunks_only):
                around, value, number = around.copy(), value.copy(), number.copy()
                for at in np.flatnonzero(self.lines[:, 0] == line):
                    if not around[at]:
                        around[at], value[at] = True, form(self.log[at].iterators)
                        number[at] = (value[at] - loop.first) // loop.step
        return around, value, number


def earlier(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Where the vectors of one come before those of the other."""
    before, same = np.zeros(len(one), dtype=bool), np.ones(len(one), dtype=bool)
    for column in range(one.shape[1]):
        before |= same & (one[:, column] < other[:, column])
        same &= one[:, column] == other[:, column]
    return before


def _conflicts(log: Log) -> Iterator[tuple[int, int]]:
    """Neighbours in the history of each cell, of which one writes; within one execution of the nest."""
    writer: dict = {}
    readers: dict = {}
    for at, instance in enumerate(log):
        for obj, offset, writes in instance.accesses:
            if is_private(obj):
                continue
            key = (instance.run, obj.kind, obj.declared, offset)
            if writes:
                before = readers.pop(key, None) or ([writer[key]] if key in writer else [])
                yield from ((one, at) for one in before if one != at)
                writer[key] = at
            else:
                if key in writer and writer[key] != at:
                    yield writer[key], at
                readers.setdefault(key, []).append(at)


def is_private(obj: object) -> bool:
    """True for a number or pointer of the function or the nest: it may get storage of its own, and is judged by what is
    computed."""
    return obj.kind in ("local", "block") and getattr(obj.type, "of", None) is None and \
        (hasattr(obj.type, "floating") or hasattr(obj.type, "to"))


__all__ = ["Aligned", "Execution", "Instance", "earlier", "is_private", "terms_of"]
