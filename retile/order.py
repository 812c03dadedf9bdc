"""Lexicographic order of two moments, on sets of pairs of instances.

A relation between instances is a Region over the names of the source and, with a prime, those of the target.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from functools import lru_cache

from .affine import Affine, AllOf, AnyOf, Formula, at_most, equal, less
from .sets import Region
from .values import dataclass


@dataclass(frozen=True)
class Cut:
    """The number of the run that a value lies in, of any cut of the integers into consecutive runs.

    Run numbers never fall; two different values may or may not share a run.
    """

    form: Affine


Coordinate = int | Affine | Cut


def prime(name: str) -> str:
    """The target's name for an iterator."""
    return name + "'"


def primed(form: Affine, names: Iterable[str]) -> Affine:
    """The form with these names standing for the target's."""
    return form.substitute({name: Affine.of(prime(name)) for name in names})


def substituted(vector: Iterable[Coordinate], values: Mapping[str, Affine]) -> tuple[Coordinate, ...]:
    """A time vector with names replaced by forms."""
    return tuple(c if isinstance(c, int) else c.substitute(values) if isinstance(c, Affine)
                 else Cut(c.form.substitute(values)) for c in vector)


@lru_cache(maxsize=4096)
def primed_vector(vector: tuple[Coordinate, ...], names: tuple[str, ...]) -> tuple[Coordinate, ...]:
    """A time vector with these names standing for the target's."""
    return substituted(vector, {name: Affine.of(prime(name)) for name in names})


def same_cut(value: Affine, run: Affine, other_value: Affine, other_run: Affine) -> Formula:
    """What holds of two values and of what marks their runs in one cut: the marks rise with the values, if at all."""
    return AnyOf((AllOf((less(value, other_value), at_most(run, other_run))),
                  AllOf((equal(value, other_value), equal(run, other_run))),
                  AllOf((less(other_value, value), at_most(other_run, run)))))


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
        if isinstance(a, Cut) or isinstance(b, Cut):
            # Any cut: a smaller value may lie in an earlier run, and any two values may share one.
            before = remaining & _where_less(_inside(a), _inside(b))
            if not before.is_empty():
                yield level, before
            continue
        before = remaining & _where_less(a, b)
        if not before.is_empty():
            yield level, before
        remaining = remaining & _where_equal(a, b)
        if remaining.is_empty():
            return
    yield min(len(earlier), len(later)), remaining


@lru_cache(maxsize=4096)
def _where_less(a: Affine | int, b: Affine | int) -> Region:
    return Region.where(less(a, b))


@lru_cache(maxsize=4096)
def _where_equal(a: Affine | int, b: Affine | int) -> Region:
    return Region.where(equal(a, b))


def _inside(coordinate: Coordinate) -> Affine:
    return coordinate.form if isinstance(coordinate, Cut) else Affine.of(coordinate)
