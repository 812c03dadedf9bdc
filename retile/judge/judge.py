"""The judge: runs an original and its variants at small sizes and says where they part.

It knows no loops and no dependences.  Both texts are read anew, their functions become Python functions
(``program.py``) and are executed on memory of the judge's invention, every number with its history (``tags.py``).  Then
every cell that outlives them must have the original's history, and the variant may touch no cell of the caller that the
original does not touch (``verdict.py``).
"""

from __future__ import annotations

import gc
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import islice
from typing import Any

from .kinds import TooLong, Undefined
from .memory import Machine
from .program import Program
from .same import writes_alike
from .tags import Book
from .verdict import Outcome, Rules, differences

STEPS = 200_000  # iterations of loops that one execution may take
_MORE = 40  # steps of a variant for one of the limit: copies of short chunks outnumber what they serve
_TOLD = 5  # differences that are told
_FAILURES = 4  # allocations that are made to fail, one after the other


@dataclass(frozen=True)
class Setting:
    """The caller of one execution: integers by name, and pointers that lead into the same memory."""

    sizes: tuple[tuple[str, int], ...]
    together: tuple[tuple[str, str, int], ...] = ()  # (pointer, the pointer whose object it leads to, bytes behind it)
    default: int | None = None  # for integers that have no value of their own

    @staticmethod
    def of(sizes: Mapping[str, int]) -> Setting:
        """With integers by name only."""
        return Setting(tuple(sizes.items()))

    def __str__(self) -> str:
        parts = [f"{name} = {value}" for name, value in self.sizes]
        parts += [f"{name} = {other} + {shift} bytes" for name, other, shift in self.together]
        return ", ".join(parts) or "its fixed sizes"


class Judge:
    """Judges variants of one function; the original is run once per setting."""

    def __init__(self, original: Program, function: str, steps: int = STEPS) -> None:
        self.original, self.function, self.steps = original, function, steps
        self.asked: dict[str, int] = {}  # the integers by name that the original looked up so far
        self.reached = False  # the original came to the loop that is watched
        self._outcomes: dict[Setting, Outcome | Exception] = {}

    @property
    def book(self) -> Book:
        """Where the histories of all numbers stand; programs of variants must share it."""
        return self.original.book

    @property
    def pointers(self) -> frozenset[str]:
        """The function's arguments that are pointers."""
        from .kinds import Pointer

        parameters = self.original.compiled(self.function, None).parameters
        return frozenset(name for name, kind, _ in parameters if isinstance(kind, Pointer))

    def at(self, setting: Setting, steps: int | None = None) -> Outcome:
        """What the original does; raises Undefined, TooLong or Unsupported if it is no measure there."""
        if setting not in self._outcomes:
            try:
                self._outcomes[setting] = self._run(self.original, setting, steps or self.steps)
            except (Undefined, TooLong) as problem:
                self._outcomes[setting] = problem
        found = self._outcomes[setting]
        if isinstance(found, Exception):
            raise found
        return found

    def compare(self, variant: Program, setting: Setting, rules: Rules | None = None) -> list[str]:
        """What is wrong with a variant at a setting, in words; empty if nothing.

        Allocations are also made to fail, and iterations of parallel loops run in other orders.  Raises Undefined,
        TooLong or Unsupported where the original is no measure, Unsupported where the variant cannot be interpreted.
        """
        before = self.at(setting)
        rules = rules or self.rules(variant)
        found, after = self._one(variant, setting, before, rules)
        if found or after is None:
            return found
        for way, changes in self._other_ways(after, before, variant):
            found, _ = self._one(variant, setting, before, rules, **changes)
            if found:
                return [f"{way}, {problem}" for problem in found]
        return []

    def rules(self, variant: Program, reassociate: bool = False) -> Rules:
        """What has to be equal: all values on the way, if the variant's bodies are the original's."""
        alike = writes_alike(self.original.unit.functions[self.function], variant.unit.functions.get(self.function))
        return Rules(self.book, every_write=alike, reassociate=reassociate)

    def _other_ways(self, after: Outcome, before: Outcome, variant: Program) -> Iterator[tuple[str, dict[str, Any]]]:
        more = after.machine.allocations
        if more and not before.machine.allocations:
            yield "where no memory can be allocated", {"refused": None}
            if more > 1:
                for number in range(min(more, _FAILURES)):
                    yield f"where allocation {number + 1} fails", {"refused": frozenset({number})}
        if variant.parallel and variant.parallel != self.original.parallel:
            for order in ("reversed", "shuffled"):
                yield f"with the iterations of parallel loops {order}", {"order": order}

    def _one(self, variant: Program, setting: Setting, before: Outcome, rules: Rules,
             **changes: Any) -> tuple[list[str], Outcome | None]:
        try:
            after = self._run(variant, setting, _MORE * self.steps, **changes)
        except Undefined as problem:
            return [f"the variant is undefined: {problem}"], None
        except TooLong:
            return ["the variant does not end"], None
        if changes.get("order"):
            rules = Rules(rules.book, False, rules.reassociate)
        return list(islice(differences(before, after, rules), _TOLD)), after

    def _run(self, program: Program, setting: Setting, steps: int, **changes: Any) -> Outcome:
        machine = Machine(self.book, dict(setting.sizes), steps, default=setting.default, **changes)
        machine.together = {name: (other, shift) for name, other, shift in setting.together}
        with _undisturbed():
            try:
                result = program.run(self.function, machine)
                machine.check_far()
            finally:
                if program is self.original:
                    self.asked.update(machine.asked)
                    self.reached |= machine.reached
        compiled = program.compiled(self.function, None)
        if compiled.returned == "plain" and result is not None:
            result = self.book.integers[result]
        return Outcome(machine, result)


@contextmanager
def _undisturbed() -> Iterator[None]:
    """Without collections of garbage: millions of live entries would be looked at again and again."""
    active = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if active:
            gc.enable()
