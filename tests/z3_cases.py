"""Nests with one plan each, for the questions that are asked of z3 too."""

from __future__ import annotations

from dataclasses import dataclass

from asked import ask
from random_choices import Seeded
from random_nests import seeded_nest
from random_plans import LoopShape, Shape, plan
from retile.model import RetileError


@dataclass(frozen=True)
class Case:
    """A C file with a nest and a plan for it."""

    text: str
    line: int
    plan: str
    sizes: tuple[str, ...]
    function: str = "survey"

    def __str__(self) -> str:
        numbered = "\n".join(f"{k:3} {line}" for k, line in enumerate(self.text.splitlines(), 1))
        return f"plan {self.plan} at line {self.line}\n{numbered}"


def seeded_case(seed: int) -> Case:
    """The random nest of a seed with a random order of its loops, without options."""
    nest = seeded_nest(seed)
    try:
        read = ask(nest.text, nest.line).opened.found.nest
    except RetileError:
        read = None
    if read is None:
        return Case(nest.text, nest.line, "", nest.sizes)
    shape = Shape(tuple(LoopShape(loop.id, loop.outer) for loop in read.loops))
    return Case(nest.text, nest.line, plan(Seeded(seed + (1 << 41)), shape).partition(";")[0].strip(), nest.sizes)
