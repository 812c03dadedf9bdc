"""What the text around a nest says about its parameters: guards, outer loops, early returns.

Only what surely still holds when the nest runs is taken: every variable in such a condition keeps its value from
there to the end of the nest. Nothing here may rest on an assumption; what cannot be proven is left out.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pycparser import c_ast

from ..affine import Affine, AnyOf, Formula, at_least_bound, at_most_bound, bound_names, negate
from ..model import AssumptionCode, CType
from .bounds import Bounds
from .calls import is_pure_call
from .conditions import Conditions
from .context import Context
from .expressions import Expressions
from .headers import origin_of
from .knowledge import Knowledge, Obligation
from .loops import Loops
from .places import Place, Places
from .refusals import Refused
from .scopes import Binding, FunctionNames, assigned_target, descendants
from .setting import Setting
from .unit import Unit


_LOOPS = (c_ast.For, c_ast.While, c_ast.DoWhile)


def outer_loops(nest: Any, names: FunctionNames) -> dict[Binding, Any]:
    """The iterators of the ``for`` loops around a nest that only their headers change, innermost first."""
    found: dict[Binding, Any] = {}
    for node in names.ancestors(nest):
        if isinstance(node, c_ast.For) and (binding := _iterator(node, names)) is not None:
            found.setdefault(binding, node)
    return found


def _iterator(loop: Any, names: FunctionNames) -> Binding | None:
    init = loop.init
    target = init.decls[0] if isinstance(init, c_ast.DeclList) else getattr(init, "lvalue", None)
    return names.of(target) if target is not None else None


def facts_around(nest: Any, unit: Unit, names: FunctionNames, knowledge: Knowledge) -> None:
    """Add to what is known the conditions under which the nest is reached."""
    if names.has_jumps:
        return
    node = nest
    for parent in names.ancestors(nest):
        if isinstance(parent, (c_ast.Case, c_ast.Default)):
            return  # a switch may jump past what stands above
        if isinstance(parent, c_ast.If) and node is not parent.cond:
            _condition(parent.cond, parent, node is parent.iftrue, unit, names, knowledge)
        elif isinstance(parent, c_ast.For) and node is parent.stmt:
            _outer(parent, unit, names, knowledge)
        elif isinstance(parent, c_ast.Compound):
            for sibling in _before(parent, node):
                within = _left(sibling, names) if isinstance(sibling, c_ast.If) and sibling.iffalse is None else None
                if within is not None:
                    _condition(sibling.cond, within, False, unit, names, knowledge)
        node = parent


def _before(block: Any, node: Any) -> Iterator[Any]:
    for item in block.block_items or ():
        if item is node:
            return
        yield item


def _left(sibling: Any, names: FunctionNames) -> Any:
    """The piece in which the condition of an ``if`` that ends with a jump keeps what it said; None if it does not jump.

    The nest comes later in the same iteration of the innermost loop around the ``if``.
    """
    node = sibling.iftrue
    if isinstance(node, c_ast.Compound) and node.block_items:
        node = node.block_items[-1]
    around = next((one.stmt for one in names.ancestors(sibling) if isinstance(one, _LOOPS)), None)
    if isinstance(node, c_ast.Return):
        return names.function.body if around is None else around
    return around if isinstance(node, (c_ast.Continue, c_ast.Break)) else None


def _setting(within: Any, unit: Unit, names: FunctionNames, knowledge: Knowledge) -> Setting:
    setting = Setting(unit, names, within, knowledge, strict=True)
    setting.expressions, setting.places = Expressions(setting), Places(setting)
    return setting


def _condition(node: Any, within: Any, holds: bool, unit: Unit, names: FunctionNames, knowledge: Knowledge) -> None:
    """A condition that was tested before; ``within`` is the piece in which its variables may not change."""
    setting = _setting(within, unit, names, knowledge)
    for part in _conjuncts(node, holds):
        try:
            formula = Conditions(setting).known(part, Context())
        except Refused:
            continue
        if formula is not None:
            knowledge.add_fact(formula if holds else negate(formula))


def _conjuncts(node: Any, holds: bool) -> Iterator[Any]:
    """The parts of ``a && b`` where it holds, of ``a || b`` where it does not."""
    if isinstance(node, c_ast.BinaryOp) and node.op == ("&&" if holds else "||"):
        yield from _conjuncts(node.left, holds)
        yield from _conjuncts(node.right, holds)
    else:
        yield node


def _outer(loop: Any, unit: Unit, names: FunctionNames, knowledge: Knowledge) -> None:
    """The bounds of a loop around the nest."""
    binding = _iterator(loop, names)
    if binding is None:
        return
    setting = _setting(loop.stmt, unit, names, knowledge)
    type_ = setting.type_of_binding(binding)
    if not isinstance(type_, CType) or type_.floating or setting.assigned(binding) or setting.reachable(binding):
        return
    if not setting.is_visible(binding):
        return
    fact = _loop_fact(loop, binding, setting)
    if fact is not None:
        knowledge.add_choice(fact)


def facts_from_memory(nest: Any, nest_setting: Setting) -> None:
    """Add the bounds of loops around the nest that are read from memory, as far as they are parameters of the nest.

    A bound is read ahead of every iteration; nothing may store to memory from there to the nest.
    """
    names, node = nest_setting.names, nest
    between: list[Any] = []  # what may run from the header of the loop to the nest
    for parent in names.ancestors(nest):
        if isinstance(parent, c_ast.For) and node is parent.stmt and not names.has_jumps:
            if not all(_leaves_memory(one, nest_setting) for part in between for one in descendants(part)):
                return
            _bound_from_memory(parent, nest_setting)
        if isinstance(parent, c_ast.Compound):
            between += _before(parent, node)
        elif isinstance(parent, (c_ast.If, c_ast.Switch)):
            between.append(parent.cond)
        elif isinstance(parent, _LOOPS):
            between.append(parent)  # its earlier iterations, the nest in them
        node = parent


def _leaves_memory(node: Any, setting: Setting) -> bool:
    """True if a node stores nothing but to a local variable that no pointer leads to, and calls nothing unknown."""
    target = assigned_target(node)
    binding = setting.names.of(target) if isinstance(target, c_ast.ID) else None
    own = binding is not None and binding.automatic and not setting.names.address_taken(binding)
    return (target is None or own) and (not isinstance(node, c_ast.FuncCall) or is_pure_call(node, setting))


class _Memory(Setting):
    """A strict setting to which integers in memory are known that the nest has as parameters."""

    known: dict[str, Place]

    def frozen_load(self, node: Any, type_: CType, context: Context) -> str | None:
        place = self.places.attempt(node, context)
        if place is None or place.union is not None or not place.is_fixed(self.loop_ids):
            return None
        return next((text for text, one in self.known.items() if one.same_cell(place) and text in self.knowledge.parameters
                     and one.root.binding is place.root.binding), None)


def _bound_from_memory(loop: Any, nest_setting: Setting) -> None:
    names, knowledge = nest_setting.names, nest_setting.knowledge
    binding = _iterator(loop, names)
    if binding is None or binding.name not in knowledge.parameters or not nest_setting.is_visible(binding):
        return
    body = _setting(loop.stmt, nest_setting.unit, names, knowledge)
    if binding not in nest_setting.outer_iterators or names.address_taken(binding) or body.assigned(binding):
        return
    whole = _Memory(nest_setting.unit, names, loop, knowledge, strict=True)
    whole.known = nest_setting.held
    whole.expressions, whole.places = Expressions(whole), Places(whole)
    whole.loop_ids.add(binding.name)
    conditions, mark = Conditions(whole), whole.mark()
    try:
        header = Loops(whole, conditions, Bounds(whole, conditions)).header(loop, binding.name, Context())
    except Refused:
        whole.rewind(mark)
        return
    if bound_names(header.last) & set(whole.known) and not whole.held_variables:
        value = Affine.of(binding.name)
        knowledge.add_choice(at_most_bound(value, header.last) if header.step > 0 else at_least_bound(value, header.last))


class _Provisional(Setting):
    """A strict setting that notes what it cannot prove.

    Facts from inside the loop say nothing of the header, which is evaluated before, so none of them settles it.
    """

    def require(
        self, code: AssumptionCode, formula: Formula, context: Context, node: Any, storages: tuple[str, ...] = ()
    ) -> bool:
        self.obligations.setdefault(Obligation(code, formula, context.formula, context.loops, node, storages, known=0))
        return True


def _loop_fact(loop: Any, binding: Binding, setting: Setting) -> Formula | None:
    """Which values the iterator takes, or else: wherever nothing in the header wraps; None if it is not read."""
    for kind in (Setting, _Provisional):
        whole = kind(setting.unit, setting.names, loop, setting.knowledge, strict=True)
        whole.expressions, whole.places = Expressions(whole), Places(whole)
        whole.loop_ids.add(binding.name)
        conditions, mark = Conditions(whole), whole.mark()
        try:
            header = Loops(whole, conditions, Bounds(whole, conditions)).header(loop, binding.name, Context())
            values = header.constraint(binding.name, origin_of(header) if isinstance(header.first, Affine) else None)
        except Refused:
            whole.rewind(mark)
            continue
        failures = whole.failures_since(mark)
        return AnyOf((values, *failures)) if failures else values
    return None
