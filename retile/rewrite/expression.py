"""Affine forms as C expressions whose every intermediate value fits its type.

A form is first written with the operands as they are.  Where a partial sum might leave its type for some values that
the program can have at that place, the arithmetic is done in a wider type (``n - 1LL``); where no type is wide enough,
``NoRoom`` says so, and the caller asks for smaller sizes.  What values are possible is an exact question to the sets:
the largest and the smallest value of a form over the region in which it is evaluated.

Types follow the usual arithmetic conversions (ISO/IEC 9899:2018, 6.3.1.8).
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping

from ..affine import Affine, AllOf, Constraint, Floor, Formula, Symbol, at_most, equal, less
from ..model import CType
from ..sets import Region
from ..values import dataclass, replace

INT = CType("int", 32, True)
LONG = CType("long", 64, True)
LONG_LONG = CType("long long", 64, True)
UNSIGNED_LONG_LONG = CType("unsigned long long", 64, False)

# How strongly an expression holds together, weakest first.
CHOICE, OR, AND, EQUALITY, RELATION, SUM, PRODUCT, UNARY, ATOM = range(9)

_ATOM = re.compile(r"(?:\w+(?:(?:->|\.)\w+|\[\w+\])*|\([^()]*\))\Z")
_NAME = r"\w+(?:(?:->|\.)\w+)*"
_SIMPLE_SUM = re.compile(rf"{_NAME}(?:\s*[-+*]\s*{_NAME})*\Z")


class NoRoom(Exception):
    """No integer type of C is sure to hold a value that has to be computed."""


@dataclass(frozen=True)
class Expression:
    """C text with its type after promotion and its binding strength."""

    text: str
    type: CType
    level: int = ATOM

    def at(self, level: int) -> str:
        """The text as an operand that must bind at least this strongly."""
        return self.text if self.level >= level else f"({self.text})"


def written(text: str, type: CType) -> Expression:
    """An expression that the user wrote, of unknown structure."""
    if _ATOM.match(text) or _in_parentheses(text):
        return Expression(text, type)
    if text.startswith("&") and _ATOM.match(text[1:]):
        return Expression(text, type, UNARY)
    return Expression(text, type, SUM if _SIMPLE_SUM.match(text) else CHOICE)


def _in_parentheses(text: str) -> bool:
    """True if the first character is a parenthesis that the last one closes."""
    depth = 0
    for at, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0:
            return at == len(text) - 1 and text.startswith("(")
    return False


def promoted(type: CType) -> CType:
    """The type of an operand in arithmetic."""
    return INT if type.bits < INT.bits else type


def common(a: CType, b: CType) -> CType:
    """The type in which two operands are combined."""
    a, b = promoted(a), promoted(b)
    if a.bits != b.bits:
        return a if a.bits > b.bits else b
    return a if not a.signed else b


def same_values(a: CType, b: CType) -> bool:
    """True if two types hold the same values."""
    return (a.bits, a.signed) == (b.bits, b.signed)


def converted(expression: Expression, to: CType) -> Expression:
    """The value in another type; a cast only where the type changes other than by promotion."""
    if same_values(promoted(expression.type), promoted(to)) and to.bits >= INT.bits or \
            same_values(expression.type, to):
        return expression
    if expression.text.isdigit() or expression.text in ("-1",) and to.signed:
        return replace(expression, type=to)
    return Expression(f"({to.spelling}){expression.at(UNARY)}", to, UNARY)


Interval = tuple[int | None, int | None]


class Scope:
    """What is known at a place of the program: the values that names can have there, and how they are written."""

    def __init__(self, region: Region, operands: Mapping[str, Expression], meanings: Mapping[str, Affine] | None = None,
                 intervals: Mapping[str, Interval] | None = None) -> None:
        self.region = region
        self.operands = dict(operands)
        self.meanings = dict(meanings or {})
        # Per name a range that holds here, perhaps found further out where less is known.
        self._intervals: dict[str, Interval] = dict(intervals or {})
        self._ranges: dict[Affine, Interval] = {}
        self._empty: bool | None = None

    def knowing(self, *facts: Formula) -> Scope:
        """The same place with more facts."""
        return Scope(self.region & Region.where(*facts), self.operands, self.meanings, self._intervals)

    def naming(self, symbol: str, expression: Expression, *facts: Formula, interval: Interval = (None, None)) -> Scope:
        """The same place with one more symbol that has a C name; ``interval``: a range that its values have."""
        known = {symbol: interval} if None not in interval else {}
        return Scope(self.region & Region.where(*facts) if facts else self.region,
                     {**self.operands, symbol: expression}, self.meanings, {**self._intervals, **known})

    def meaning(self, symbol: str, form: Affine, *facts: Formula) -> Scope:
        """The same place with one more symbol that is a form of others."""
        known = equal(Affine.of(symbol), form)
        return Scope(self.region & Region.where(known, *facts), self.operands, {**self.meanings, symbol: form},
                     self._intervals)

    def written_otherwise(self, operands: Mapping[str, Expression]) -> Scope:
        """The same place with some names written in another way."""
        scope = Scope(self.region, {**self.operands, **operands}, self.meanings, self._intervals)
        scope._ranges = self._ranges
        return scope

    def sees(self, names: frozenset[str]) -> bool:
        """True if every one of the names can be written here."""
        return all(name in self.operands or name in self.meanings for name in names)

    def range(self, form: Affine) -> Interval:
        """The smallest and the largest value that the form can have; None where there is no limit."""
        if form.is_constant:
            return form.constant, form.constant
        if form not in self._ranges:
            if self._empty is None:
                self._empty = self.region.is_empty()
            self._ranges[form] = (0, 0) if self._empty else \
                (self.region.extreme(form, largest=False), self.region.extreme(form, largest=True))
        return self._ranges[form]

    def fits(self, form: Affine, type: CType) -> bool:
        """True if the form's value always lies in the type."""
        return _inside(self.rough_range(form), type) or _inside(self.range(form), type)

    def rough_range(self, form: Affine) -> Interval:
        """A range found term by term: cheap, and often enough."""
        low: int | None = form.constant
        high: int | None = form.constant
        for symbol, factor in form.terms:
            if not isinstance(symbol, str):
                return None, None
            if symbol not in self._intervals:
                self._intervals[symbol] = self.range(Affine.of(symbol))
            ends = self._intervals[symbol] if factor > 0 else self._intervals[symbol][::-1]
            low = None if low is None or ends[0] is None else low + factor * ends[0]
            high = None if high is None or ends[1] is None else high + factor * ends[1]
        return low, high

    def best_range(self, form: Affine) -> Interval:
        """The range term by term if it has both ends, else the exact one."""
        rough = self.rough_range(form)
        return self.range(form) if None in rough else rough

    def implies(self, fact: Formula) -> bool:
        """True if the fact holds here whatever the values."""
        return self.region.implies(fact)


def _inside(interval: Interval, type: CType) -> bool:
    low, high = interval
    return low is not None and high is not None and type.smallest <= low and high <= type.largest


@dataclass(frozen=True)
class _Piece:
    """A summand: its sign, what it is without it, and how that is written."""

    negative: bool
    form: Affine
    expression: Expression
    product: bool = False


def express(form: Affine, scope: Scope, wide: bool = True) -> Expression:
    """The form as C text; raises NoRoom if no type holds all that has to be computed.

    ``wide``: whether arithmetic may be done in a type that none of the operands has.
    """
    form = form.substitute(scope.meanings)
    for type in (None, LONG_LONG, UNSIGNED_LONG_LONG) if wide else (None,):
        found = _sum(form, scope, type)
        if found is not None:
            return found
    raise NoRoom(str(form))


def _sum(form: Affine, scope: Scope, wide: CType | None) -> Expression | None:
    pieces = list(_pieces(form, scope, wide))
    if not pieces or any(piece is None for piece in pieces):
        return None
    known = [piece for piece in pieces if piece is not None]
    if wide is not None:
        known = _widened(known, wide)
    return _added(known, scope)


def _pieces(form: Affine, scope: Scope, wide: CType | None) -> Iterator[_Piece | None]:
    form, rests = _remainders(form)
    summands: list[tuple[Symbol | tuple[Affine, int] | None, int]] = [*rests, *form.terms]
    if form.constant or not summands:
        summands.append((None, form.constant))
    # names in capitals, constants of the program, stand behind variables
    for symbol, factor in sorted(summands, key=lambda one: (one[1] < 0, isinstance(one[0], str) and one[0].isupper(),
                                                            one[0] is None)):
        size = abs(factor)
        if symbol is None:
            type = _literal_type(size)
            yield _Piece(factor < 0, Affine((), size), Expression(str(size) + ("" if type.signed else "U"), type))
        elif isinstance(symbol, str):
            yield _scaled(factor < 0, size, Affine.of(symbol), scope.operands[symbol], scope, wide)
        elif isinstance(symbol, tuple):
            rest = _remainder(*symbol, scope, wide)
            yield _scaled(factor < 0, size, symbol[0].mod(symbol[1]), rest, scope, wide) if rest else None
        else:
            yield _quotient(symbol, factor, scope, wide)


def _literal_type(value: int) -> CType:
    if value <= INT.largest:
        return INT
    return LONG if value <= LONG.largest else UNSIGNED_LONG_LONG


def _scaled(negative: bool, size: int, form: Affine, operand: Expression, scope: Scope, wide: CType | None) \
        -> _Piece | None:
    """A summand ``size * operand``."""
    if size == 1:
        return _Piece(negative, form, operand)
    literal = Expression(str(size), _literal_type(size))
    type = common(literal.type, operand.type)
    if not scope.fits(form * size, type) or not scope.fits(form, type):
        if wide is None or not scope.fits(form * size, wide):
            return None
        literal, type = _literal(size, wide), wide
        if not operand.type.signed and wide.signed and operand.type.bits == wide.bits:
            operand = converted(operand, wide)
    return _Piece(negative, form * size, Expression(f"{literal.text} * {operand.at(UNARY)}", type, PRODUCT), True)


def _literal(value: int, type: CType) -> Expression:
    suffix = {LONG_LONG: "LL", UNSIGNED_LONG_LONG: "ULL"}.get(type, "")
    return Expression(f"{value}{suffix}", type)


def _widened(pieces: list[_Piece], wide: CType) -> list[_Piece]:
    """The same sum, begun in the wide type: by a suffix of the constant where it has two summands, else by a cast."""
    changed = [replace(piece, expression=converted(piece.expression, wide))
               if not piece.expression.type.signed and wide.signed and piece.expression.type.bits == wide.bits else piece
               for piece in pieces]
    if len(pieces) == 2 and pieces[1].form.is_constant and promoted(pieces[0].expression.type).bits < wide.bits:
        changed[1] = replace(changed[1], expression=_literal(pieces[1].form.constant, wide))
    elif changed[0].form.is_constant:
        changed[0] = replace(changed[0], expression=_literal(changed[0].form.constant, wide))
    elif not same_values(changed[0].expression.type, wide):
        first = changed[0].expression
        changed[0] = replace(changed[0], expression=Expression(f"({wide.spelling}){first.at(UNARY)}", wide, UNARY))
    return changed


def _added(pieces: list[_Piece], scope: Scope) -> Expression | None:
    first = pieces[0]
    total = first.expression
    form = -first.form if first.negative else first.form
    if first.negative:
        total = Expression(f"-{total.at(UNARY)}", promoted(total.type), UNARY)
        if not scope.fits(form, total.type) or not total.type.signed:
            return None
    for piece in pieces[1:]:
        type = common(total.type, piece.expression.type)
        whole = form - piece.form if piece.negative else form + piece.form
        if not all(scope.fits(value, type) for value in (form, piece.form, whole)):
            return None
        sign = "-" if piece.negative else "+"
        total = Expression(f"{total.at(SUM)} {sign} {piece.expression.at(PRODUCT)}", type, SUM)
        form = whole
    return total


def _remainders(form: Affine) -> tuple[Affine, list[tuple[tuple[Affine, int], int]]]:
    """Take ``x - d * floor(x / d)`` out of a form, which C writes ``x % d``; what is left, and (x, d) with factors."""
    found: list[tuple[tuple[Affine, int], int]] = []
    for symbol, factor in form.terms:
        if isinstance(symbol, Floor) and factor % symbol.divisor == 0:
            times = -factor // symbol.divisor
            whole = symbol.numerator.mod(symbol.divisor) * times
            left = form - whole
            if len(left.terms) + len(symbol.numerator.terms) < len(form.terms):
                form = left
                found.append(((symbol.numerator, symbol.divisor), times))
    return form, found


def _remainder(numerator: Affine, divisor: int, scope: Scope, wide: CType | None) -> Expression | None:
    """``numerator mod divisor`` with the sign of the divisor, unlike C's ``%`` for negative values."""
    value = _sum(numerator, scope, wide)
    if value is None or not scope.fits(numerator, value.type):
        return None
    rest = Expression(f"{value.at(PRODUCT)} % {divisor}", common(value.type, INT), PRODUCT)
    if scope.implies(Constraint(numerator)):
        return rest
    if 2 * divisor > rest.type.largest:
        return None
    return Expression(f"({rest.text} + {divisor}) % {divisor}", rest.type, PRODUCT)


def _quotient(floor: Floor, factor: int, scope: Scope, wide: CType | None) -> _Piece | None:
    """``factor * floor(numerator / divisor)``: exact division of the numerator without its remainder."""
    numerator, divisor = floor.numerator, floor.divisor
    size, negative = abs(factor), factor < 0
    over = numerator.mod(divisor)
    low, high = scope.range(over)
    if low is not None and low == high and size % divisor == 0:
        exact = _sum((numerator - low) * (size // divisor), scope, wide)
        return _Piece(negative, Affine.of(floor) * size, exact) if exact else None
    value, rest = _sum(numerator, scope, wide), _remainder(numerator, divisor, scope, wide)
    if value is None or rest is None:
        return None
    positive = scope.implies(Constraint(numerator))
    aligned = Affine.of(floor) * divisor
    if not scope.fits(aligned, value.type):
        return None
    even = Expression(f"{value.at(SUM)} - {rest.at(PRODUCT)}", common(value.type, rest.type), SUM)
    if size == divisor:
        return _Piece(negative, aligned, even)
    if low is not None and low == high == 0:
        even = value
    quotient = Expression(f"{(value if positive else even).at(PRODUCT)} / {divisor}", even.type, PRODUCT)
    return _scaled(negative, size, Affine.of(floor), quotient, scope, wide)


FLIPPED = {"<": ">", "<=": ">=", ">": "<", ">=": "<=", "==": "=="}


def comparison(left: Affine, relation: str, right: Affine, scope: Scope,
               aliases: Mapping[Affine, Expression] | None = None) -> Expression:
    """``left relation right`` as a C condition that computes nothing that may leave its type; raises NoRoom.

    The constant of the left side may change sides, or the sides be subtracted (``n - k > 64`` for ``k + 64 < n``).
    ``aliases``: how the user writes some forms.
    """
    aliases = aliases or {}
    left, right = left.substitute(scope.meanings), right.substitute(scope.meanings)
    if left not in aliases and right not in aliases:
        shared = _shared(left, right)
        left, right = left - shared, right - shared
    rest = left - left.constant
    sides = [(left, relation, right)]
    if right.terms and (relation, right.constant) in (("<", 1), (">", -1)):
        sides.insert(0, (left, relation + "=", right - right.constant))
    form = left - right
    apart = tuple(Affine.build({s: abs(c) for s, c in form.terms if c * sign > 0}, max(form.constant * sign, 0))
                  for sign in (1, -1))
    if left not in aliases and right not in aliases:
        sides.append((apart[0], relation, apart[1]))
    sides.append((left - right.constant, relation, right - right.constant))
    if left.constant and rest.terms:
        sides.append((rest, relation, right - left.constant))
    distance = [(right - rest, FLIPPED[relation], Affine((), left.constant))] if left.constant and rest.terms else []
    splits = [(one, relation, other) for one, other in _splits(left - right)]
    for wide, arrangements in ((False, sides), (True, sides[:1]), (False, distance), (True, [*sides, *distance]),
                               (False, splits), (True, splits)):
        for a, sign, b in arrangements:
            found = _compared(a, sign, b, scope, aliases, wide)
            if found is not None:
                return found
    raise NoRoom(f"{left} {relation} {right}")


def _splits(form: Affine) -> Iterator[tuple[Affine, Affine]]:
    """All ways to write ``form rel 0`` with its terms on two sides, for forms of few terms."""
    for mask in range(1 << len(form.terms)) if len(form.terms) <= 4 else ():
        left = Affine.build({s: c for at, (s, c) in enumerate(form.terms) if mask >> at & 1})
        for one in (left, left + form.constant):
            yield one, one - form


def _shared(a: Affine, b: Affine) -> Affine:
    """The terms that stand on both sides with the same sign."""
    return Affine.build({s: min(c, b.coefficient(s), key=abs) for s, c in a.terms if c * b.coefficient(s) > 0})


def _compared(left: Affine, relation: str, right: Affine, scope: Scope, aliases: Mapping[Affine, Expression],
              wide: bool) -> Expression | None:
    try:
        a = aliases.get(left) or express(left, scope, wide)
        b = aliases.get(right) or express(right, scope, wide)
    except NoRoom:
        return None
    type = common(a.type, b.type)
    if not (scope.fits(left, type) and scope.fits(right, type)):
        if not wide or not (scope.fits(left, LONG_LONG) and scope.fits(right, LONG_LONG)):
            return None
        a, b = converted(a, LONG_LONG), converted(b, LONG_LONG)
    elif promoted(a.type).signed != promoted(b.type).signed and not type.signed:
        a, b = _unsigned_side(a, type), _unsigned_side(b, type)
    level = EQUALITY if relation == "==" else RELATION
    return Expression(f"{a.at(SUM)} {relation} {b.at(SUM)}", INT, level)


def _unsigned_side(side: Expression, type: CType) -> Expression:
    return side if side.text.isdigit() else converted(side, type)


def condition(formula: Formula, scope: Scope) -> Expression:
    """A formula over names that are in scope as a C condition; raises NoRoom."""
    if isinstance(formula, Constraint):
        return _single_condition(formula, scope)
    both = isinstance(formula, AllOf)
    word, level = ("&&", AND) if both else ("||", OR)
    parts: list[Expression] = []
    for part in formula.parts:
        if both and scope.implies(part):
            continue
        parts.append(condition(part, scope))
        scope = scope.knowing(part) if both else scope
    if not parts:
        return Expression("1" if both else "0", INT)
    if len(parts) == 1:
        return parts[0]
    # gcc asks for parentheses around && inside ||
    return Expression(f" {word} ".join(p.at(EQUALITY if p.level != level else level) for p in parts), INT, level)


def _single_condition(constraint: Constraint, scope: Scope) -> Expression:
    form = constraint.form.substitute(scope.meanings)
    positive = Affine.build({s: c for s, c in form.terms if c > 0})
    negative = Affine.build({s: -c for s, c in form.terms if c < 0})
    if form.constant == -1 and not constraint.equality:
        return comparison(negative, "<", positive, scope) if negative.terms else \
            comparison(positive, ">", Affine(), scope)
    left, right = (positive + max(form.constant, 0), negative + max(-form.constant, 0))
    if constraint.equality:
        return comparison(left, "==", right, scope)
    if not positive.terms:
        return comparison(negative, "<=", Affine((), form.constant), scope)
    if not negative.terms:
        return comparison(positive, ">=", Affine((), -form.constant), scope)
    try:
        return comparison(right, "<=", left, scope)
    except NoRoom:
        return _in_two_steps(negative, positive, form.constant, scope)


def _in_two_steps(small: Affine, large: Affine, by: int, scope: Scope) -> Expression:
    """``small <= large + by`` where no type holds the sum: first without ``by``, which leaves room for it; or NoRoom.

    ``n <= ld || n - 1 <= ld`` for ``n <= ld + 1``, and ``n < ld && n + 1 <= ld`` for ``n <= ld - 1``.
    """
    word, level = ("||", OR) if by > 0 else ("&&", AND)
    more = less(large, small) if by > 0 else less(small, large)
    try:
        clear = comparison(small, "<=" if by > 0 else "<", large, scope)
        rest = comparison(small - by, "<=", large, scope.knowing(more))
    except NoRoom:
        type = express(large, scope, wide=False).type
        edge = Affine((), type.largest - by if by > 0 else type.smallest - by)
        more = at_most(large, edge) if by > 0 else at_most(edge, large)
        clear = comparison(large, ">" if by > 0 else ">=", edge, scope)
        rest = comparison(small, "<=", large + by, scope.knowing(more))
    return Expression(f"{clear.at(RELATION)} {word} {rest.at(RELATION)}", INT, level)
