"""What a plan means: the place of every statement, and the moment of every instance.

An instance's moment is a vector compared lexicographically.  Per term it has a list position (before, in or after the
term's loop) and the loop's value; it ends with the original order, which decides among statements that stand in the
same named loops.
"""

from __future__ import annotations


from ..affine import Affine
from ..model import LoopText, Nest, Place, Plan, Statement, Storage, Term
from ..order import Coordinate, Cut
from ..values import replace

BEFORE, INSIDE, AFTER = 0, 1, 2


def placed(plan: Plan, nest: Nest) -> Plan:
    """The plan with the places of all statements of the nest.

    A statement inside the loops of a term takes the loops' own place, and so does one that the plan aligns with them;
    any other stands before the first value or after the last one, as the text has it.
    """
    places = tuple((statement.id, tuple(_place(term, statement, nest, plan) for term in plan.terms))
                   for statement in nest.statements)
    for id in plan.copied:
        last = last_bare(plan, nest.statement(id).loops)
        places = tuple((name, tuple(Place(INSIDE, None) if at < last and place.form is None else place
                                    for at, place in enumerate(own)) if name == id else own) for name, own in places)
    return replace(plan, places=places)


def last_bare(plan: Plan, loops: tuple[str, ...]) -> int:
    """The position in the plan of the last bare term of these loops; -1 if it has none."""
    return max((at for at, term in enumerate(plan.terms) if term.chunk is None and term.loop in loops), default=-1)


def stays_whole(plan: Plan, storage: Storage, nest: Nest) -> bool:
    """True if one iteration of the loops that a value is private to runs to its end before another one starts.

    It does if no other loop stands in the plan before the last bare term of these: for ``i`` and the plan
    ``i:8 i k`` it stays whole, with ``i:8 k:8 i k`` it is cut by the chunks of ``k``.  Loops that all users of the value
    stand before, or all stand after, do not come between them.
    """
    terms = plan.terms[:last_bare(plan, storage.private_to) + 1]
    others = [term for term in terms if any(loop not in storage.private_to for loop, _ in term.form)]
    users = [s for s in nest.statements if any(a.storage == storage.name for a in s.accesses)] if others else []
    sides = [{_place(term, user, nest, plan).position for user in users} for term in others]
    return all(len(side) == 1 and INSIDE not in side for side in sides)


def _place(term: Term, statement: Statement, nest: Nest, plan: Plan) -> Place:
    aligned = standing(plan, statement.id, term.chunk is not None)
    missing = [loop for loop, _ in term.form if loop not in statement.loops and loop not in aligned]
    if not missing:
        return Place(INSIDE, moment(term, nest).substitute(aligned))
    before = statement.span.start < nest.loop(missing[0]).span.start
    return Place(BEFORE if before else AFTER, None)


def standing(plan: Plan, statement: str, chunks: bool = True) -> dict[str, Affine]:
    """The values of loops at which a statement outside them stands, for chunk terms or for bare ones."""
    return {a.loop: a.value for a in plan.aligned if a.statement == statement and (chunks or not a.chunks_only)}


def merged(plan: Plan, nest: Nest, statement: str) -> dict[str, str]:
    """Loops of a statement that need not run where it stands, each with the loop around that already has its value.

    ``for (i) a[i] = 0;`` standing at ``i@5 = i@3`` in a loop over the same variable is simply ``a[i] = 0;`` there.
    """
    bare = [term.loop for term in plan.terms if term.chunk is None]
    found: dict[str, str] = {}
    for outer, value in standing(plan, statement, chunks=False).items():
        inner = value.terms[0][0] if len(value.terms) == 1 and value == Affine.of(value.terms[0][0]) else None
        if isinstance(inner, str) and inner in bare and nest.loop(inner).iterator == nest.loop(outer).iterator and \
                bare.index(outer) < bare.index(inner):
            found[inner] = outer
    return found


def moment(term: Term, nest: Nest) -> Affine:
    """A term's value for an instance, in its iterators; for a chunk of unknown size the value that is cut."""
    loops = [(nest.loop(loop), factor) for loop, factor in term.form]
    if len(loops) == 1 and loops[0][1] == 1:
        loop = loops[0][0]
        if loop.independent:
            number = iteration_number(loop)
            return number.floor_div(term.chunk) if isinstance(term.chunk, int) else number
        upward = Affine.of(loop.id) * (1 if loop.step > 0 else -1)
        return upward.floor_div(term.chunk * abs(loop.step)) if isinstance(term.chunk, int) else upward
    coordinate = skewed_coordinate(term, nest)
    return coordinate.floor_div(term.chunk) if isinstance(term.chunk, int) else coordinate


def skewed_coordinate(term: Term, nest: Nest) -> Affine:
    """The value of a skewed sum: loops that count up by one by their value, others by their iteration number."""
    total = Affine()
    for id, factor in term.form:
        loop = nest.loop(id)
        total = total + (Affine.of(id) if loop.step == 1 else iteration_number(loop)) * factor
    return total


def iteration_number(loop: LoopText) -> Affine:
    """``(x - first) / step``, exact on the loop's iterations."""
    if not isinstance(loop.first, Affine):
        raise TypeError(f"first value of loop {loop.id} is not affine")
    distance = Affine.of(loop.id) - loop.first
    return (distance if loop.step > 0 else -distance).floor_div(abs(loop.step))


def moments(plan: Plan, statement: str) -> tuple[Coordinate, ...]:
    """The part of a statement's time vector that the plan gives: positions and values in turn, outermost first."""
    vector: list[Coordinate] = []
    for term, place in zip(plan.terms, plan.places_of(statement), strict=True):
        value: Coordinate = place.form if place.form is not None else 0
        vector += [place.position, Cut(value) if isinstance(term.chunk, str) and isinstance(value, Affine) else value]
    return tuple(vector)
