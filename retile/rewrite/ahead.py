"""What must hold before a variant reads memory, or divides, ahead of where the original does it.

    if (n > 0) {                                     the original reads g->cols in its first round over i
        for (long long k_from = 0; k_from < g->cols; k_from += 64) ...

A loop that does all its work where that holds is entered only there.  Where other work depends on it, or a test of the
variant needs the value, the whole variant is for these sizes only.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator

from ..affine import Affine, AllOf, Formula, bound_names, formula_names
from ..model import Nest
from ..sets import Region
from ..tree import Guard, Leaf, Loop, Node, children, occurrences
from .expression import AND, Scope, condition


class Ahead:
    """The conditions under which the parameters and addresses of a nest may be evaluated."""

    def __init__(self, nest: Nest) -> None:
        self._nest = nest
        self._of = {p.symbol: p.readable for p in nest.parameters if p.readable != AllOf()}
        self._of |= {address_of(s.name): s.readable for s in nest.storages if s.readable != AllOf()}

    def __bool__(self) -> bool:
        return bool(self._of)

    def of_storage(self, name: str, region: Region) -> tuple[Formula, ...]:
        """What must hold for the address of a storage to be computed, in the order in which it can be asked."""
        return self.needed((address_of(name),), region)

    def needed(self, names: Iterable[str], region: Region) -> tuple[Formula, ...]:
        """What must hold for parameters to be read, in the order in which it can be asked; not what surely holds."""
        found: dict[Formula, None] = {}
        for name in names:
            for formula in self._in_order(name):
                if not (region & Region.where(*found)).implies(formula):
                    found[formula] = None
        return tuple(found)

    def _in_order(self, name: str) -> Iterator[Formula]:
        if name in self._of:
            for inner in sorted(formula_names(self._of[name])):
                yield from self._in_order(inner)
            yield self._of[name]

    def pending(self, region: Region) -> tuple[str, ...]:
        """The C texts that may not be evaluated everywhere in a region."""
        texts = [p.text for p in self._nest.parameters if p.symbol in self._of and self.needed((p.symbol,), region)]
        return tuple(text for text in texts if not any(other != text and stands_in(other, text) for other in texts))

    # ------------------------------------------------------------ loops

    def of_loop(self, loop: Loop, region: Region) -> tuple[Formula, ...]:
        """What must hold for a loop's bounds to be read."""
        return self.needed(sorted(bound_names(loop.lower) | bound_names(loop.upper)), region) if self._of else ()

    def leading(self, tree: tuple[Node, ...], region: Region, apart: bool) -> tuple[Formula, ...]:
        """What must hold for the whole variant, since some loop or condition cannot be left out alone.

        ``apart``: loops have declarations ahead of them.
        """
        found: tuple[Formula, ...] = ()
        while self._of and (more := next(self._lacking(tree, region & Region.where(*found), apart), ())):
            found = (*found, *more)
        return found

    def _lacking(self, nodes: tuple[Node, ...], region: Region, apart: bool) -> Iterator[tuple[Formula, ...]]:
        for node in nodes:
            inside = region
            if isinstance(node, Loop):
                asked = self.of_loop(node, region)
                if asked and not (self._alone(node, asked) and not apart):
                    yield asked
                inside = region & Region.where(*asked, node.constraints())
            elif isinstance(node, Guard) and node.condition is not None:
                asked = self.needed(sorted(formula_names(node.condition)), region)
                if asked:
                    yield asked
                inside = region & Region.where(node.condition)
            if not isinstance(node, Leaf):
                yield from self._lacking(children(node), inside, apart)

    def _alone(self, loop: Loop, asked: tuple[Formula, ...]) -> bool:
        """True if the loop can be left out where a condition fails: it has nothing to do there."""
        plain = isinstance(loop.lower, Affine) and isinstance(loop.upper, Affine) and loop.lower != loop.upper
        return plain and all(self.idle_without(place.leaf.statement, asked) for place in occurrences((loop,)))

    def idle_without(self, statement: str, asked: tuple[Formula, ...]) -> bool:
        """True if a statement has no instance where one of the conditions fails."""
        domain = Region.where(self._nest.statement(statement).domain, *self._nest.facts)
        return all(domain.implies(formula) for formula in asked)


def conjunction(formulas: tuple[Formula, ...], scope: Scope) -> str:
    """Conditions as operands of ``&&``, each asked where those before it hold."""
    return " && ".join(parts_of(formulas, scope))


def parts_of(formulas: tuple[Formula, ...], scope: Scope) -> list[str]:
    """The C texts of conditions, each asked where those before it hold."""
    found = []
    for formula in formulas:
        for part in formula.parts if isinstance(formula, AllOf) else (formula,):
            if not scope.implies(part):
                found.append(condition(part, scope).at(AND))
                scope = scope.knowing(part)
    return found


def stands_in(part: str, text: str) -> bool:
    """True if a text is an operand of another one."""
    return part in text and re.search(rf"(?<![\w.>]){re.escape(part)}(?!\w)", text) is not None


def address_of(storage: str) -> str:
    """What stands for the address of a storage among names of parameters."""
    return f"& {storage}"
