"""The headers of ``for`` loops: first value, last value, step.

A loop is read if its iterator is an integer variable that only the header changes, by a constant step, and if its
condition compares the iterator with bounds that stay the same while the loop runs. By induction over the iterations
the values are then first, first + step, ... up to the last one within the bounds, provided that no value tested on
the way, the one after the last included, leaves the iterator's type. For signed iterators C itself provides that
(overflow is undefined); a loop whose unsigned iterator wraps in steps of one would never end; for the rest it becomes
an obligation.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..affine import (
    Affine,
    AllOf,
    AnyOf,
    Bound,
    Extremum,
    Formula,
    at_least_bound,
    at_most,
    at_most_bound,
    bound_names,
    equal,
)
from ..model import AssumptionCode, CType
from ..values import dataclass
from .bounds import Bounds, flat, negated, scaled
from .conditions import Conditions
from .context import Context
from .endings import Endings
from .expressions import is_plain_choice
from .refusals import Refused, refused
from .scopes import Binding
from .setting import Setting, c_text

_MIRRORED = {"<": ">", "<=": ">=", ">": "<", ">=": "<=", "!=": "!="}


@dataclass(frozen=True)
class Header:
    """The header of a loop."""

    binding: Binding  # the iterator
    type: CType
    declared_in_for: bool
    first: Bound
    last: Bound  # upper bound for step > 0, lower for step < 0
    step: int
    relation: str  # as in ``LoopText``
    first_node: Any  # the expression of the first value as written
    bound_node: Any  # the other side of the comparison; None if the condition is more than one comparison with it
    before_first: bool  # ``i-- > 0``: the first value used is one below the one written

    def constraint(self, symbol: str, origin: Affine | None) -> Formula:
        """Which values the iterator takes."""
        value = Affine.of(symbol)
        lower, upper = (self.first, self.last) if self.step > 0 else (self.last, self.first)
        parts: list[Formula] = [at_least_bound(value, lower), at_most_bound(value, upper)]
        if abs(self.step) > 1 and origin is not None:
            parts.append(equal((value - origin).mod(abs(self.step)), 0))
        return AllOf(tuple(parts))


@dataclass(frozen=True)
class _Part:
    """One comparison of the condition, as a bound of the iterator."""

    relation: str
    bound: Bound  # inclusive
    node: Any  # the side without the iterator, if the other is the iterator alone


class Loops:
    """Reads loop headers in one setting."""

    def __init__(self, setting: Setting, conditions: Conditions, bounds: Bounds) -> None:
        self._setting = setting
        self._conditions = conditions
        self._bounds = bounds
        self._endings = Endings(setting)
        self._always_true = False  # the header being read has a condition that holds as long as nothing wraps
        self._at_first: Formula = AllOf()  # where the iterator of the header being read has its first value

    def header(self, loop: Any, symbol: str, context: Context) -> Header:
        """The header of a ``for``; Refused if it is not of the kind described above."""
        binding, first_node, declared = self._iterator(loop)
        type_ = self._iterator_type(binding, loop)
        self._setting.knowledge.iterator_types[symbol] = type_
        first = self._bounds.read(first_node, context, type_)
        if first is None:
            raise refused(
                loop.init or loop,
                "bound",
                f"the first value `{c_text(first_node)}` of `{binding.name}` is not "
                "linear in iterators and sizes, or may change inside the nest.",
            )
        first = self._one_form(first, first_node, type_, context)
        if loop.next is None:
            return self._countdown(loop, binding, type_, declared, first, first_node, symbol, context)
        step = self._step(loop.next, binding, context)
        if abs(step) > type_.largest:
            raise refused(loop, "step", f"the step of `{binding.name}` is larger than the iterator can hold.")
        self._always_true = False
        at = Affine.of(symbol)
        self._at_first = AllOf((at_least_bound(at, first), at_most_bound(at, first)))
        inside = context.inside(symbol, binding, self._from_first(symbol, first, step))
        parts = self._parts(loop.cond, binding, symbol, step, inside, loop)
        if not parts:
            return self._until_wrap(loop, binding, type_, declared, first, first_node, step)
        last, relation, bound_node = self._together(parts, step)
        if relation == "!=":
            self._endings.must_meet(first, last, step, type_, context, loop)
        header = Header(binding, type_, declared, first, last, step, relation, first_node, bound_node, False)
        self._endings.must_end(header, symbol, context, loop, self._always_true)
        return header

    def _until_wrap(
        self, loop: Any, binding: Binding, type_: CType, declared: bool, first: Bound, first_node: Any, step: int
    ) -> Header:
        """``for (i = n - 1; i < n; i--)`` with an unsigned i: down to zero, where the next value is too large."""
        wide = type_.bits >= self._setting.types.arithmetic.int.bits
        if step == -1 and not type_.signed and wide and isinstance(first, Affine) and loop.cond.op in ("<", ">"):
            return Header(binding, type_, declared, first, Affine(), step, "-->", first_node, None, True)
        raise refused(
            loop,
            "infinite-loop",
            "the loop's condition always holds within its bounds, so the loop ends only by "
            "wrapping around, if at all; compare against the end that it runs towards.",
        )

    def _from_first(self, symbol: str, first: Bound, step: int) -> Formula:
        value = Affine.of(symbol)
        return at_least_bound(value, first) if step > 0 else at_most_bound(value, first)

    # ------------------------------------------------------------ iterator and step

    def _iterator(self, loop: Any) -> tuple[Binding, Any, bool]:
        """The iterator, its first value, and whether the header declares it."""
        init = loop.init
        if isinstance(init, c_ast.DeclList) and len(init.decls) == 1 and init.decls[0].init is not None:
            binding = self._setting.names.of(init.decls[0])
            if binding is not None:
                return binding, init.decls[0].init, True
        if isinstance(init, c_ast.Assignment) and init.op == "=" and isinstance(init.lvalue, c_ast.ID):
            binding = self._setting.names.of(init.lvalue)
            if binding is not None:
                return binding, init.rvalue, False
        if init is None:
            raise refused(
                loop, "loop-form", "the loop's header gives no first value; write it there, as in `for (i = 0; ...)`."
            )
        raise refused(
            loop,
            "loop-form",
            "the loop's header starts with more or other than one assignment to an iterator; let one variable count, "
            "and compute what runs along with it in the body, as in `int j = n - 1 - i;`.",
        )

    def _iterator_type(self, binding: Binding, loop: Any) -> CType:
        type_ = self._setting.type_of_binding(binding)
        if not isinstance(type_, CType) or type_.floating or type_.spelling == "_Bool":
            what = "floating-point" if isinstance(type_, CType) else "no integer"
            raise refused(
                loop, "iterator-type", f"the iterator `{binding.name}` is {what}; retile reads loops over integers."
            )
        if not binding.automatic:
            raise refused(
                loop,
                "iterator-scope",
                f"the iterator `{binding.name}` is no local variable, so other functions "
                "may see it; declare it in the function.",
            )
        if self._setting.names.address_taken(binding):
            raise refused(
                loop,
                "iterator-address",
                f"the address of the iterator `{binding.name}` is taken, so a store "
                "may change it; use a variable of its own for the loop.",
            )
        quals = self._setting.qualifiers(binding)
        for word, code in (("volatile", "volatile"), ("_Atomic", "atomic")):
            if word in quals:
                raise refused(loop, code, f"the iterator `{binding.name}` is {word}; use a plain variable.")
        return type_

    def _one_form(self, first: Bound, node: Any, type_: CType, context: Context) -> Bound:
        """An extremum of parameters becomes a parameter of its own, from which chunks can be counted."""
        if isinstance(first, Affine) or bound_names(first) & self._setting.loop_ids or self._setting.strict:
            return first
        if not self._setting.means_the_same_ahead(node):
            return first
        symbol = Affine.of(self._setting.expression_parameter(node, type_))
        fact = AllOf((at_least_bound(symbol, first), at_most_bound(symbol, first)))
        own = self._setting.type_of(node)
        if is_plain_choice(node) and isinstance(own, CType) and own.fits(type_):
            self._setting.knowledge.add_choice(fact)  # defined and true whether or not this place is reached
        else:
            self._setting.add_fact(fact, context, node)
        return symbol

    def _step(self, node: Any, binding: Binding, context: Context) -> int:
        step = self._step_value(node, binding, context)
        if step:
            return step
        raise refused(
            node,
            "step",
            f"the step `{c_text(node)}` is not the addition of a constant to `{binding.name}`; "
            "retile reads steps such as `++`, `--`, `+= 2`.",
        )

    def _step_value(self, node: Any, binding: Binding, context: Context) -> int | None:
        if isinstance(node, c_ast.ExprList) and len(node.exprs) == 1:
            node = node.exprs[0]
        match node:
            case c_ast.UnaryOp(op="++") | c_ast.UnaryOp(op="p++"):
                return 1 if self._is(node.expr, binding) else None
            case c_ast.UnaryOp(op="--") | c_ast.UnaryOp(op="p--"):
                return -1 if self._is(node.expr, binding) else None
            case c_ast.Assignment() if self._is(node.lvalue, binding):
                return self._assigned_step(node, binding, context)
        return None

    def _assigned_step(self, node: Any, binding: Binding, context: Context) -> int | None:
        value, sign = node.rvalue, 1
        if node.op == "=":
            if not isinstance(value, c_ast.BinaryOp) or value.op not in "+-":
                return None
            if self._is(value.left, binding):
                value, sign = value.right, -1 if value.op == "-" else 1
            elif self._is(value.right, binding) and value.op == "+":
                value = value.left
            else:
                return None
        elif node.op in ("+=", "-="):
            sign = -1 if node.op == "-=" else 1
        else:
            return None
        amount = self._setting.expressions.value(value, context)
        constant = None if amount is None else amount.poly.constant
        return None if constant is None else sign * constant

    def _is(self, node: Any, binding: Binding) -> bool:
        return isinstance(node, c_ast.ID) and self._setting.names.of(node) is binding

    # ------------------------------------------------------------ the condition

    def _parts(self, node: Any, binding: Binding, symbol: str, step: int, context: Context, loop: Any) -> list[_Part]:
        if node is None:
            raise refused(loop, "infinite-loop", "the loop has no condition and ends only by a jump; give it a bound.")
        if isinstance(node, c_ast.BinaryOp) and node.op == "&&":
            left = self._parts(node.left, binding, symbol, step, context, loop)
            known = AllOf(tuple(self._as_formula(part, symbol, step) for part in left))
            return left + self._parts(node.right, binding, symbol, step, context.where(known), loop)
        part = self._part(node, binding, symbol, step, context, loop)
        return [part] if part is not None else []

    def _as_formula(self, part: _Part, symbol: str, step: int) -> Formula:
        value = Affine.of(symbol)
        return at_most_bound(value, part.bound) if step > 0 else at_least_bound(value, part.bound)

    def _part(self, node: Any, binding: Binding, symbol: str, step: int, context: Context, loop: Any) -> _Part | None:
        """One comparison as an inclusive bound in the direction of the step; None if it always holds."""
        if not isinstance(node, c_ast.BinaryOp) or node.op not in _MIRRORED:
            raise self._condition_refused(node, loop, binding)
        relation, mine, other = node.op, node.left, node.right
        if not self._mentions(mine, binding, context):
            relation, mine, other = _MIRRORED[relation], other, mine
        if not self._mentions(mine, binding, context):
            self._unrelated(node, binding, context)
            return None
        left_type, right_type = self._setting.type_of(mine), self._setting.type_of(other)
        if not all(isinstance(t, CType) and not t.floating for t in (left_type, right_type)):
            raise self._condition_refused(node, loop, binding)
        common = self._setting.types.common(left_type, right_type)
        bound = self._bounds.read(other, context, common)
        if relation == "!=" and bound is not None:
            bound = self._one_form(bound, other, common, context)
        tested = None if bound is None else self._tested(mine, symbol, step, relation, bound, context, common)
        if tested is not None and isinstance(bound, Affine) and symbol in bound.names():
            tested, bound = tested - bound, Affine()
        if bound is None or tested is None:
            raise self._condition_refused(node, loop, binding)
        found = self._solved(relation, tested, bound, symbol, step)
        if found is None:
            self._wrong_way(relation, tested, bound, node, context, binding)
            return None
        return _Part(relation, found, other if self._is(mine, binding) else None)

    def _mentions(self, node: Any, binding: Binding, context: Context) -> bool:
        from .scopes import descendants

        return any(self._is(one, binding) for one in descendants(node))

    def _tested(
        self, node: Any, symbol: str, step: int, relation: str, bound: Bound, context: Context, common: CType
    ) -> Affine | None:
        """The side with the iterator, for all values that are tested: up to one step beyond the bound."""
        value = self._setting.expressions.value(node, context)
        form = None if value is None else self._setting.affine(value.poly)
        if form is None:
            return None
        solved = self._solved(relation, form, bound, symbol, step)
        if solved is not None:
            at = Affine.of(symbol)
            reached = at_most_bound(at - step, solved) if step > 0 else at_least_bound(at - step, solved)
            context = context.where(AnyOf((reached, self._at_first)))
        return self._setting.expressions.affine(node, context, common)

    def _solved(self, relation: str, form: Affine, bound: Bound, symbol: str, step: int) -> Bound | None:
        """The bound of the iterator alone, inclusive; None if the comparison bounds it against the step."""
        factor = form.coefficient(symbol)
        rest = form - Affine.of(symbol) * factor
        if factor == 0 or symbol in rest.names() or symbol in bound_names(bound):
            return None
        other = _minus(bound, rest)
        if factor < 0:
            factor, other, relation = -factor, negated(other), _MIRRORED[relation]
        if relation == "!=":
            return _minus(other, Affine.of(1 if step > 0 else -1)) if factor == 1 else None
        if (relation in ("<", "<=")) != (step > 0):
            return None
        if step > 0:
            return scaled(_minus(other, Affine.of(1 if relation == "<" else 0)), factor, 0)
        return scaled(_minus(other, Affine.of(-1 if relation == ">" else 0)), factor, factor - 1)

    def _wrong_way(
        self, relation: str, tested: Affine, bound: Bound, node: Any, context: Context, binding: Binding
    ) -> None:
        """A comparison against the direction of the step: harmless if it always holds, else the loop is not read."""
        holds = at_most_bound(tested, bound) if relation in ("<", "<=") else at_least_bound(tested, bound)
        if relation in ("<", ">") and isinstance(bound, Affine):
            holds = at_most_bound(tested, bound - 1) if relation == "<" else at_least_bound(tested, bound + 1)
        elif relation not in ("<=", ">="):
            holds = AnyOf()
        if self._setting.knowledge.proves(context.formula, holds):
            self._always_true = True
            return
        raise refused(
            node,
            "loop-direction",
            f"`{c_text(node)}` bounds `{binding.name}` against the direction of its "
            "step; the loop may run for ever or wrap around.",
        )

    def _unrelated(self, node: Any, binding: Binding, context: Context) -> None:
        condition = self._conditions.known(node, context)
        if condition is not None and self._setting.knowledge.proves(context.formula, condition):
            return
        raise refused(
            node,
            "loop-condition",
            f"the loop's condition `{c_text(node)}` does not compare `{binding.name}` "
            "with a bound; put it into an `if` around the loop.",
        )

    def _condition_refused(self, node: Any, loop: Any, binding: Binding) -> Refused:
        from .scopes import assigned_target, descendants

        if any(assigned_target(one) is not None for one in descendants(node)):
            return refused(
                node,
                "loop-condition",
                f"the loop's condition `{c_text(node)}` changes something; "
                "only the last part of the header may do that.",
            )
        changed = self._changed_in(node)
        if changed:
            return refused(
                node,
                "bound-changed",
                f"the bound `{c_text(node)}` uses `{changed}`, which the nest changes; "
                "copy it to a variable of its own before the nest.",
            )
        return refused(
            node,
            "bound",
            f"the loop's condition `{c_text(node)}` does not compare `{binding.name}` with a "
            "bound that is linear in iterators and sizes and stays while the loop runs.",
        )

    def _changed_in(self, node: Any) -> str:
        from .scopes import descendants

        for one in descendants(node):
            binding = self._setting.names.of(one) if isinstance(one, c_ast.ID) else None
            if (
                binding is not None
                and binding.is_object
                and self._setting.assigned(binding)
                and binding not in self._setting.definitions
                and not self._setting.is_iterator(binding)
            ):
                return binding.name
        return ""

    def _together(self, parts: list[_Part], step: int) -> tuple[Bound, str, Any]:
        last = flat("min" if step > 0 else "max", *(part.bound for part in parts))
        if len(parts) == 1 and parts[0].node is not None:
            return last, parts[0].relation, parts[0].node
        if any(part.relation == "!=" for part in parts) and len(parts) > 1:
            raise refused(parts[0].node, "loop-condition", "`!=` beside other bounds is not read; use `<` or `>`.")
        return last, "!=" if parts[0].relation == "!=" else "<=" if step > 0 else ">=", None

    # ------------------------------------------------------------ ends

    # ------------------------------------------------------------ for (i = n; i-- > 0; )

    def _countdown(
        self,
        loop: Any,
        binding: Binding,
        type_: CType,
        declared: bool,
        first: Bound,
        first_node: Any,
        symbol: str,
        context: Context,
    ) -> Header:
        """``i-- > b`` and ``--i >= b`` with an empty third part: the values are first - 1 down to b."""
        low = self._countdown_bound(loop, binding)
        if low is None:
            raise refused(
                loop, "step", f"the loop's header does not step `{binding.name}`; write the step as its last part."
            )
        node, strict = low
        common = type_ if node is None else self._setting.types.common(type_, self._setting.type_of(node))
        bound: Bound | None = Affine() if node is None else self._bounds.read(node, context, common)
        if bound is None or not isinstance(first, Affine):
            raise self._condition_refused(loop.cond, loop, binding)
        if node is None:  # from below zero it would run into the overflow of its iterator
            self._endings.fact(at_most(0, first), context, loop)
        header = Header(binding, type_, declared, first - 1, bound, -1, "-->", first_node, node, True)
        self._countdown_ends(header, first, bound, strict, common, context, loop)
        return header

    def _countdown_bound(self, loop: Any, binding: Binding) -> tuple[Any, bool] | None:
        """The bound's node (None for zero) and whether the old value is tested."""
        cond = loop.cond
        if isinstance(cond, c_ast.UnaryOp) and cond.op == "p--" and self._is(cond.expr, binding):
            return None, True
        if not isinstance(cond, c_ast.BinaryOp) or not isinstance(cond.left, c_ast.UnaryOp):
            return None
        if not self._is(cond.left.expr, binding) or self._mentions(cond.right, binding, Context()):
            return None
        if cond.left.op == "p--" and cond.op == ">":
            return cond.right, True
        if (
            cond.left.op == "p--"
            and cond.op == "!="
            and isinstance(cond.right, c_ast.Constant)
            and cond.right.value == "0"
        ):
            return None, True
        return (cond.right, False) if cond.left.op == "--" and cond.op == ">=" else None

    def _countdown_ends(
        self, header: Header, first: Affine, bound: Bound, strict: bool, common: CType, context: Context, loop: Any
    ) -> None:
        """The tested value must keep its sign when it is converted, and ``--i`` must not wrap below zero."""
        lowest = min_with(bound, first)
        if not header.type.signed or not common.signed:
            tested = lowest if strict else _minus(lowest, Affine.of(1))
            holds = at_most_bound(Affine.of(0), tested)
            if not self._setting.require(AssumptionCode.NO_WRAP, holds, context, loop):
                raise refused(loop, "bound", "the loop may count down past zero.")


def _minus(bound: Bound, form: Affine) -> Bound:
    if isinstance(bound, Affine):
        return bound - form
    return Extremum(bound.kind, tuple(_minus(part, form) for part in bound.bounds))


def min_with(bound: Bound, form: Affine) -> Bound:
    """The smaller of the two."""
    return flat("min", bound, form)
