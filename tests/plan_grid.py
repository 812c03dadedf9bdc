"""A grid of plans for a nest: orders, chunks of small odd sizes, several levels, skewed chunks."""

from __future__ import annotations

from itertools import islice, permutations

from retile.model import Nest

_CHUNKS = (3, 2, 4, 5)  # small, so that small sizes have whole, cut and missing chunks


def plans(nest: Nest, most: int = 40) -> tuple[str, ...]:
    """Plans that fit a nest, without doubles: at most so many, spread over the kinds."""
    found = [plan for names in _movable(nest) for plan in _of_loops(names)]
    found = list(dict.fromkeys(found))
    step = max(1, -(-len(found) // most))
    return tuple(found[::step])


def _movable(nest: Nest) -> list[tuple[str, ...]]:
    """Sets of loops that a plan may name: with a loop all those around it; in text order."""
    ids = [loop.id for loop in nest.loops]
    chains = {tuple(id for id in ids if id in (*nest.loop(last).outer, last)) for last in ids}
    return sorted(chains | {tuple(ids)}, key=lambda names: (len(names), names))


def _of_loops(names: tuple[str, ...]) -> list[str]:
    orders = [" ".join(order) for order in islice(permutations(names), 6)]
    if len(names) > 3:
        orders.append(" ".join(reversed(names)))
    original = " ".join(names)
    chunked = [f"{name}:{size} {order}" for order in orders[:3] for name, size in zip(names, _CHUNKS)]
    blocks = [" ".join(f"{name}:{size}" for name, size in zip(order, _CHUNKS)) + " " + original
              for order in islice(permutations(names), 2)]
    between = f"{names[-1]}:4 " if len(names) > 1 else ""
    levels = [f"{names[0]}:6 {between}{names[0]}:3 {original}"]
    skewed = [f"({names[0]}+{names[1]}):3 {original}", f"({names[0]}+{names[1]}):2 {names[1]}:4 {original}"] \
        if len(names) > 1 else []
    return [*orders, *chunked, *blocks, *levels, *skewed]
