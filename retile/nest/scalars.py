"""What a nest does with a variable without subscripts.

A variable is private to an iteration if every read in the iteration comes after a write that surely happened in the
same iteration (Allen & Kennedy, "Optimizing Compilers for Modern Architectures", 2001, section 5.3, scalar
privatization). Where sibling loops each use it privately, each of them has a variable of its own, as far as
dependence goes.
"""

from __future__ import annotations


from ..model import ScalarClass
from ..values import dataclass
from .context import Context
from .effects import Touch

# A place in the nest's text: number of the statement, number of the touch in it.
Order = tuple[int, int]
Numbered = tuple[Order, Touch]
# Context around an if, its two branches by number, and how many statements stand before its end.
Branch = tuple[Context, int, int, int]


@dataclass(frozen=True)
class Web:
    """Touches of a variable that belong to one life of it."""

    touches: tuple[Numbered, ...]
    role: ScalarClass
    private_to: tuple[str, ...] = ()


def webs(touches: list[Numbered], branches: list[Branch]) -> tuple[Web, ...]:
    """The lives of one variable; its touches are in text order."""
    if not any(touch.write for _, touch in touches):
        return (Web(tuple(touches), ScalarClass.PARAMETER),)
    private = _private(touches, branches)
    if private:
        return private
    families = {touch.update for _, touch in touches}
    if len(families) == 1 and families != {None}:
        return (Web(tuple(touches), ScalarClass.ACCUMULATOR),)
    return (Web(tuple(touches), ScalarClass.CARRIED),)


def _private(touches: list[Numbered], branches: list[Branch]) -> tuple[Web, ...]:
    """The webs if all of them are private; none otherwise.  Lives as short as possible: they bind the order least."""
    common = _common([touch.context.loops for _, touch in touches])
    shorter = _split(touches, branches, len(common))
    if shorter:
        return shorter
    if common and all(touch.write or _covered(order, touch.context, touches, branches) for order, touch in touches):
        return (Web(tuple(touches), ScalarClass.PRIVATE, common),)
    return ()


def _split(touches: list[Numbered], branches: list[Branch], depth: int) -> tuple[Web, ...]:
    """One or more webs for each of the sibling loops that hold all touches; none if that does not work."""
    parts: dict[str, list[Numbered]] = {}
    for order, touch in touches:
        if len(touch.context.loops) == depth:
            return ()
        parts.setdefault(touch.context.loops[depth], []).append((order, touch))
    if len(parts) < 2:
        return ()
    found: list[Web] = []
    for part in parts.values():
        inner = _private(part, branches)
        if not inner:
            return ()
        found += inner
    return tuple(found)


def _common(chains: list[tuple[str, ...]]) -> tuple[str, ...]:
    first, length = chains[0], min(map(len, chains))
    for chain in chains:
        while chain[:length] != first[:length]:
            length -= 1
    return first[:length]


def _covered(order: Order, context: Context, touches: list[Numbered], branches: list[Branch]) -> bool:
    """True if a write surely happened before, in the same iteration of all loops that the touches share."""
    writes = [(at, touch.context.path) for at, touch in touches if touch.write and at < order]
    if any(path == context.path[: len(path)] for _, path in writes):
        return True
    return any(
        around.covers(context)
        and end <= order[0]
        and all(_written_in((*around.path, side), writes, branches) for side in (yes, no))
        for around, yes, no, end in branches
    )


def _written_in(path: tuple[int, ...], writes: list[tuple[Order, tuple[int, ...]]], branches: list[Branch]) -> bool:
    """True if the branch with this path surely writes."""
    if any(written == path for _, written in writes):
        return True
    return any(
        around.path == path and all(_written_in((*path, side), writes, branches) for side in (yes, no))
        for around, yes, no, _ in branches
    )
