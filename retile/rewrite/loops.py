"""Loop headers in C: the user's own where nothing changed, else the user's variable and way of writing.

    for (int k = 0; k < n; k++)                       as the user wrote it
    for (int k = (int)k_from; k < k_to; k++)          cut by a chunk

Ends are half-open.  Where a loop ends at the smaller of several values, that is a local constant, declared where it can
first be computed.
"""

from __future__ import annotations

import re
from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass, field

from ..affine import (
    Affine,
    AllOf,
    AnyOf,
    Bound,
    Formula,
    at_least_bound,
    at_most,
    at_most_bound,
    bound_names,
    less,
    map_bound,
    negate,
)
from ..model import CType, LoopText, Nest
from ..tree import Loop, Node, Role, loops_of
from ..values import replace
from .ahead import Ahead, conjunction
from .bounds import (
    Limit,
    far_bound,
    half_open,
    interval_of,
    members,
    named,
    near_bound,
    needed,
    on_grid,
    with_extremum,
    without_alignment,
)
from .constants import Constants
from .expression import (
    CHOICE,
    INT,
    LONG_LONG,
    SUM,
    Expression,
    NoRoom,
    Scope,
    common,
    comparison,
    condition,
    converted,
    express,
    promoted,
    same_values,
    written,
)
from .layout import NestText
from .names import Names

# The longest choice between two first values that stands in a header.
INLINE = 60


@dataclass(frozen=True)
class Place:
    """A place in the variant: what is known there, which local constants there are, which loops stand around."""

    scope: Scope
    limits: tuple[Limit, ...] = ()
    around: frozenset[str] = frozenset()  # ids of the source loops whose iterators have their values here


@dataclass(frozen=True)
class Opened:
    """A loop ready to be printed, but for its body."""

    before: tuple[str, ...]  # declarations ahead of it
    header: str
    first: tuple[str, ...]  # declarations at the start of its body
    outside: Place  # after it: the declarations ahead of it stay
    inside: Place
    kept: bool = False  # the header is the user's, byte for byte
    declared: str = ""  # the variables, where the header must not declare them (C90)
    condition: str = ""  # without it the loop must not be entered


@dataclass
class Locals:
    """Declarations under way."""

    place: Place
    lines: list[str] = field(default_factory=list)


def _widens(narrow: CType, wide: CType) -> bool:
    """True if a value changes to the wider type by itself, without a change of sign that compilers warn of."""
    return promoted(narrow).bits < wide.bits and (wide.signed or not promoted(narrow).signed)


def _enters(source: LoopText, first: Affine) -> Formula:
    """The loop's own comparison may let it make a round."""
    if source.relation == "!=":
        return AllOf()
    return at_most_bound(first, source.last) if source.step > 0 else at_least_bound(first, source.last)


def _ends(source: LoopText, first: Affine) -> Formula:
    """The value with which the loop ends fits its variable; for ``!=`` it lies ahead of the first one."""
    upward, stride = source.step > 0, abs(source.step)
    if source.relation == "!=":
        return at_most_bound(first - 1, source.last) if upward else at_least_bound(first + 1, source.last)
    limit = source.type.largest if upward else source.type.smallest
    if stride == 1 or first.is_constant:  # last <= limit - 1, or up to the last value on the grid that leaves room
        steps = abs(limit - first.constant) // stride - 1
        most = Affine((), limit + (-1 if upward else 1)) if stride == 1 else \
            first + (stride * steps + stride - 1) * (1 if upward else -1)
        return at_least_bound(most, source.last) if upward else at_most_bound(most, source.last)
    if upward:
        ending = map_bound(source.last, lambda last: first + ((last - first).floor_div(stride) + 1) * stride)
        return at_least_bound(Affine((), limit), ending)
    ending = map_bound(source.last, lambda last: first - ((first - last).floor_div(stride) + 1) * stride)
    return at_most_bound(Affine((), limit), ending)


def step_of(loop: Loop) -> Affine:
    """The signed distance between two iterations, in units of the C variable."""
    return loop.length if loop.step > 0 else -loop.length


class Elements(ABC):
    """Writes the headers of one variant, but for chunk loops."""

    def __init__(self, nest: Nest, layout: NestText, names: Names, tree: tuple[Node, ...], constants: Constants,
                 apart: bool = False) -> None:
        """``apart``: whether the user's dialect wants declarations outside of headers."""
        self._apart = apart
        self._nest = nest
        self._layout = layout
        self._names = names
        self._ahead = Ahead(nest)
        self._constants = constants
        self._chosen: dict[object, str] = {}
        self._ids = {loop.id for loop in nest.loops}
        self._source = {loop.of: loop for loop in loops_of(nest.tree)}
        self._deepest: dict[str, int] = {}
        for loop in loops_of(tree):
            if loop.role is Role.CHUNK:
                base = self._base(loop)
                self._deepest[base] = max(loop.level, self._deepest.get(base, 0))

    def source(self, id: str) -> LoopText:
        """A loop of the nest; its type is spelled as the user did in its header, where the header says."""
        loop = self._nest.loop(id)
        words = self._layout.header(loop).variable.removesuffix(loop.iterator).split()
        spelling = " ".join(word for word in words if word not in ("register", "const", "volatile"))
        return replace(loop, type=replace(loop.type, spelling=spelling)) if loop.declared_in_for and spelling else loop

    # ---------------------------------------------------------------- names

    def _base(self, loop: Loop) -> str:
        """What a loop's names are made of: the user's iterator, or those of a skewed sum."""
        form = loop.symbol.rpartition(":")[0] if loop.role is Role.CHUNK else loop.symbol
        words = re.findall(r"[A-Za-z_$][\w$]*(?:@\d+(?::\d+)?)?", form)
        ids = [word for word in words if word in self._ids] or [loop.of]
        return "_".join(self._nest.loop(id).iterator for id in ids)

    def name(self, key: object, wanted: str, family: bool = False) -> str:
        """A new name, the same one for the same key."""
        if key not in self._chosen:
            self._chosen[key] = self._names.fresh(wanted, family)
        return self._chosen[key]

    def _chunk_name(self, loop: Loop, word: str) -> str:
        return self.name((loop.symbol, word), self._wanted(loop, word))

    def _wanted(self, loop: Loop, word: str) -> str:
        """``k_from``; the outer ones of several levels carry their size: ``k_from_96``."""
        base = self._base(loop)
        outer = loop.role is Role.CHUNK and loop.level < self._deepest[base]
        return f"{base}_{word}" + (f"_{loop.named or loop.size}" if outer else "")

    def _limit_name(self, loop: Loop, ends: frozenset[Affine], chunk: Loop | None, word: str) -> str:
        owner = chunk or loop
        return self.name((owner.symbol, word, ends), self._wanted(owner, word))

    # ---------------------------------------------------------------- which way

    def open(self, loop: Loop, place: Place) -> Opened:
        """A loop's header and the declarations around it; raises NoRoom."""
        place = self._reached(loop, place)
        ahead = self._ahead.of_loop(loop, place.scope.region)
        if ahead:
            opened = self.open(loop, replace(place, scope=place.scope.knowing(*ahead)))
            first = conjunction(ahead, place.scope)
            return replace(opened, outside=place, condition=f"{first} && {opened.condition}" if opened.condition else first)
        if loop.role is Role.CHUNK:
            return self._chunk(loop, place)
        if loop.symbol in self._ids:
            source = self.source(loop.symbol)
            asked = self._must_end(loop, source, place)
            if self.unchanged(loop):
                inside = self._entered(loop, place, Expression(source.iterator, source.type))
                text = self._layout.text[source.header.start:source.header.end]
                return Opened((), text, (), place, inside, kept=True, condition=asked)
            opened = self._element(loop, source, place)
            return replace(opened, condition=" && ".join(filter(None, (asked, opened.condition))))
        return self._sum(loop, place)

    def unchanged(self, loop: Loop) -> bool:
        """True if a tree loop is a source loop with its own bounds: the header stays byte for byte."""
        own = self._source[loop.symbol]
        return (loop.lower, loop.upper, loop.step) == (own.lower, own.upper, own.step) and \
            (abs(loop.step) == 1 or loop.origin == own.origin)

    def _entered(self, loop: Loop, place: Place, variable: Expression) -> Place:
        scope = place.scope.naming(loop.symbol, variable, loop.constraints(), interval=interval_of(loop, place.scope))
        around = place.around | {loop.symbol} if loop.symbol in self._ids else place.around
        return Place(scope, place.limits, around)

    def _reached(self, loop: Loop, place: Place) -> Place:
        """Where the original runs this loop too, the value with which it ends fits its variable."""
        source = self.source(loop.of)
        if not set(source.outer) <= place.around or source.relation not in ("<=", ">=") or abs(source.step) != 1:
            return place
        if not isinstance(source.last, Affine) or not isinstance(source.first, Affine):
            return place
        if source.step > 0:
            fact = AnyOf((less(source.last, source.type.largest), less(source.last, source.first)))
        else:
            fact = AnyOf((less(Affine((), source.type.smallest), source.last), less(source.first, source.last)))
        return replace(place, scope=place.scope.knowing(fact))

    def _must_end(self, loop: Loop, source: LoopText, place: Place) -> str:
        """What keeps a loop from running beyond its type where the original might not run it at all; empty if nothing can.

        ``j <= m`` never fails at the type's largest ``m``.  The original only hangs if the loops around make a round, so
        nothing is lost if the loop is not entered then.
        """
        whole = far_bound(loop) == far_bound(self._source[loop.symbol])
        plain = abs(source.step) == 1 and (source.relation in ("<", ">") or not whole)
        if plain or set(source.outer) <= place.around or source.relation == "-->" or \
                not isinstance(source.first, Affine) or \
                not place.scope.sees(bound_names(source.last) | source.first.names()):
            return ""
        ends = _ends(source, source.first)
        if place.scope.implies(AnyOf((negate(_enters(source, source.first)), ends))):
            return ""
        if source.relation in ("<=", ">=") and abs(source.step) == 1 and isinstance(source.last, Affine):
            sign, limit = ("<", source.type.largest) if source.step > 0 else (">=", source.type.smallest + 1)
            return comparison(source.last, sign, Affine((), limit), place.scope).text
        return condition(ends, place.scope).text

    # ---------------------------------------------------------------- what the user wrote

    def _shift(self, source: LoopText) -> int:
        return 1 if source.relation == "-->" else 0

    def _user_text(self, source: LoopText, form: Affine, text: str, place: Place) -> Expression | None:
        """The user's text for a form where evaluating it is as safe as it was; its type is that of its operands."""
        if not form.is_constant and not place.scope.sees(form.names()):
            return None
        type = self._text_type(form, source, place.scope)
        expression = written(text, type)
        if set(source.outer) <= place.around or re.fullmatch(r"\w+", text):
            return expression
        try:
            express(form, place.scope, wide=False)
        except NoRoom:
            return None
        return expression

    def _text_type(self, form: Affine, source: LoopText, scope: Scope) -> CType:
        type = source.type if form.is_constant else INT
        for name in form.names():
            if name in scope.operands:
                type = common(type, scope.operands[name].type)
        return type

    def _aliases(self, source: LoopText, place: Place) -> dict[Affine, Expression]:
        """How the user writes the end of a loop, half-open or not as the user's comparison has it."""
        if not isinstance(source.last, Affine) or not source.bound_text:
            return {}
        exact = source.relation in ("<=", ">=")
        form = source.last if exact else half_open(source.last, source.step > 0, self._shift(source))
        text = self._user_text(source, form, source.bound_text, place)
        return {} if text is None else {form: text}

    def _first_text(self, source: LoopText, form: Affine, place: Place, type: CType) -> Expression:
        """The first value, in terms of the C variable: the user's text if it is the source loop's own."""
        own = source.first + self._shift(source) if isinstance(source.first, Affine) else None
        text = self._layout.header(source).first.partition("=")[2].strip()
        if own == form and text and (found := self._user_text(source, form, text, place)) is not None:
            return found if same_values(type, source.type) else self._as(found, type, form, place.scope)
        return self.in_type(form, type, place.scope)

    def _as(self, expression: Expression, type: CType, form: Affine, scope: Scope) -> Expression:
        """An initializer may widen by itself."""
        wider = promoted(type).bits >= promoted(expression.type).bits
        return replace(expression, type=type) if wider else converted(expression, type)

    def in_type(self, form: Affine, type: CType, scope: Scope) -> Expression:
        """A form computed in a type where that is safe, so that compilers see distances; else converted to it."""
        if scope.fits(form, type):
            plain = self._plain(form, scope)
            if plain is not None and (same_values(promoted(plain.type), promoted(type)) or _widens(plain.type, type)):
                return replace(plain, type=type)
            cast = {name: converted(scope.operands[name], type) for name in form.substitute(scope.meanings).names()
                    if scope.operands[name].type.bits > type.bits and scope.fits(Affine.of(name), type)}
            found = self._plain(form, scope.written_otherwise(cast)) if cast else None
            if found is not None and same_values(promoted(found.type), promoted(type)):
                return found
        return converted(express(form, scope), type)

    def _plain(self, form: Affine, scope: Scope) -> Expression | None:
        try:
            return express(form, scope, wide=False)
        except NoRoom:
            return None

    # ---------------------------------------------------------------- bounds

    def _forms(self, bounds: tuple[Bound, ...], loop: Loop, work: Locals, type: CType) -> tuple[Affine, ...]:
        """The bounds as forms; a min among maxima, or the reverse, gets a local of its own."""
        forms: list[Affine] = []
        for bound in bounds:
            if isinstance(bound, Affine):
                forms.append(bound)
                continue
            inner = self._forms(members(bound, bound.kind), loop, work, type)
            inner = needed(inner, bound.kind, work.place.scope)
            forms.append(self._local(loop, inner, bound.kind, work, type, "bound"))
        return tuple(forms)

    def _local(self, loop: Loop, forms: tuple[Affine, ...], kind: str, work: Locals, type: CType, word: str,
               chunk: Loop | None = None, aliases: Mapping[Affine, Expression] | None = None) -> Affine:
        """The min or max of forms, as a local constant if they are several."""
        if len(forms) == 1:
            return forms[0]
        limit = Limit("", kind == "min", frozenset(forms))
        for known in work.place.limits:  # declared for a loop before this one in the same block, or around it
            if known.upward is limit.upward and known.ends == limit.ends:
                return Affine.of(known.symbol)
        name = self._limit_name(loop, limit.ends, chunk, word)
        limit = replace(limit, symbol=f"= {name}")
        scope = limit.named_in(work.place.scope, name, type)
        value = Affine.of(limit.symbol)
        if not scope.fits(value, type) and not (chunk is not None or word == "to"):
            type = LONG_LONG
            if not scope.fits(value, type):
                raise NoRoom(name)
            scope = limit.named_in(work.place.scope, name, type)
        work.lines += self._declared(name, forms, kind, work.place.scope, type, aliases or {})
        work.place = Place(scope, (*work.place.limits, limit), work.place.around)
        return value

    def _declared(self, name: str, forms: tuple[Affine, ...], kind: str, scope: Scope, type: CType,
                  aliases: Mapping[Affine, Expression]) -> list[str]:
        """The declaration of the min or max of two or more forms."""
        if len(forms) > 2:
            forms = self._fitting_first(forms, kind, scope, type)
        text = self._chosen_of(forms[0], forms[1], kind, scope, type, aliases)
        if len(forms) == 2:
            return [f"const {type.spelling} {name} = {text.text};"]
        lines = [f"{type.spelling} {name} = {text.text};"]
        outer, variable = scope, Expression(name, type)
        scope = with_extremum(outer, f"= {name}", variable, kind, forms[:2])
        value = Affine.of(f"= {name}")
        for form in forms[2:]:
            better = comparison(form, "<" if kind == "min" else ">", value, scope, aliases)
            lines += [f"if ({better.text})", f"\x01{name} = {self._branch(form, scope, type, aliases).text};"]
            scope = with_extremum(outer, f"= {name}", variable, kind, forms[:forms.index(form) + 1])
        return lines

    @staticmethod
    def _fitting_first(forms: tuple[Affine, ...], kind: str, scope: Scope, type: CType) -> tuple[Affine, ...]:
        """The forms with two ahead whose min or max fits the type, as all that is chosen after them does then too."""
        chosen = Affine.of("= ")
        for at, one in enumerate(forms):
            for other in forms[at + 1:]:
                if with_extremum(scope, "= ", Expression("", type), kind, (one, other)).fits(chosen, type):
                    return (one, other, *(form for form in forms if form not in (one, other)))
        raise NoRoom(str(forms[0]))

    def _chosen_of(self, a: Affine, b: Affine, kind: str, scope: Scope, type: CType,
                   aliases: Mapping[Affine, Expression]) -> Expression:
        """``a < b ? a : b`` in a type."""
        sign = "<" if kind == "min" else ">"
        asked, other = without_alignment(a, b, sign)
        test = comparison(asked, sign, other, scope, aliases)
        taken = less(asked, other) if kind == "min" else less(other, asked)
        left = self._branch(a, scope.knowing(taken), type, aliases)
        right = self._branch(b, scope.knowing(negate(taken)), type, aliases)
        return Expression(f"{test.text} ? {left.at(CHOICE + 1)} : {right.at(CHOICE)}", type, CHOICE)

    def _branch(self, form: Affine, scope: Scope, type: CType, aliases: Mapping[Affine, Expression]) -> Expression:
        alias = aliases.get(form)
        return converted(alias, type) if alias is not None else self.in_type(form, type, scope)

    @abstractmethod
    def _chunk(self, loop: Loop, place: Place) -> Opened:
        """Open a chunk loop."""

    # ---------------------------------------------------------------- elements

    def _element(self, loop: Loop, source: LoopText, place: Place) -> Opened:
        """A source loop with bounds of its own, in the user's variable and style."""
        upward, shift = loop.step > 0, self._shift(source)
        work = Locals(place)
        header = self._layout.header(source)
        near = self._near(loop, work, source.type)
        end = self._end(loop, source, work, upward, shift)
        outside = work.place
        idle = self._keep_out(near, end, work, source.type, upward, shift)
        start = self._start_text(loop, source, near, work, shift)
        test = self._test(source, end, loop, work.place, upward)
        inside = self._entered(loop, work.place, Expression(source.iterator, source.type))
        advance = header.advance if abs(loop.step) == abs(source.step) else \
            f"{source.iterator} {'+' if upward else '-'}= {abs(loop.step)}"
        text = f"{header.opening}{header.variable} = {start.text}; {test}; {advance}{header.closing}"
        return Opened(tuple(work.lines), text, (), outside if idle else work.place, inside, condition=idle)

    @staticmethod
    def _keep_out(near: tuple[Affine, ...], end: Affine, work: Locals, type: CType, upward: bool, shift: int) -> str:
        """What keeps a loop that makes no round from starting at a value that its variable cannot hold; empty if all can."""
        scope, tests = work.place.scope, []
        forms = [form + shift for form in near]
        if all(scope.fits(form, type) for form in forms):
            return ""
        least, most = Affine((), type.smallest), Affine((), type.largest)
        reached = any(scope.implies(at_most(least, form) if upward else at_most(form, most)) for form in forms)
        for form in forms:
            if not (reached and scope.implies(at_most(form, most) if upward else at_most(least, form))):
                tests.append(comparison(form, "<" if upward else ">", end, scope).text)
                scope = scope.knowing(less(form, end) if upward else less(end, form))
        work.place = replace(work.place, scope=scope)
        return " && ".join(tests)

    def _near(self, loop: Loop, work: Locals, type: CType) -> tuple[Affine, ...]:
        kind = "max" if loop.step > 0 else "min"
        bounds = self._forms(members(near_bound(loop), kind), loop, work, type)
        scope = work.place.scope
        found = needed(tuple(on_grid(form, loop, scope) for form in bounds), kind, scope)
        return tuple(sorted(found, key=lambda form: form.is_constant))

    def _start_text(self, loop: Loop, source: LoopText, near: tuple[Affine, ...], work: Locals, shift: int) -> Expression:
        """The first value; two candidates are compared in place, more get a local."""
        kind = "max" if loop.step > 0 else "min"
        moved = tuple(form + shift for form in near)
        if len(moved) == 1:
            return self._first_text(source, moved[0], work.place, source.type)
        if len(moved) == 2:
            chosen = self._chosen_of(moved[0], moved[1], kind, work.place.scope, source.type, {})
            if len(chosen.text) <= INLINE:
                return chosen
        form = self._local(loop, moved, kind, work, source.type, "first")
        return self.in_type(form, source.type, work.place.scope)

    def _end(self, loop: Loop, source: LoopText, work: Locals, upward: bool, shift: int) -> Affine:
        """The half-open end as one form, with a local constant where there are several."""
        kind = "min" if upward else "max"
        bounds = self._forms(members(far_bound(loop), kind), loop, work, source.type)
        ends = tuple(half_open(form, upward, shift) for form in bounds)
        ends = needed(named(ends, work.place.limits, upward), kind, work.place.scope)
        return self._local(loop, ends, kind, work, source.type, "to", aliases=self._ends_written(source, work.place))

    def _ends_written(self, source: LoopText, place: Place) -> dict[Affine, Expression]:
        return {form: text for form, text in self._aliases(source, place).items()
                if source.relation not in ("<=", ">=")}

    def _test(self, source: LoopText, end: Affine, loop: Loop, place: Place, upward: bool) -> str:
        """The comparison that lets the loop go on."""
        variable = Expression(source.iterator, source.type)
        aliases = self._aliases(source, place)
        inclusive = end - 1 if upward else end + 1
        if source.relation in ("<=", ">=") and (inclusive in aliases or end.constant and not inclusive.constant):
            right = aliases.get(inclusive) or self._in_type_or_wider(inclusive, source.type, place.scope)
            if not self._turns(right, variable, inclusive, place.scope):
                return f"{source.iterator} {source.relation} {self._matching(right, variable).at(SUM)}"
        right = aliases.get(end) or self._in_type_or_wider(end, source.type, place.scope)
        sign = "<" if upward else ">"
        left = f"{source.iterator}--" if source.relation == "-->" else source.iterator
        matching = self._matching(right, variable)
        if upward and self._turns(right, variable, end, place.scope):
            # a bound below zero, where the original does not get here, must not turn into a large one
            asked = comparison(Affine(), "<", end, place.scope, aliases)
            matching = Expression(f"({asked.text} ? {matching.at(CHOICE + 1)} : 0)", variable.type)
        return f"{left} {sign} {matching.at(SUM)}"

    def _in_type_or_wider(self, form: Affine, type: CType, scope: Scope) -> Expression:
        return self.in_type(form, type, scope) if scope.fits(form, type) else express(form, scope)

    def _turns(self, side: Expression, variable: Expression, form: Affine, scope: Scope) -> bool:
        """True if a side of a comparison may be negative and would be converted to an unsigned type."""
        if self._matching(side, variable) is side or not side.type.signed:
            return False
        low = scope.range(form)[0]
        return low is None or low < 0

    def _matching(self, side: Expression, variable: Expression) -> Expression:
        """A side of a comparison with the variable, converted where signs would clash."""
        a, b = promoted(side.type), promoted(variable.type)
        if a.signed == b.signed or common(a, b).signed or side.text.isdigit():
            return side
        return converted(side, variable.type)

    def _sum(self, loop: Loop, place: Place) -> Opened:
        """A loop over a skewed sum, which has no variable in the user's text."""
        work = Locals(place)
        source = self.source(loop.of)
        name = self.name(loop.symbol, self._base(loop))
        kind = "max" if loop.step > 0 else "min"
        near = self._near(loop, work, LONG_LONG)
        type = self._wide_enough(loop, place.scope, source.type, near, 0)
        start = self._local(loop, near, kind, work, type, "first")
        upward = loop.step > 0
        far = self._forms(members(far_bound(loop), "min" if upward else "max"), loop, work, type)
        ends = tuple(half_open(form, upward, 0) for form in far)
        ends = needed(named(ends, work.place.limits, upward), "min" if upward else "max", work.place.scope)
        end = self._local(loop, ends, "min" if upward else "max", work, type, "end")
        variable = Expression(name, type)
        inside = self._entered(loop, work.place, variable)
        test = comparison(Affine.of(loop.symbol), "<" if upward else ">", end, inside.scope)
        step = self._step(name, loop)
        first = self.in_type(start, type, work.place.scope).text
        opened = Opened(tuple(work.lines), f"{name} = {first}; {test.text}; {step})", (), work.place, inside)
        return self._with_declaration(opened, source, f"{type.spelling} {name}")

    def _with_declaration(self, opened: Opened, source: LoopText, declared: str) -> Opened:
        """The loop with its own variable declared in the header, or ahead of it; the header starts at its name."""
        opening, (type, _, _) = self._layout.header(source).opening, declared.rpartition(" ")
        if self._apart:
            return replace(opened, header=opening + opened.header, declared=declared)
        return replace(opened, header=f"{opening}{type} {opened.header}")

    def _step(self, name: str, loop: Loop) -> str:
        if loop.length == Affine((), 1):
            return f"{name}{'++' if loop.step > 0 else '--'}"
        steps = abs(loop.step)
        length = str(steps) if loop.named is None else self._constants.length(loop.named, steps)
        return f"{name} {'+' if loop.step > 0 else '-'}= {length}"

    def _wide_enough(self, loop: Loop, scope: Scope, type: CType, starts: tuple[Affine, ...], shift: int) -> CType:
        """The user's type, or a wider one, for a variable that also holds the value after the last; raises NoRoom."""
        inside = scope.naming(loop.symbol, Expression("", type), loop.constraints(), interval=interval_of(loop, scope))
        value = Affine.of(loop.symbol) + shift
        for candidate in (*([type] if type.bits >= INT.bits else [type, INT]), LONG_LONG):
            if all(inside.fits(form, candidate) for form in (value, value + step_of(loop))) and \
                    all(scope.fits(form + shift, candidate) for form in starts):
                return candidate
        raise NoRoom(str(value + step_of(loop)))
