"""Scalars that wait: a value private to an iteration that the plan interrupts, kept in a small array per chunk.

    for (i) { s = 0;  for (k) s += a[i][k];  c[i] = s; }              plan  i:32 k:64 i k

Chunks of ``k`` take the iterations of ``i`` apart, so that 32 values of ``s`` are under way at once.  Each gets a cell:

    for (i_from) {
        double s_kept[32];
        for (i) { s = 0; s_kept[i - i_from] = s; }
        for (k_from) for (i) { s = s_kept[i - i_from];  for (k) s += a[i][k];  s_kept[i - i_from] = s; }
        for (i) { s = s_kept[i - i_from]; c[i] = s; }
    }

The order of additions stays what it was (scalar expansion: Padua & Wolfe, "Advanced compiler optimizations for
supercomputers", 1986; kept to a chunk by strip-mining).
"""

from __future__ import annotations

from math import prod

from ..affine import Affine
from ..model import CType, Nest, Plan, ScalarClass, Storage, Term
from ..values import dataclass
from .schedule import last_bare, stays_whole

# Larger arrays are allocated, not put on the stack.
_MOST_LOCAL_CELLS = 8192
_MOST_CELLS = 1 << 24


@dataclass(frozen=True)
class Keeping:
    """How one scalar is kept."""

    scalar: str
    level: int  # the array lives in the loops of the terms before this one
    ready: int  # from this term on, every loop that the scalar is private to has its single value
    shape: tuple[int, ...]  # cells per loop
    index: tuple[Affine, ...]  # of the cell, in symbols of the tree

    @property
    def heap(self) -> bool:
        """True if the array is too large for the stack."""
        return prod(self.shape) > _MOST_LOCAL_CELLS


def keepable(nest: Nest, plan: Plan) -> tuple[str, ...]:
    """Names of the private scalars that the plan interrupts and a small array could keep."""
    return tuple(storage.name for storage in nest.storages
                 if storage.scalar is ScalarClass.PRIVATE and not stays_whole(plan, storage, nest)
                 and keeping(nest, plan, storage) is not None)


def keeping(nest: Nest, plan: Plan, storage: Storage) -> Keeping | None:
    """The array for a scalar; None if it is seen after the nest, or if chunks outside do not bound how many wait."""
    if storage.live_after or not isinstance(storage.element, CType):
        return None
    level = next(at for at, term in enumerate(plan.terms) if any(x not in storage.private_to for x, _ in term.form))
    return kept_from(nest, plan, storage, level)


def kept_from(nest: Nest, plan: Plan, storage: Storage, level: int) -> Keeping | None:
    """The array for a scalar in the loops of the terms before one; None if chunks there do not bound how many wait."""
    ready = last_bare(plan, storage.private_to) + 1
    varying = [term for term in plan.terms[level:ready] if term.chunk is None and term.loop in storage.private_to]
    cells = [_cells(nest, plan.terms[:level], term) for term in varying]
    known = [cell for cell in cells if cell is not None]
    if len(known) < len(cells) or prod(size for size, _ in known) > _MOST_CELLS:
        return None
    return Keeping(storage.name, level, ready, tuple(size for size, _ in known), tuple(form for _, form in known))


def _cells(nest: Nest, outside: tuple[Term, ...], bare: Term) -> tuple[int, Affine] | None:
    """How many iterations of a loop a chunk around holds, and the number of one within it."""
    from .build import chunk_symbol

    loop = nest.loop(bare.loop)
    chunks = [term for term in outside if term.form == bare.form and isinstance(term.chunk, int)]
    if not chunks or not isinstance(chunks[-1].chunk, int):
        return None
    ahead = Affine.of(loop.id) - Affine.of(chunk_symbol(chunks[-1]))
    return chunks[-1].chunk, (ahead if loop.step > 0 else -ahead).floor_div(abs(loop.step))
