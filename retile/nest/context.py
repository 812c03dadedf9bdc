"""Where an expression stands: the loops and conditions around it."""

from __future__ import annotations

from typing import Any

from ..affine import AllOf, Formula
from ..values import dataclass, replace
from .scopes import Binding


@dataclass(frozen=True)
class Context:
    """The loops of the nest and the known conditions around a place in it."""

    loops: tuple[str, ...] = ()  # ids, outermost first
    iterators: tuple[tuple[Binding, str], ...] = ()  # what stands for each of them
    constraints: tuple[Formula, ...] = ()  # bounds, strides and affine conditions
    certain: bool = True  # False under a condition on data
    needs: tuple[Any, ...] = ()  # variables of the nest that headers and conditions around it read, where they are named
    path: tuple[int, ...] = ()  # the loop bodies and branches around it: what may run less often than the rest

    @property
    def formula(self) -> Formula:
        """All constraints."""
        return AllOf(self.constraints)

    def iterator(self, binding: Binding) -> str | None:
        """The symbol of a loop's iterator inside the loop; None for any other object."""
        return next((symbol for known, symbol in self.iterators if known is binding), None)

    def inside(self, loop: str, binding: Binding, constraint: Formula) -> Context:
        """In the body of one more loop."""
        return replace(
            self,
            loops=(*self.loops, loop),
            iterators=(*self.iterators, (binding, loop)),
            constraints=(*self.constraints, constraint),
        )

    def where(self, *conditions: Formula) -> Context:
        """Where these conditions hold too."""
        return replace(self, constraints=(*self.constraints, *conditions))

    def uncertain(self) -> Context:
        """Under a condition on data."""
        return replace(self, certain=False)

    def needing(self, names: tuple[Any, ...]) -> Context:
        """Where a header or condition around reads these variables."""
        return replace(self, needs=(*self.needs, *names)) if names else self

    def block(self, node: Any) -> Context:
        """In a loop body or branch."""
        return replace(self, path=(*self.path, id(node)))

    def covers(self, other: Context) -> bool:
        """True if ``other`` stands in the same branch and loop body or deeper."""
        return other.path[: len(self.path)] == self.path
