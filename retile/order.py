"""Lexicographic order of two moments, on sets of pairs of instances.

A relation between instances is a Region over the names of the source and, with a prime, those of the target.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

from .affine import Affine, Formula, equal, less, map_formula
from .sets import Region

Coordinate = int | Affine


def prime(name: str) -> str:
    """The target's name for an iterator."""
    return name + "'"


def primed(form: Affine, names: Iterable[str]) -> Affine:
    """The form with these names standing for the target's."""
    return form.substitute({name: Affine.of(prime(name)) for name in names})


def primed_formula(formula: Formula, names: Iterable[str]) -> Formula:
    """The formula with these names standing for the target's."""
    names = tuple(names)
    return map_formula(formula, lambda form: primed(form, names))


def first_differences(pairs: Region, earlier: Sequence[Coordinate], later: Sequence[Coordinate]) \
        -> Iterator[tuple[int, Region]]:
    """The pairs for which ``earlier < later`` lexicographically, by the level that decides.

    Both vectors are in the names of the pairs (source plain, target primed).  Yields (level, pairs) for non-empty ones
    only.  Pairs that are equal at all levels are yielded last with level ``len(earlier)``, if there are any: callers that ask
    for a strict order leave them out.
    """
    remaining = pairs
    for level, (a, b) in enumerate(zip(earlier, later, strict=False)):
        if isinstance(a, int) and isinstance(b, int):
            if a == b:
                continue
            if a < b:
                yield level, remaining
            return
        before = remaining & Region.where(less(Affine.of(a), b))
        if not before.is_empty():
            yield level, before
        remaining = remaining & Region.where(equal(Affine.of(a), b))
        if remaining.is_empty():
            return
    yield min(len(earlier), len(later)), remaining
