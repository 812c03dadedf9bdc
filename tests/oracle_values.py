"""What the oracle's log is made of: objects, loops, statement instances."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from retile.judge.kinds import TooLong, Unsupported
from retile.judge.memory import Object
from retile.judge.memory import cell_name as name_of_cell

__all__ = ["Instance", "LoopAt", "Thing", "TooLong", "cell_name"]


@dataclass(eq=False)
class Thing:
    """A piece of memory, or a variable of a function."""

    name: str
    kind: str  # "caller", "global", "local"; "block" if declared inside the nest
    type: Any  # type of an element (caller, global) or of the whole object
    declared: object  # the same for all executions of a declaration
    iterator: bool = False
    memory: Object | None = None

    def __repr__(self) -> str:
        return f"<{self.name}>"


def cell_name(thing: Thing, offset: int) -> str:
    """``a[3]``, ``g->n``, ``p[2].x``, ``s``: a name for a cell that does not depend on the run."""
    return thing.name if thing.memory is None else name_of_cell(thing.memory, offset)


@dataclass(frozen=True)
class LoopAt:
    """Where a loop stands while a statement runs."""

    name: str
    line: int
    column: int
    value: int  # of the C variable
    first: int  # the variable's value in the loop's first iteration
    step: int | None
    dependent: bool  # the first value depends on something that the nest changes

    @property
    def iteration(self) -> int:
        """The iteration number."""
        if self.step is None:
            raise Unsupported(f"the step of loop {self.name} is not constant")
        return (self.value - self.first) // self.step


@dataclass
class Instance:
    """One execution of a statement of the nest."""

    line: int
    column: int
    kind: str  # "statement" or "condition"
    loops: tuple[LoopAt, ...]  # every loop around it in the function, outermost first
    run: int  # which execution of the nest it belongs to
    accesses: list[tuple[Thing, int, bool]]  # (object, offset, writes) in order

    @property
    def iterators(self) -> dict[str, int]:
        return {loop.name: loop.value for loop in self.loops}

    def __repr__(self) -> str:
        what = ", ".join(f"{'=' if w else ''}{cell_name(o, f)}" for o, f, w in self.accesses)
        return f"{self.line}:{self.iterators} {what}"
