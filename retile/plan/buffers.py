"""Cells of the variant's own: parts of arrays held in locals or packed in the order of use.

    hold beams across k     the cells of ``beams`` that the loop over ``k`` works on are fetched before it and put back
                            after it; meanwhile they are locals (scalar replacement: Callahan, Carr & Kennedy,
                            "Improving register allocation for subscripted variables", 1990)
    pack echoes at k:256    the part of ``echoes`` that a chunk of ``k`` uses is copied, at the start of the chunk, into an array
                            of its own, in the order in which the loops inside run over it (Lam, Rothberg & Wolf, "The
                            cache performance and optimizations of blocked algorithms", 1991; Goto & van de Geijn,
                            "Anatomy of high-performance matrix multiplication", 2008)

Both are one thing, a cache that the program keeps itself: every access that it serves goes to the cell that stands for the
program's own.  Its shape follows from the plan: one dimension for each term inside over a loop that the accesses'
subscripts use, as long as the term has steps within the chunk around.  Whether it serves just these cells is asked of
the finished tree (``reached.py``).
"""

from __future__ import annotations

from ..affine import Affine
from ..model import Access, CType, Nest, Statement, Storage, Term
from ..tree import Buffer

# Larger buffers are allocated, not put on the stack.
_MOST_LOCAL_BYTES = 16384
_MOST_BYTES = 1 << 30


class Unfit(Exception):
    """Why no buffer can be made: one sentence."""


def buffer_of(nest: Nest, terms: tuple[Term, ...], word: str, storage: Storage, subscripts: tuple[Affine, ...],
              at: int) -> Buffer:
    """The buffer that an option asks for; ``at``: the term that it lives around (``hold``) or inside (``pack``).

    Raises Unfit with the reason why there is none.
    """
    level = at if word == "hold" else at + 1
    if not isinstance(storage.element, CType) or storage.element_bytes is None:
        raise Unfit(f"the type of a cell of {storage.name} is not an arithmetic one")
    if storage.element_bytes * 8 != storage.element.bits:
        raise Unfit(f"{storage.name} is a member of an array of structures")
    used = _used(nest, terms, subscripts)
    dims, where = [], []
    for place in range(level, len(terms)):
        term = terms[place]
        if term.form[0][0] in used and len(term.form) == 1:
            dims.append(_dimension(nest, terms, level, place))
            where.append(place)
    shape = tuple(extent for extent, _ in dims)
    buffer = Buffer(word, storage.name, subscripts, shape, tuple(index for _, index in dims), level, tuple(where), False)
    size = buffer.cells * storage.element_bytes
    if size > _MOST_BYTES:
        raise Unfit(f"it would take {size} bytes")
    return Buffer(word, storage.name, subscripts, shape, buffer.index, level, buffer.terms, size > _MOST_LOCAL_BYTES)


def _used(nest: Nest, terms: tuple[Term, ...], subscripts: tuple[Affine, ...]) -> frozenset[str]:
    """The loops that the plan moves and the subscripts use."""
    loops = {loop.id for loop in nest.loops}
    used = frozenset().union(*(subscript.names() for subscript in subscripts)) & loops
    moved = {loop for term in terms for loop, _ in term.form}
    for loop in sorted(used - moved):
        raise Unfit(f"its subscripts use the loop {loop}, which the plan does not name")
    for term in terms:
        if len(term.form) > 1 and used & {loop for loop, _ in term.form}:
            raise Unfit("its subscripts use a loop of a skewed term")
    return used


def _dimension(nest: Nest, terms: tuple[Term, ...], level: int, place: int) -> tuple[int, Affine]:
    """How many steps a term makes within the chunk around the buffer, or around the term, and the number of one."""
    from .build import chunk_symbol

    term = terms[place]
    loop = nest.loop(term.loop)
    around = [other for other in terms[:place] if other.form == term.form]
    if not around:
        raise Unfit(f"how many iterations of {loop.id} it has to cover is not known; "
                    f"put chunks of {loop.id} further out in the plan")
    outer, inner = around[-1].chunk, 1 if term.chunk is None else term.chunk
    if not isinstance(outer, int) or not isinstance(inner, int):
        raise Unfit(f"the chunks of {loop.id} have no number")
    if outer % inner:
        raise Unfit(f"chunks of {inner} do not cut chunks of {outer} of the loop {loop.id} evenly")
    value = Affine.of(loop.id) if term.chunk is None else Affine.of(chunk_symbol(term))
    ahead = value - Affine.of(chunk_symbol(around[-1]))
    return outer // inner, (ahead if loop.step > 0 else -ahead).floor_div(inner * abs(loop.step))


def served(buffer: Buffer, statement: Statement) -> tuple[Access, ...]:
    """The accesses of a statement that a buffer serves."""
    return tuple(access for access in statement.accesses if buffer.serves(access.storage, access.subscripts))


def reads_and_writes(nest: Nest, buffer: Buffer) -> tuple[bool, bool]:
    """Whether the program reads through the buffer, and whether it writes."""
    accesses = [access for statement in nest.statements for access in served(buffer, statement)]
    return any(not access.write for access in accesses), any(access.write for access in accesses)


def references(nest: Nest, storage: str) -> tuple[tuple[Affine, ...], ...]:
    """The different subscripts with which the nest reaches a storage, in text order; without those not known."""
    return tuple(dict.fromkeys(access.subscripts for statement in nest.statements for access in statement.accesses
                               if access.storage == storage and access.subscripts is not None))
