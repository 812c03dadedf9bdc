"""Short ways to ask the program under test about a C text."""

from __future__ import annotations

import functools
import tempfile
from dataclasses import dataclass
from pathlib import Path

import retile
from retile.library import OpenNest
from retile.model import Judgement, Variant
from retile.plan import judge


@dataclass(frozen=True)
class Answer:
    """A nest that was read and the questions about it."""

    opened: OpenNest
    folder: tempfile.TemporaryDirectory  # lives as long as the answer does

    def check(self, plan: str) -> Judgement:
        """The verdict without the search for a plan to propose instead."""
        return judge(self.opened.nest, self.opened.dependences, self.opened.plan(plan))

    def verdict(self, plan: str) -> str:
        return self.check(plan).verdict.value

    def variant(self, plan: str, trust: bool = True) -> Variant:
        return self.opened.rewrite(plan, trust=trust)

    def edges(self) -> set[tuple]:
        """(kind, storage, source line, target line, loop that carries it, distance, direction) of every dependence."""
        return {(e.kind, e.storage, e.source, e.target, e.carried_by, e.distance, "".join(e.direction))
                for e in self.opened.dependences.edges}


@functools.lru_cache(maxsize=32)
def ask(text: str, line: int) -> Answer:
    """Read the nest at a line of a C text."""
    folder = tempfile.TemporaryDirectory(prefix="nest-")
    path = Path(folder.name, "survey.c")
    path.write_text(text)
    return Answer(retile.open_file(path).nest(line), folder)
