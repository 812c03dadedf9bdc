"""Variants of one nest of a file, judged one after the other within a time of their own."""

from __future__ import annotations

import os
import time
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from itertools import islice
from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from .judge import Judge, Setting
from .kinds import TooLong, Undefined, Unsupported
from .piece import Spot, piece_of, spot_of
from .program import Program
from .reading import check_machine, parallel_loops, reread
from .sizes import integers_of, settings
from .tags import Book

if TYPE_CHECKING:
    from ..source import Source

SECONDS = 1.5  # for one variant
_STEPS_PER_SECOND = 100_000  # iterations, with room for slow hosts
_SHIFTS = (0, 8, 24)  # bytes by which pointers are laid into the same memory
_ENOUGH = 40  # settings
_FIRST = 12  # settings to find one at which the function comes to the nest

Allowed = Callable[[Mapping[str, int]], bool]


@dataclass(frozen=True)
class Finding:
    """What the judge says of one variant."""

    judged: bool | None  # True: as good as the original at every size tried; None: not interpreted, ``reason`` says why
    reason: str = ""  # what differs, or why the judge could not run
    differences: tuple[str, ...] = ()  # in words, at most a few
    settings: tuple[str, ...] = ()  # sizes at which both were run
    excepted: int = 0  # cells that are equal only up to the order of additions and the like
    notes: tuple[str, ...] = ()

    def as_json(self) -> dict[str, Any]:
        """The fields for JSON documents."""
        return {"judged": self.judged, "reason": self.reason, "differences": list(self.differences),
                "settings": list(self.settings), "excepted": self.excepted, "notes": list(self.notes)}


@dataclass(frozen=True)
class Task:
    """A variant and what is known of it beside its text: hints where to look, never what to find."""

    text: str  # of the whole file
    chunks: tuple[int, ...] = ()
    reassociate: bool = False
    overlaps: tuple[tuple[str, str], ...] = ()  # pairs of pointers that may lead to the same memory
    allowed: Allowed = field(default=lambda sizes: True)  # sizes at which the variant may be called


class Examiner:
    """Judges variants of the nest that begins at a line of a file.

    The whole function is run where that can be interpreted and reaches the nest; else the nest alone, with all that
    it uses as arguments.  The original is run once per setting for all variants.
    """

    def __init__(self, source: Source, line: int, column: int | None = None, seconds: float = SECONDS) -> None:
        self.source, self.seconds = source, seconds
        self.notes: list[str] = []
        self._line, self._column = line, column

    @cached_property
    def _spot(self) -> Spot:
        return spot_of(self.source.ast, self._line, self._column)

    @cached_property
    def _opened(self) -> tuple[Judge, bool, tuple[str, ...]]:
        """The original as a whole if that works, else the nest alone; the names of its sizes."""
        check_machine(self.source)
        try:
            judge = self._judge_of(self.source.ast)
            names = integers_of(judge)
            if self._reaches(judge, names):
                return judge, False, names
            why = "its function is not defined, or does not come to the nest, on memory of the judge's invention"
        except Unsupported as problem:
            why = f"its function has {problem}"
        judge = self._judge_of(piece_of(self.source.ast, self._spot))
        self.notes.append(f"the nest was run alone: {why}")
        return judge, True, integers_of(judge)

    def _judge_of(self, tree: c_ast.FileAST) -> Judge:
        program = Program(tree, Book(), parallel_loops(self.source.text), watched=self._line)
        return Judge(program, self._spot.function, int(self.seconds / 3 * _STEPS_PER_SECOND))

    @staticmethod
    def _reaches(judge: Judge, names: Sequence[str]) -> bool:
        """Whether the function comes to the nest and to its end; a nest that takes too long does so alone, too."""
        for setting in islice(settings(names, ()), _FIRST):
            try:
                if judge.at(setting).machine.reached:
                    return True
            except TooLong:
                if judge.reached and not names:
                    return True
            except Undefined:
                continue
        return False

    def examine(self, task: Task) -> Finding:
        """Judge one variant; a Finding with ``judged`` None if it cannot be."""
        from ..model import RetileError

        try:
            judge, alone, _ = self._opened
            with reread(self.source, task.text) as variant:
                tree = piece_of(variant.ast, self._spot, self.source.ast) if alone else variant.ast
                return self._examined(judge, Program(tree, judge.book, parallel_loops(task.text)), task)
        except Unsupported as problem:
            return Finding(None, f"the judge does not interpret {problem}", notes=tuple(self.notes))
        except RetileError as problem:
            return Finding(False, f"the variant cannot be read: {problem}", notes=tuple(self.notes))
        except Exception as error:  # the judge is an extra: its own faults must not keep anybody from measuring
            if os.environ.get("RETILE_TRACEBACK"):
                raise
            return Finding(None, f"an error of the judge itself ({type(error).__name__}: {error})")

    def _examined(self, judge: Judge, variant: Program, task: Task) -> Finding:
        rules = judge.rules(variant, task.reassociate)
        end = time.perf_counter() + self.seconds
        tried: list[str] = []
        problem: Exception | None = None
        for setting in self._settings(task):
            try:
                found = judge.compare(variant, setting, rules)
            except (Undefined, TooLong) as caught:
                problem = caught
                if time.perf_counter() > end:
                    break
                continue
            except Unsupported:
                if setting.together:
                    continue  # the pointers have different types
                raise
            tried.append(str(setting))
            if found:
                return Finding(False, f"at {setting}: {found[0]}", tuple(found), tuple(tried), notes=tuple(self.notes))
            if len(tried) == _ENOUGH or time.perf_counter() > end:
                break
        if not tried:
            return Finding(None, _why_none(problem), notes=tuple(self.notes))
        return Finding(True, "", (), tuple(tried), len(rules.excepted), tuple(self.notes))

    def _settings(self, task: Task) -> Iterator[Setting]:
        """Sizes that may be called; pointers into the same memory early among them."""
        names = self._opened[2]
        plain = (setting for setting in settings(names, task.chunks) if task.allowed(dict(setting.sizes)))
        for number, setting in enumerate(plain):
            yield setting
            if number < 2:
                yield from self._overlapping(setting, task.overlaps)

    def _overlapping(self, setting: Setting, pairs: Iterable[tuple[str, str]]) -> Iterator[Setting]:
        pointers = self._opened[0].pointers
        for one, other in list(pairs)[:3]:
            if one in pointers and other in pointers and one != other:
                for shift in _SHIFTS:
                    yield Setting(setting.sizes, ((one, other, shift),))


def _why_none(problem: Exception | None) -> str:
    """Why no size was a measure."""
    if problem is None:
        return "none of the small sizes that were tried surely fulfils what the variant assumes"
    why = "takes too many steps" if isinstance(problem, TooLong) else f"is undefined ({problem})"
    return f"the original {why} at the sizes that were tried"
