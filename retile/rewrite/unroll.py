"""Full chunks written out: ``unroll i``.

    for (i = i_from; i < i_from + 4; i++)           S(i_from) S(i_from + 1) S(i_from + 2) S(i_from + 3)
        S(i)

Every loop over single iterations of ``i`` that runs a constant number of times becomes that many copies of its body, each
with its own value.  Where such a loop stands innermost, other loops now run over several iterations of ``i`` at once
(unroll-and-jam: Callahan, Carr & Kennedy, "Improving register allocation for subscripted variables", 1990); the order is
still the plan's.
"""

from __future__ import annotations

from ..affine import Affine
from ..tree import Guard, Held, Kept, Loop, Node, Role
from ..values import replace


def unrolled(nodes: tuple[Node, ...], names: tuple[str, ...], most: int) -> tuple[Node, ...]:
    """The nodes with the loops of these names written out where they run a constant number of times, at most ``most``."""
    return tuple(copy for node in nodes for copy in _unrolled(node, names, most))


def _unrolled(node: Node, names: tuple[str, ...], most: int) -> tuple[Node, ...]:
    if isinstance(node, Loop | Guard | Kept | Held):
        node = replace(node, body=unrolled(node.body, names, most))
    values = _values(node) if isinstance(node, Loop) and node.symbol in names and node.role is not Role.CHUNK else None
    if values is None or len(values) > most:
        return (node,)
    assert isinstance(node, Loop)
    return tuple(replace(node, lower=value, upper=value, unrolled=True) for value in values)


def _values(loop: Loop) -> list[Affine] | None:
    """The values of a loop in its order, if they are a constant number."""
    if not isinstance(loop.lower, Affine) or not isinstance(loop.upper, Affine) or \
            not (loop.upper - loop.lower).is_constant:
        return None
    distance = (loop.upper - loop.lower).constant
    near, step = (loop.lower, loop.step) if loop.step > 0 else (loop.upper, loop.step)
    if abs(step) != 1 and not (near - loop.origin).mod(abs(step)) == Affine():
        return None
    return [near + step * number for number in range(distance // abs(step) + 1)] if distance >= 0 else []
