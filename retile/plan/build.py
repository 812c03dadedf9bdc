"""From a plan to the loop tree that will be printed.

Going through the terms from the outside in, statements are split into those before, in and after the term's loop, and
the loop gets the bounds that its statements leave it: the projection of their instances onto the loops placed so far
(Ancourt & Irigoin, "Scanning polyhedra with DO loops", 1991).  Where the source loop's own bounds, cut by the chunk,
say the same, they are kept, because a reader knows them.  What bounds cannot say becomes a guard around the statement.

    plan k:64 i k          for k_from = 0, 64, ... < n          Loop(k:64)
                             for i = 0 ... n-1                    Loop(i)
                               for k = k_from ... min(k_from+63, n-1)   Loop(k)

The result is not trusted: ``questions.py`` judges it like any other tree.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from itertools import groupby

from ..affine import Affine, AllOf, Bound, Formula, at_most, bound_names, equal, less, negate
from ..dependence import defined
from ..model import Nest, Plan, Term
from ..sets import Region
from ..tree import Buffer, Copy, Guard, Held, Kept, Leaf, Loop, Move, Node, Role, Verbatim, loops_of
from ..values import replace
from .bounds import bounds_of_pieces, bounds_on, on_grid, tightest, without_idle_bounds
from .buffers import reads_and_writes, served
from .grammar import form_text
from .kept import Keeping, kept_from, keeping
from .schedule import AFTER, BEFORE, INSIDE, merged, placed, skewed_coordinate, standing
from .threads import within_threads
from .units import Unit, asked_ahead, statements_in, units


def build_tree(nest: Nest, plan: Plan) -> tuple[Node, ...]:
    """The loop tree of a plan, with clamped bounds at the remainders."""
    plan = plan if plan.places else placed(plan, nest)
    return _Builder(nest, plan).group(units(nest, plan), 0, Region.where(), ())


class _Builder:
    def __init__(self, nest: Nest, plan: Plan) -> None:
        self._nest = nest
        self._plan = plan
        self._context = defined(nest)
        self._parameters = tuple(parameter.symbol for parameter in nest.parameters)
        kept = (keeping(nest, plan, nest.storage(name)) for name in plan.kept)
        self._kept = tuple(keep for keep in kept if keep is not None)
        inner = (kept_from(nest, plan, nest.storage(name), level) for name, level in plan.inner if name in plan.kept)
        self._inner = tuple(keep for keep in inner if keep is not None)
        self._nearest: dict[str, Keeping] = {keep.scalar: keep for keep in self._kept}  # around what is under way
        self._constants = tuple(term.chunk for term in plan.terms if isinstance(term.chunk, str))

    def group(self, members: tuple[Unit, ...], level: int, known: Region, outer: tuple[Loop, ...]) -> tuple[Node, ...]:
        """The nodes of these units from a term on; ``known``: what the loops around establish."""
        if any(self._condition(unit, level) for unit in members):
            runs = groupby(members, lambda unit: id(self._condition(unit, level)))
            return tuple(node for _, run in runs for node in self._under(tuple(run), level, known, outer))
        owned = [keep for keep in self._kept if keep.level == level and self._users(keep, members)]
        for keep in self._inner:
            around = self._nearest.get(keep.scalar)
            if keep.level == level and around is not None and around.level < level and self._users(keep, members):
                return self._nested(keep, around, members, level, known, outer)
        nodes = self._copying(self._parts(members, level, known, outer), level, members)
        for keep in owned:
            nodes = (Kept(keep.scalar, keep.shape, nodes, keep.heap and not within_threads(self._plan, level)),)
        for buffer in reversed([buffer for buffer in self._plan.buffers if buffer.level == level]):
            nodes = self._buffered(nodes, buffer, members, known, outer)
        return nodes

    def _condition(self, unit: Unit, level: int) -> Guard | None:
        """The next condition of a unit that is asked here, ahead of all that it guards."""
        return next((guard if wanted == level else None for guard, wanted in zip(unit.guards, asked_ahead(self._plan, unit))
                     if guard.span is not None), None)

    def _under(self, members: tuple[Unit, ...], level: int, known: Region, outer: tuple[Loop, ...]) -> tuple[Node, ...]:
        """The nodes of neighbours that have the next condition in common, or none."""
        guard = self._condition(members[0], level)
        if guard is None:
            return self.group(members, level, known, outer)
        condition = AllOf(()) if guard.condition is None else guard.condition
        settled = Guard(condition, ())
        inside = tuple(replace(unit, guards=tuple(settled if one is guard else one for one in unit.guards)) for unit in members)
        nodes = self.group(inside, level, known & Region.where(condition), outer)
        if guard.condition is None or guard.partly or not (known & self._context).implies(condition):
            return (replace(guard, body=nodes),)
        return nodes

    def _nested(self, keep: Keeping, around: Keeping, members: tuple[Unit, ...], level: int, known: Region,
                outer: tuple[Loop, ...]) -> tuple[Node, ...]:
        """The nodes with a kept scalar in an array of their own, filled from the one around and emptied into it."""
        self._nearest[keep.scalar] = keep
        nodes = self.group(members, level, known, outer)
        self._nearest[keep.scalar] = around
        users = tuple(unit for unit in members if self._users(keep, (unit,)))
        private = self._nest.storage(keep.scalar).private_to
        terms = tuple(at for at, term in enumerate(self._plan.terms) if level <= at < keep.ready
                      and term.chunk is None and term.loop in private)
        fresh = any(self._starts_value(id, keep) for unit in users for id in statements_in(unit.nodes))
        fill, empty = ((self._moving(Copy(keep.scalar, keep.index, store, around=around.index), users, known, outer, terms),)
                       for store in (True, False))
        return (Kept(keep.scalar, keep.shape, (*(() if fresh else fill), *nodes, *empty),
                     keep.heap and not within_threads(self._plan, level)),)

    def _buffered(self, nodes: tuple[Node, ...], buffer: Buffer, members: tuple[Unit, ...], known: Region,
                  outer: tuple[Loop, ...]) -> tuple[Node, ...]:
        """The nodes with a buffer that is filled before them and emptied after them, where anything uses it."""
        users = tuple(unit for unit in members if any(served(buffer, self._nest.statement(id))
                                                      for id in statements_in(unit.nodes)))
        if not users:
            return nodes
        around = known & self._context
        needed = Region.union(self._visible(unit, outer) for unit in users)
        reads, writes = reads_and_writes(self._nest, buffer)
        inside = known & needed
        fill, empty = ((self._moving(Move(buffer, store), users, inside, outer, buffer.terms),) if wanted else ()
                       for store, wanted in ((False, reads), (True, writes)))
        held = Held(buffer, (*fill, *nodes, *empty))
        if around.within(needed):
            return (held,)
        condition = needed.relative_to(around).formula()
        idle = Region.union(self._visible(unit, outer) for unit in members) & around
        return Guard(condition, (held,)), *((Guard(negate(condition), nodes),) if not idle.within(needed) else ())

    def _moving(self, move: Move | Copy, users: tuple[Unit, ...], known: Region, outer: tuple[Loop, ...],
                terms: tuple[int, ...]) -> Node:
        """The loops over the cells of a buffer."""
        if not terms:
            return move
        term = self._plan.terms[terms[0]]
        symbol = chunk_symbol(term) if term.chunk is not None else term.loop
        visible = (*self._parameters, *self._constants, *(loop.symbol for loop in outer), symbol)
        values = Region.union(self._executed(unit).only(visible) for unit in users).coalesced()
        loop = self._bounded(term, symbol, values, known, outer)
        inner = known & Region.where(loop.constraints())
        return replace(loop, body=(self._moving(move, users, inner, (*outer, loop), terms[1:]),))

    def _copying(self, nodes: tuple[Node, ...], level: int, members: tuple[Unit, ...]) -> tuple[Node, ...]:
        """The nodes with the values that they use fetched before and put back after them."""
        for keep in self._kept:
            users = self._users(keep, members) if keep.ready == level else ()
            if not users:
                continue
            block = self._nest.storage(keep.scalar).scope == "block"
            near = self._nearest[keep.scalar]
            fetch = () if self._starts_value(users[0], keep) else (Copy(keep.scalar, near.index, False, block),)
            changed = any(a.write and a.storage == keep.scalar for id in users for a in self._nest.statement(id).accesses)
            nodes = (*fetch, *nodes, *((Copy(keep.scalar, near.index, True),) if changed else ()))
        return nodes

    def _users(self, keep: Keeping, members: tuple[Unit, ...]) -> tuple[str, ...]:
        """The statements of these units that use a kept scalar, in text order."""
        return tuple(id for unit in members for id in statements_in(unit.nodes)
                     if any(a.storage == keep.scalar for a in self._nest.statement(id).accesses))

    def _starts_value(self, statement: str, keep: Keeping) -> bool:
        """True if a statement surely gives the scalar a new value without looking at the old one."""
        first = self._nest.statement(statement)
        uses = [access for access in first.accesses if access.storage == keep.scalar]
        return all(access.write and access.certain for access in uses) and \
            first.loops == self._nest.storage(keep.scalar).private_to

    def _parts(self, members: tuple[Unit, ...], level: int, known: Region, outer: tuple[Loop, ...]) -> tuple[Node, ...]:
        if level == len(self._plan.terms):
            return tuple(self._leaf(unit, known, outer) for unit in members)
        split = self._split(members, level)
        return tuple(node for position, part in split.items()
                     for node in self._part(part, level, known, outer, position == INSIDE and not self._idle(level, part, outer)))

    def _part(self, members: tuple[Unit, ...], level: int, known: Region, outer: tuple[Loop, ...],
              in_loop: bool) -> tuple[Node, ...]:
        """The nodes of units that part from others here: what their loops cannot say is tested first, if that settles it."""
        def made(known: Region) -> tuple[Node, ...]:
            return (self._loop(members, level, known, outer),) if in_loop else \
                self.group(members, level + 1, known, outer)

        nodes = made(known)
        if not any(_is_tested(node) for node in nodes):
            return nodes
        around = known & self._context
        left = Region.union(self._visible(unit, outer) for unit in members).relative_to(around)
        early = nodes if around.within(left) else made(known & left)
        return nodes if any(_is_tested(node) for node in early) else (Guard(left.formula(), early),)

    def _visible(self, unit: Unit, outer: tuple[Loop, ...], guarded: bool = True) -> Region:
        """The values of parameters and of the loops around with which a unit runs."""
        names = (*self._parameters, *self._constants, *(loop.symbol for loop in outer))
        return self._executed(unit, guarded).only(names)

    def _split(self, members: tuple[Unit, ...], level: int) -> dict[int, tuple[Unit, ...]]:
        """The units before, in and after a term's loop; copies go wherever their value is needed."""
        places = {unit: self._plan.places_of(unit.statement)[level] for unit in members}
        copies = {unit for unit, place in places.items() if place.position == INSIDE and place.form is None}
        split: dict[int, tuple[Unit, ...]] = {}
        for position in (BEFORE, INSIDE, AFTER):
            own = [unit for unit, place in places.items() if unit not in copies and place.position == position]
            needed = [copy for copy in copies if any(self._uses(unit, copy) for unit in own)]
            if own:
                split[position] = tuple(unit for unit in members if unit in own or unit in needed)
        return split

    def _uses(self, unit: Unit, copy: Unit) -> bool:
        written = {a.storage for a in self._nest.statement(copy.statement).accesses if a.write}
        return any(a.storage in written for id in statements_in(unit.nodes) for a in self._nest.statement(id).accesses)

    def _idle(self, level: int, members: tuple[Unit, ...], outer: tuple[Loop, ...]) -> bool:
        """True if a loop over single iterations would run just once, for statements that only stand at its value."""
        term = self._plan.terms[level]
        return term.chunk is None and all(term.loop not in unit.loops or term.loop in self._merged(unit, outer)
                                          for unit in members)

    def _merged(self, unit: Unit, outer: tuple[Loop, ...]) -> dict[str, str]:
        """The loops of a unit whose values loops around already have, in the same variables."""
        around = {loop.symbol for loop in outer}
        return {inner: loop for inner, loop in merged(self._plan, self._nest, unit.statement).items() if loop in around}

    def _leaf(self, unit: Unit, known: Region, outer: tuple[Loop, ...]) -> Node:
        node: Node = Verbatim(unit.span, _marked(unit.nodes, self._plan, self._merged(unit, outer)))
        around = known & self._context
        for guard in reversed(unit.guards):
            if guard.condition is None or guard.partly or not around.implies(guard.condition):
                node = replace(guard, body=(node,))
        left = self._visible(unit, outer, guarded=False).relative_to(around)
        return node if around.within(left) else Guard(left.formula(), (node,))

    def _executed(self, unit: Unit, guarded: bool = True) -> Region:
        """The values of all loop symbols with which a unit runs."""
        conditions: list[Formula] = [self._source(loop).constraints() for loop in unit.loops]
        if guarded:
            conditions += [guard.condition for guard in unit.guards if guard.condition is not None]
        aligned = standing(self._plan, unit.statement)
        present = {*unit.loops, *aligned}
        conditions += [equal(Affine.of(loop), value) for loop, value in aligned.items()]
        conditions += [self._chunk_link(term, aligned) for term in self._plan.terms if term.chunk is not None
                       and all(loop in present for loop, _ in term.form)]
        return Region.where(*conditions) & self._context

    def _source(self, id: str) -> Loop:
        return next(loop for loop in loops_of(self._nest.tree) if loop.of == id)

    def _chunk_link(self, term: Term, aligned: Mapping[str, Affine]) -> Formula:
        """How the value of a chunk loop hangs together with the iterators: it is the first value of their chunk.

        Chunks begin at the loop's first value, but a statement may stand before it.
        """
        loop, value = self._chunk(term), Affine.of(chunk_symbol(term))
        assert loop.cut is not None
        sign = 1 if loop.step > 0 else -1
        ahead = (loop.cut - value) * sign
        conditions = [at_most(0, ahead), less(ahead, loop.length),
                      equal((value - loop.origin).mod(abs(loop.step)), 0)]
        if loop.cut == Affine.of(loop.of) and self._nest.loop(loop.of).independent and loop.of not in aligned:
            conditions.append(at_most(0, (value - loop.origin) * sign))
        if loop.named is not None:
            conditions.append(at_most(1, Affine.of(loop.named)))
        return AllOf(tuple(conditions))

    def _chunk(self, term: Term) -> Loop:
        """The chunk loop of a term, without bounds, body and level."""
        nothing, of = Affine(), term.form[0][0]
        name, size = (term.chunk, 1) if isinstance(term.chunk, str) else (None, term.chunk or 1)
        if len(term.form) > 1 or term.form[0][1] != 1:
            cut = skewed_coordinate(term, self._nest)
            return Loop(chunk_symbol(term), nothing, nothing, size, nothing, (), of, Role.CHUNK, 0, size, name, cut)
        loop = self._nest.loop(of)
        origin = loop.first if loop.independent and isinstance(loop.first, Affine) else nothing
        return Loop(chunk_symbol(term), nothing, nothing, size * loop.step, origin, (), of, Role.CHUNK, 0, size, name,
                    Affine.of(of))

    def _loop(self, members: tuple[Unit, ...], level: int, known: Region, outer: tuple[Loop, ...]) -> Loop:
        term = self._plan.terms[level]
        symbol = chunk_symbol(term) if term.chunk is not None else term.loop
        visible = (*self._parameters, *self._constants, *(loop.symbol for loop in outer), symbol)
        # Copies follow those that need them: they add no iterations.
        own = [unit for unit in members if unit.statement not in self._plan.copied]
        values = Region.union(self._executed(unit).only(visible) for unit in own).coalesced()
        if values.is_empty():  # a condition that never holds: the loops run all the same
            values = Region.union(self._executed(unit, guarded=False).only(visible) for unit in own).coalesced()
        loop = self._bounded(term, symbol, values, known, outer)
        inner = known & Region.where(loop.constraints())
        return replace(loop, body=self.group(members, level + 1, inner, (*outer, loop)),
                       unordered=level == self._plan.threaded)

    def _bounded(self, term: Term, symbol: str, values: Region, known: Region, outer: tuple[Loop, ...]) -> Loop:
        """A loop without a body that runs over the values, or over a few more where bounds cannot say it."""
        around = known & self._context & values.without([symbol])
        readable = tuple(self._readable(term, symbol, outer))
        for loop in readable:
            own = Region.where(loop.constraints())
            if (around & own).within(values) and (values & known).within(own):
                return loop
        start = [loop for loop in readable if (values & known).within(Region.where(loop.constraints()))][-1:]
        frame = start[0] if start else self._frame(term, symbol, outer)
        around = around & Region.where(frame.constraints()) if start else around
        lower, upper = bounds_on(values.relative_to(around).hull(), symbol)
        if not start and not (lower and upper):
            full_lower, full_upper = bounds_on(values.hull(), symbol)
            lower, upper = lower or full_lower, upper or full_upper
            if not (lower and upper):
                each_lower, each_upper = bounds_of_pieces(values, symbol)
                lower, upper = lower or each_lower, upper or each_upper
        loop = on_grid(replace(frame, lower=tightest("max", ((frame.lower,) if start else ()) + lower),
                                upper=tightest("min", ((frame.upper,) if start else ()) + upper)))
        # Where the values are none, the loops inside run nothing, whatever the bounds say.
        return without_idle_bounds(loop, known & self._context & values.without([symbol]))

    def _frame(self, term: Term, symbol: str, outer: tuple[Loop, ...]) -> Loop:
        """The loop of a term with everything but its bounds and its body."""
        source = self._nest.loop(term.form[0][0])
        level = sum(1 for other in self._plan.terms[:self._plan.terms.index(term)]
                    if other.chunk is not None and any(loop == source.id for loop, _ in other.form))
        nothing = Affine()
        if term.chunk is not None:
            return replace(self._chunk(term), level=level)
        step, origin = source.step, self._source(source.id).origin
        if not origin.names() <= {*self._parameters, *(loop.symbol for loop in outer)}:
            step, origin = (1 if step > 0 else -1), nothing
        role = Role.ELEMENT if level else Role.WHOLE
        return Loop(symbol, nothing, nothing, step, origin, (), source.id, role, level)

    def _readable(self, term: Term, symbol: str, outer: tuple[Loop, ...]) -> Iterable[Loop]:
        """Loops with the bounds that a reader expects: the source loop's own, cut by the chunks around."""
        if len(term.form) > 1 or term.form[0][1] != 1:
            return
        source = self._source(term.loop)
        names = bound_names(source.lower) | bound_names(source.upper)
        if not names <= {*self._parameters, *(loop.symbol for loop in outer)}:
            return
        frame = self._frame(term, symbol, outer)
        chunks = [loop for loop in outer if loop.role is Role.CHUNK and loop.cut == Affine.of(term.loop)]
        yield from _cut(frame, source, chunks[-1:])
        yield from _cut(frame, source, chunks)


def _marked(nodes: tuple[Node, ...], plan: Plan, merged: dict[str, str]) -> tuple[Node, ...]:
    """The nodes with the values at which their statements stand, and the loops they share, noted in the leaves."""
    if not plan.aligned:
        return nodes
    shared = {inner: Affine.of(loop) for inner, loop in merged.items()}
    return tuple(replace(node, aligned=tuple(standing(plan, node.statement).items()),
                         instance=tuple((name, form.substitute(shared)) for name, form in node.instance))
                 if isinstance(node, Leaf) else replace(node, body=_marked(node.body, plan, merged))
                 if isinstance(node, Loop | Guard) else node for node in nodes)


def _is_tested(node: Node) -> bool:
    """True if a guard that is not the user's stands in the node."""
    if isinstance(node, Guard) and node.span is None:
        return True
    return isinstance(node, Loop | Guard) and any(_is_tested(inner) for inner in node.body)


def chunk_symbol(term: Term) -> str:
    """The name that forms use for the value of a chunk loop: the term as a plan writes it."""
    return f"{form_text(term.form)}:{term.chunk}"


def _cut(frame: Loop, source: Loop, chunks: list[Loop]) -> Iterable[Loop]:
    """The frame with the source loop's bounds, cut by these chunks; first without the bound at which chunks start."""
    upward = source.step > 0
    starts: tuple[Bound, ...] = tuple(Affine.of(chunk.symbol) for chunk in chunks)
    ends: tuple[Bound, ...] = tuple(Affine.of(chunk.symbol) + (chunk.length - 1) * (1 if upward else -1)
                                    for chunk in chunks)
    if frame.role is Role.CHUNK and frame.step * source.step > 0 and not chunks:
        starts = ()
    near, far = (source.lower, source.upper) if upward else (source.upper, source.lower)
    for first in ((starts, (*starts, near)) if starts else ((near,),)):
        low, high = tightest("max" if upward else "min", first), tightest("min" if upward else "max", (*ends, far))
        yield replace(frame, lower=low, upper=high) if upward else replace(frame, lower=high, upper=low)
