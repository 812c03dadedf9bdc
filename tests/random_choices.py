"""Where the decisions of a random generator come from: a seed, or hypothesis, which shrinks what fails."""

from __future__ import annotations

import random
from collections.abc import Sequence
from typing import Any, Protocol

from hypothesis import strategies as st


class Choices(Protocol):
    """Where a generator's decisions come from."""

    def between(self, low: int, high: int) -> int: ...

    def pick(self, options: Sequence[Any]) -> Any: ...

    def chance(self, percent: int) -> bool: ...


class Seeded:
    """Choices of a seeded generator of random numbers."""

    def __init__(self, seed: int) -> None:
        self.random = random.Random(seed)

    def between(self, low: int, high: int) -> int:
        return self.random.randint(low, high)

    def pick(self, options: Sequence[Any]) -> Any:
        return options[self.random.randrange(len(options))]

    def chance(self, percent: int) -> bool:
        return self.random.randrange(100) < percent


class Drawn:
    """Choices that hypothesis draws; the first option and ``False`` are the simplest."""

    def __init__(self, draw: Any) -> None:
        self.draw = draw

    def between(self, low: int, high: int) -> int:
        return self.draw(st.integers(low, high))

    def pick(self, options: Sequence[Any]) -> Any:
        return options[self.draw(st.integers(0, len(options) - 1))]

    def chance(self, percent: int) -> bool:
        return self.draw(st.integers(0, 99)) >= 100 - percent
