"""Loops from chunk to chunk.

    for (long long k_from = 0; k_from < n; k_from += 64) {
        const int k_to = k_from + 64 < n ? (int)k_from + 64 : n;
        for (int k = (int)k_from; k < k_to; k++)

The variable has the user's type if its last step is sure to fit, else a wider one.  Where there is none, the step goes to
the next chunk's first value, which is computed from what is left and cannot wrap:

    for (size_t k_from = 0, k_to; k_from < n; k_from = k_to) {
        k_to = n - k_from > 64 ? k_from + 64 : n;

Loops that count down with ``i-- > b`` always step that way, with ``i_from`` one ahead of the chunk's first value.
"""

from __future__ import annotations


from ..affine import Affine, AnyOf, Formula, equal, map_bound
from ..model import CType, LoopText
from ..tree import Loop, Role, loops_of
from ..values import dataclass, replace
from .bounds import (
    Limit,
    extremum_of,
    far_bound,
    half_open,
    interval_of,
    members,
    named,
    needed,
)
from .expression import LONG_LONG, Expression, NoRoom, comparison, express
from .loops import INLINE, Elements, Locals, Opened, Place, step_of


@dataclass(frozen=True)
class _Chunk:
    """A chunk loop under way."""

    loop: Loop
    source: LoopText
    near: tuple[Affine, ...]
    end: Affine
    shift: int
    skewed: bool
    work: Locals


class Loops(Elements):
    """Writes the headers of one variant."""

    def _chunk(self, loop: Loop, place: Place) -> Opened:
        """A loop from chunk to chunk, with the end of the chunk where the loops inside want it."""
        source = self.source(loop.of)
        skewed = "(" in loop.symbol
        shift = 0 if skewed else self._shift(source)
        work = Locals(place)
        near = self._near(loop, work, LONG_LONG if skewed else source.type)
        upward, kind = loop.step > 0, "min" if loop.step > 0 else "max"
        far = self._forms(members(far_bound(loop), kind), loop, work, source.type)
        ends = tuple(half_open(form, upward, shift) for form in far)
        ends = needed(named(ends, work.place.limits, upward), kind, work.place.scope)
        aliases = {} if skewed else self._ends_written(source, work.place)
        end = self._local(loop, ends, kind, work, source.type, "end", aliases=aliases)
        making = _Chunk(loop, source, near, end, shift, skewed, work)
        if shift or not self._has_room(making):
            advancing = self._advancing(making)
            if advancing is not None:
                return advancing
        return self._stepping(making)

    def _has_room(self, making: _Chunk) -> bool:
        try:
            self._wide_enough(making.loop, making.work.place.scope, making.source.type, making.near, making.shift)
        except NoRoom:
            return False
        return True

    def _stepping(self, making: _Chunk) -> Opened:
        """``for (long long k_from = 0; k_from < n; k_from += 64)``; raises NoRoom."""
        loop, source, work = making.loop, making.source, making.work
        type = self._wide_enough(loop, work.place.scope, source.type, making.near, making.shift)
        name = self._chunk_name(loop, "from")
        inside = self._with_variable(making, Expression(name, type), loop.constraints())
        start = self._chunk_start(making, type)
        test = self._chunk_test(making, Expression(name, type), loop.length)
        header = f"{name} = {start}; {test}; {self._step(name, loop)})"
        body = Locals(inside)
        self._end_of_chunk(making, body)
        opened = Opened(tuple(work.lines), header, tuple(body.lines), work.place, body.place)
        return self._with_declaration(opened, source, f"{type.spelling} {name}")

    def _advancing(self, making: _Chunk) -> Opened | None:
        """``for (size_t k_from = 0, k_to; k_from < n; k_from = k_to)``; None if the chunk's end is not known here."""
        loop, source, work = making.loop, making.source, making.work
        type = self._advancing_type(making)
        if type is None:
            return None
        name = self._chunk_name(loop, "from")
        inside = self._with_variable(making, Expression(name, type), loop.constraints())
        chunk_end = Affine.of(loop.symbol) + step_of(loop) + making.shift
        inner, ends = self._next_ends(making, inside)
        upward = loop.step > 0
        kind = "min" if upward else "max"
        if inner is None or not inside.scope.knowing(extremum_of("~", kind, (chunk_end, making.end))).implies(
                extremum_of("~", kind, ends)):
            return None
        limit = Limit("", upward, frozenset(ends))
        to = self._limit_name(inner, limit.ends, loop, "to")
        limit = replace(limit, symbol=f"= {to}")
        aliases = self._ends_written(source, inside)
        value = self._chosen_of(chunk_end, making.end, kind, inside.scope, type, aliases)
        start, test = self._chunk_start(making, type), self._chunk_test(making, Expression(name, type), None)
        scope = limit.named_in(inside.scope, to, type)
        # the second variable is one of the block where the header cannot declare it
        header = f"{name} = {start}{'' if self._apart else f', {to}'}; {test}; {name} = {to})"
        opened = Opened(tuple(work.lines), header, (f"{to} = {value.text};",), work.place,
                        Place(scope, (*inside.limits, limit), inside.around))
        if self._apart:
            opened = self._with_declaration(opened, source, f"{type.spelling} {name}")
            return replace(opened, declared=f"{opened.declared}, {to}")
        return self._with_declaration(opened, source, f"{type.spelling} {name}")

    def _advancing_type(self, making: _Chunk) -> CType | None:
        scope = making.work.place.scope
        try:
            bound = express(making.end, scope, wide=False).type
        except NoRoom:
            bound = making.source.type
        inside = scope.naming(making.loop.symbol, Expression("", bound), making.loop.constraints())
        value = Affine.of(making.loop.symbol) + making.shift
        for type in (making.source.type, bound):
            if inside.fits(value, type) and inside.fits(making.end, type) and \
                    all(scope.fits(form + making.shift, type) for form in making.near):
                return type
        return None

    def _with_variable(self, making: _Chunk, variable: Expression, *facts: Formula) -> Place:
        """The place with the chunk's C variable, which may be one ahead of the first value of the chunk."""
        place, symbol = making.work.place, making.loop.symbol
        if not making.shift:
            interval = interval_of(making.loop, place.scope) if facts == (making.loop.constraints(),) else (None, None)
            return replace(place, scope=place.scope.naming(symbol, variable, *facts, interval=interval))
        ahead = f"+ {symbol}"
        scope = place.scope.naming(ahead, variable).meaning(symbol, Affine.of(ahead) - making.shift, *facts)
        return replace(place, scope=scope)

    def _chunk_start(self, making: _Chunk, type: CType) -> str:
        kind, work = "max" if making.loop.step > 0 else "min", making.work
        forms = tuple(form + making.shift for form in making.near)
        if len(forms) == 1 and not making.skewed:
            return self._first_text(making.source, forms[0], work.place, type).text
        if len(forms) == 2:
            text = self._chosen_of(forms[0], forms[1], kind, work.place.scope, type, {}).text
            if len(text) <= INLINE:
                return text
        form = self._local(making.loop, forms, kind, work, type, "first")
        return self.in_type(form, type, work.place.scope).text

    def _chunk_test(self, making: _Chunk, variable: Expression, reach: Affine | None) -> str:
        """The comparison that lets the chunk loop go on; ``reach``: how far
        beyond its last value the variable gets; None: just to the end."""
        loop, source, place = making.loop, making.source, making.work.place
        upward = loop.step > 0
        value = Affine.of(loop.symbol)
        starts = [equal(value, form) for form in making.near]
        if reach is None:
            further = loop
            starts.append(equal(value + making.shift, making.end))
        elif upward:
            further = replace(loop, upper=map_bound(loop.upper, lambda form: form + reach))
        else:
            further = replace(loop, lower=map_bound(loop.lower, lambda form: form - reach))
        scope = self._with_variable(making, variable, AnyOf((further.constraints(), *starts))).scope
        aliases = {} if making.skewed else self._aliases(source, place)
        left = value + making.shift
        inclusive = making.end - 1 if upward else making.end + 1
        if source.relation in ("<=", ">=") and inclusive in aliases:
            return comparison(left, "<=" if upward else ">=", inclusive, scope, aliases).text
        return comparison(left, "<" if upward else ">", making.end, scope, aliases).text

    def _next_ends(self, making: _Chunk, inside: Place) -> tuple[Loop | None, tuple[Affine, ...]]:
        """The loop inside that this chunk cuts, and its half-open ends if they can be computed here and are several."""
        loop, upward = making.loop, making.loop.step > 0
        kind = "min" if upward else "max"
        for inner in loops_of(loop.body):
            if inner.of != loop.of or inner.role is Role.WHOLE or making.skewed or "(" in inner.symbol:
                continue
            bounds = members(far_bound(inner), kind)
            forms = [bound for bound in bounds if isinstance(bound, Affine)]
            if len(forms) < len(bounds) or not all(inside.scope.sees(form.names()) for form in forms):
                continue
            ends = named(tuple(half_open(form, upward, making.shift) for form in forms), inside.limits, upward)
            ends = needed(ends, kind, inside.scope)
            if len(ends) > 1:
                return inner, tuple(sorted(ends, key=lambda end: not end.coefficient(loop.symbol)))
        return None, ()

    def _end_of_chunk(self, making: _Chunk, body: Locals) -> None:
        """Declare where the chunk ends, if the loop inside can use it."""
        inner, ends = self._next_ends(making, body.place)
        if inner is None:
            return
        aliases = self._ends_written(making.source, body.place)
        kind = "min" if making.loop.step > 0 else "max"
        self._local(inner, ends, kind, body, making.source.type, "to", making.loop, aliases)
