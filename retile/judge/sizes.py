"""Small sizes at which an original and a variant tell most about each other."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from .judge import Judge, Setting
from .kinds import TooLong, Undefined

_UNEQUAL = (5, 4, 3, 6, 7)
_SMALL_CHUNK = 9  # up to here all sizes may be around a chunk at once


def integers_of(judge: Judge) -> tuple[str, ...]:
    """The names of the integers that decide what the original does: arguments, and what it reads by name."""
    found: dict[str, None] = {}
    for value in (3, 2):
        setting = Setting((), default=value)
        try:
            found |= dict.fromkeys(judge.at(setting).machine.asked)
        except (Undefined, TooLong):
            found |= dict.fromkeys(judge.asked)
        if not judge.asked:
            break  # nothing depends on integers
    return tuple(found)


def settings(names: Sequence[str], chunks: Sequence[int]) -> Iterator[Setting]:
    """Settings to try, those first that tell most for their work."""
    seen: set[tuple[tuple[str, int], ...]] = set()
    for values in _wishes(len(names), chunks):
        sizes = tuple(zip(names, values, strict=True))
        if sizes not in seen:
            seen.add(sizes)
            yield Setting(sizes)


def _wishes(count: int, chunks: Sequence[int]) -> Iterator[list[int]]:
    unequal = [_UNEQUAL[at % len(_UNEQUAL)] for at in range(count)]
    yield unequal
    yield unequal[::-1]
    yield [5] * count
    small = [chunk for chunk in chunks if chunk <= _SMALL_CHUNK]
    for chunk in small:
        yield [chunk + 1] * count
        yield [2 * chunk + 1] * count
    for chunk in sorted(set(chunks)):
        for at in range(count):
            yield [chunk + 1 if place == at else 2 + place % 2 for place in range(count)]
    yield [0] * count
    yield [1] * count
    yield [2] * count
    for at in range(count):
        yield [0 if place == at else 3 for place in range(count)]
    for at in range(count):
        yield [9 if place == at else 4 for place in range(count)]
    for chunk in small:
        yield [max(0, chunk - 1)] * count
        yield [chunk] * count
    for chunk in sorted(set(chunks)):
        yield [chunk + 1] * count
        for at in range(count):
            yield [2 * chunk + 1 if place == at else 3 - place % 2 for place in range(count)]
    yield [7, *[3] * (count - 1)][:count]
    yield [-1] * count
