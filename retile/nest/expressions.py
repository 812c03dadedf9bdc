"""From C expressions to polynomials over iterators and parameters.

An integer expression of C is evaluated in a type, and unsigned arithmetic wraps. Sums and products commute with the
wrapping, so a value is kept as a polynomial together with the promise it keeps: either it equals the polynomial
(``exact``), or only modulo 2^bits of its type. Where the value is looked at (compared, divided, widened) the inexact
one becomes an obligation to lie in the type's range, which is proven on the domain or becomes an assumption. Signed
overflow is undefined in C, so signed sums and products are exact wherever the nest is defined (ISO/IEC 9899:2018, 6.5
p5).

What is neither, but cannot change while the nest runs, is a parameter whose text is the expression.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..affine import Affine, AllOf, AnyOf, Constraint, Formula, at_most, equal, less, negate
from ..model import AssumptionCode, CType
from ..values import dataclass
from .conditions import Conditions
from .context import Context
from .polynomial import Poly
from .setting import Setting, c_text

_WRAPPING = {"+", "-", "*"}


@dataclass(frozen=True)
class Value:
    """An integer: equal to ``poly``, or, unless ``exact``, to it modulo 2^bits of its (unsigned) type."""

    poly: Poly
    type: CType
    exact: bool


class Expressions:
    """Reads integer expressions in one setting."""

    def __init__(self, setting: Setting) -> None:
        self._setting = setting
        self._arithmetic = setting.types.arithmetic

    # ------------------------------------------------------------ what others ask

    def value(self, node: Any, context: Context) -> Value | None:
        """The value of an integer expression; None if it is no polynomial and may change."""
        mark = self._setting.mark()
        found = self._value(node, context)
        if found is None:
            self._setting.rewind(mark)
            found = self._opaque(node, context)
        if found is None:
            self._setting.rewind(mark)
        return found

    def exact(self, node: Any, context: Context, type_: CType | None = None) -> Poly | None:
        """The value itself, after conversion to ``type_``; what it needs becomes an obligation."""
        value = self.value(node, context)
        if value is not None and type_ is not None:
            value = self.convert(value, type_, context, node)
        return None if value is None else self.observe(value, context, node)

    def affine(self, node: Any, context: Context, type_: CType | None = None) -> Affine | None:
        """As ``exact``, as an affine form; products of parameters become parameters of their own."""
        mark = self._setting.mark()
        poly = self.exact(node, context, type_)
        form = None if poly is None else self._setting.affine(poly)
        if form is None:
            self._setting.rewind(mark)
        return form

    def subscript(self, node: Any, context: Context) -> Poly | None:
        """The value as an offset of a pointer: a 64-bit wrap is harmless there, addresses wrap with it."""
        value = self.value(node, context)
        if value is None:
            return None
        if not value.exact and value.type.bits >= self._setting.types.arithmetic.pointer_bytes * 8:
            return value.poly
        return self._widened(value, context, node)

    def _widened(self, value: Value, context: Context, node: Any) -> Poly | None:
        """The value where it becomes wider or an offset; a product may not have wrapped in its own type."""
        if not value.exact and self._setting.affine(value.poly) is None:
            return self._setting.narrow_product(value.poly, value.type, context, node)
        return self.observe(value, context, node)

    def observe(self, value: Value, context: Context, node: Any) -> Poly | None:
        """The polynomial that the value equals; None if the wrapping cannot be excluded."""
        if value.exact or value.poly.constant is not None:
            return value.poly
        return self._in_range(value.poly, value.type, context, node)

    def _in_range(self, poly: Poly, type_: CType, context: Context, node: Any) -> Poly | None:
        form = self._setting.affine(poly)
        if form is None:
            return None
        for part in (at_most(type_.smallest, form), at_most(form, type_.largest)):
            if not self._setting.require(AssumptionCode.NO_WRAP, part, context, node):
                return None
        return poly

    def convert(self, value: Value, to: CType, context: Context, node: Any) -> Value | None:
        """The value after a conversion (6.3.1.3); None if what it becomes is no polynomial."""
        if to.floating or to.spelling == "_Bool":
            return None
        constant = value.poly.constant
        if constant is not None:
            return Value(Poly.of(wrapped(constant, to)), to, True)
        fits = value.type.fits(to)
        if fits or (not to.signed and not value.exact and to.bits <= value.type.bits):
            if fits and to.bits > value.type.bits and not value.exact:
                seen = self._widened(value, context, node)
                return None if seen is None else Value(seen, to, True)
            return Value(value.poly, to, value.exact if fits else False)
        if not to.signed and (value.exact or to.bits == value.type.bits):
            return Value(value.poly, to, False)
        seen = self._in_range(value.poly, to, context, node)
        return None if seen is None else Value(seen, to, True)

    # ------------------------------------------------------------ the cases

    def _value(self, node: Any, context: Context) -> Value | None:
        match node:
            case c_ast.Constant():
                return self._constant(node)
            case c_ast.ID():
                return self._name(node, context)
            case c_ast.BinaryOp():
                return self._binary(node, context)
            case c_ast.UnaryOp():
                return self._unary(node, context)
            case c_ast.Cast():
                to = self._setting.written_type(node.to_type)
                value = self.value(node.expr, context)
                return self.convert(value, to, context, node) if value is not None and isinstance(to, CType) else None
            case c_ast.ArrayRef() | c_ast.StructRef():
                return self._load(node, context)
        return None

    def _constant(self, node: Any) -> Value | None:
        value = self._setting.constant(node)
        type_ = self._setting.type_of(node)
        if value is None or not isinstance(type_, CType) or type_.floating:
            return None
        return Value(Poly.of(value), type_, True)

    def _name(self, node: Any, context: Context) -> Value | None:
        setting = self._setting
        binding = setting.names.of(node)
        if binding is None:
            return None
        type_ = setting.type_of(node)
        if not isinstance(type_, CType) or type_.floating or type_.spelling == "_Bool":
            return None
        if binding.kind == "enumerator":
            constant = setting.constant(node)
            return None if constant is None else Value(Poly.of(constant), type_, True)
        iterator = context.iterator(binding)
        if iterator is not None:
            return Value(Poly.of(iterator), type_, True)
        definition = setting.definition(binding, context)
        if definition is not None:
            with setting.at(definition):
                value = self.value(definition.expression, definition.context)
            return None if value is None else self.convert(value, type_, definition.context, node)
        constant = setting.constant_of(binding)
        if constant is not None:
            return Value(Poly.of(wrapped(constant, type_)), type_, True)
        if setting.is_frozen(binding) and not (setting.strict and setting.reachable(binding)):
            return Value(Poly.of(setting.parameter_of(binding, type_)), type_, True)
        return None

    def _load(self, node: Any, context: Context) -> Value | None:
        type_ = self._setting.type_of(node)
        if not isinstance(type_, CType) or type_.floating or type_.spelling == "_Bool":
            return None
        symbol = self._setting.frozen_load(node, type_, context)
        return None if symbol is None else Value(Poly.of(symbol), type_, True)

    def _unary(self, node: Any, context: Context) -> Value | None:
        if node.op == "sizeof":
            size = self._setting.constant(node)
            return None if size is None else Value(Poly.of(size), self._arithmetic.size_type, True)
        if node.op == "*":
            return self._load(node, context)
        if node.op not in ("+", "-", "~"):
            return None
        value = self.value(node.expr, context)
        value = None if value is None else self._to(value, self._arithmetic.promoted(value.type), context, node)
        if value is None or node.op == "+":
            return value
        poly = -value.poly - (1 if node.op == "~" else 0)
        return self._result(poly, value.type, exact=value.type.signed)

    def _to(self, value: Value, type_: CType, context: Context, node: Any) -> Value | None:
        return value if value.type == type_ else self.convert(value, type_, context, node)

    def _result(self, poly: Poly, type_: CType, exact: bool) -> Value:
        if poly.constant is not None and not type_.signed:
            return Value(Poly.of(wrapped(poly.constant, type_)), type_, True)
        return Value(poly, type_, exact)

    def _binary(self, node: Any, context: Context) -> Value | None:
        left = self.value(node.left, context) if node.op in "+-*/%<<>>&" else None
        right = self.value(node.right, context) if left is not None else None
        if left is None or right is None:
            return None
        if node.op in ("<<", ">>"):
            return self._shift(node, left, right, context)
        type_ = self._arithmetic.common(left.type, right.type)
        a, b = self._to(left, type_, context, node), self._to(right, type_, context, node)
        if a is None or b is None:
            return None
        if node.op in _WRAPPING:
            poly = (
                a.poly + b.poly
                if node.op == "+"
                else a.poly - b.poly
                if node.op == "-"
                else self._setting.product(a.poly, b.poly)
            )
            return self._result(poly, type_, exact=type_.signed)
        return self._division(node, a, b, type_, context)

    def _shift(self, node: Any, left: Value, right: Value, context: Context) -> Value | None:
        count = right.poly.constant
        type_ = self._arithmetic.promoted(left.type)
        value = self._to(left, type_, context, node)
        if value is None or count is None or not 0 <= count < type_.bits:
            return None
        if node.op == "<<":
            return self._result(value.poly * (1 << count), type_, exact=type_.signed)
        # To the right of a negative value is the implementation's choice; the compilers at hand shift in the sign.
        return self._floor(value, 1 << count, type_, context, node)

    def _floor(self, value: Value, divisor: int, type_: CType, context: Context, node: Any) -> Value | None:
        seen = self.observe(value, context, node)
        form = None if seen is None else self._setting.affine(seen)
        return None if form is None else Value(Poly.of(form.floor_div(divisor)), type_, True)

    def _division(self, node: Any, a: Value, b: Value, type_: CType, context: Context) -> Value | None:
        divisor = b.poly.constant
        if divisor is None or divisor <= 0:
            return None
        if node.op == "&":
            mask = divisor + 1
            if mask & divisor:  # not 2^k - 1
                return None
            return self._remainder(a, mask, type_)
        if node.op not in "/%":
            return None
        seen = self.observe(a, context, node)
        form = None if seen is None else self._setting.affine(seen)
        if form is None or not self._not_negative(form, context):
            return None  # C truncates towards zero; for parameters ``_opaque`` takes over
        result = form.floor_div(divisor) if node.op == "/" else form.mod(divisor)
        return Value(Poly.of(result), type_, True)

    def _remainder(self, value: Value, modulus: int, type_: CType) -> Value | None:
        """``value & (2^k - 1)``: the remainder in two's complement, whatever the sign, and whatever wrapped."""
        form = self._setting.affine(value.poly)
        return None if form is None else Value(Poly.of(form.mod(modulus)), type_, True)

    def _not_negative(self, form: Affine, context: Context) -> bool:
        return self._setting.knowledge.proves(context.formula, Constraint(form))

    # ------------------------------------------------------------ what does not change

    def _opaque(self, node: Any, context: Context) -> Value | None:
        """A parameter for an expression that is no polynomial but keeps its value while the nest runs."""
        type_ = self._setting.type_of(node)
        if not isinstance(type_, CType) or type_.floating or type_.spelling == "_Bool":
            return None
        if not self._setting.frozen_expression(node, context):
            return None
        symbol = self._setting.expression_parameter(node, type_)
        for fact in self._division_facts(node, symbol, context):
            self._setting.add_fact(fact, context, node)
        if isinstance(node, c_ast.TernaryOp):
            plain = is_plain_choice(node)  # defined whether or not this place is reached: a fact without conditions
            for fact in self._choice_facts(node, symbol, type_, Context() if plain else context):
                if plain:
                    self._setting.knowledge.add_choice(fact)
                else:
                    self._setting.add_fact(fact, context, node)
        return Value(Poly.of(symbol), type_, True)

    def _choice_facts(self, node: Any, symbol: str, type_: CType, context: Context) -> list[Formula]:
        """Which of two values ``c ? x : y`` is, wherever nothing in the three wraps."""
        mark = self._setting.mark()
        condition = Conditions(self._setting).known(node.cond, context)
        facts: list[Formula] = []
        if condition is not None:
            for holds, branch in ((condition, node.iftrue), (negate(condition), node.iffalse)):
                value = self.affine(branch, context.where(holds), type_)
                if value is not None:
                    facts.append(AllOf((holds, equal(Affine.of(symbol), value))))
        if len(facts) < 2 or self._setting.mark()[1:4] != mark[1:4]:  # unknown, or more memory must keep its values
            self._setting.rewind(mark)
            return []
        return [AnyOf((*facts, *self._setting.failures_since(mark)))]

    def _division_facts(self, node: Any, symbol: str, context: Context) -> list[Formula]:
        """What ``n / 2`` and ``n % 2`` are where the sign of ``n`` is not known: truncation towards zero (6.5.5 p6)."""
        if not isinstance(node, c_ast.BinaryOp) or node.op not in ("/", "%"):
            return []
        form, right = self.affine(node.left, context), self.value(node.right, context)
        divisor = None if right is None else right.poly.constant
        if form is None or divisor is None or divisor <= 0:
            return []
        result = Affine.of(symbol)
        if node.op == "%":
            up = AllOf((at_most(0, result), less(result, divisor), Constraint((form - result).mod(divisor), True)))
            down = AllOf((less(-divisor, result), at_most(result, 0), Constraint((form - result).mod(divisor), True)))
        else:
            rest = form - result * divisor
            up = AllOf((at_most(0, rest), less(rest, divisor)))
            down = AllOf((less(-divisor, rest), at_most(rest, 0)))
        return [AnyOf((AllOf((at_most(0, form), up)), AllOf((less(form, 0), down))))]


def wrapped(value: int, type_: CType) -> int:
    """An integer converted to a type; to a signed one as gcc and clang do, modulo 2^bits."""
    value %= 1 << type_.bits
    return value - (1 << type_.bits) if type_.signed and value > type_.largest else value


def is_plain_choice(node: Any) -> bool:
    """True for ``a < b ? c : d`` of four names or constants."""
    if not isinstance(node, c_ast.TernaryOp):
        return False
    sides = (node.cond.left, node.cond.right) if isinstance(node.cond, c_ast.BinaryOp) else (node.cond,)
    return all(isinstance(one, (c_ast.ID, c_ast.Constant)) for one in (*sides, node.iftrue, node.iffalse))
