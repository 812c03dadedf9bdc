"""One nest, from the syntax tree to the value that the other rooms work with."""

from __future__ import annotations

from typing import Any

from ..affine import AnyOf, Formula
from ..model import Access, Address, Assumption, AssumptionCode, LoopText, Nest, Refusal, Statement
from ..source import Source
from ..touched import with_known_ranges
from .evaluated import with_readable
from .expressions import Expressions
from .headers import loop_text
from .knowledge import Knowledge, Obligation
from .limits import too_deep, too_many
from .liveness import live_after
from .overlaps import overlap_assumptions
from .places import Places
from .products import product_obligations
from .readable import formula_text
from .refusals import refusal
from .scopes import FunctionNames
from .setting import Setting
from .storages import Stored, store
from .surroundings import facts_around, facts_from_memory, outer_loops
from .unit import Unit
from .walk import Walk


class NestReader:
    """Reads one ``for`` of a function."""

    def __init__(self, unit: Unit, function: Any, nest: Any, address: Address) -> None:
        self._unit, self._function, self._nest, self._address = unit, function, nest, address
        self._source: Source = unit.source
        self._names: FunctionNames = unit.names(function)
        self.refusals: tuple[Refusal, ...] = ()
        self.loop_names: tuple[str, ...] = ()

    def read(self) -> Nest | None:
        """The nest; None if it is refused, with the reasons in ``refusals``."""
        if deep := too_deep(self._nest, self._names):
            self._refuse([deep])
            return None
        knowledge = Knowledge(self._nest)
        setting = Setting(self._unit, self._names, self._nest, knowledge, strict=False)
        setting.expressions, setting.places = Expressions(setting), Places(setting)
        setting.outer_iterators = outer_loops(self._nest, self._names)
        facts_around(self._nest, self._unit, self._names, knowledge)
        walk = Walk(setting, self._nest)
        self.loop_names = tuple(walk.ids.values())
        refusals = [*walk.refusals, *self._directives()]
        if not walk.tree:
            self._refuse(refusals)
            return None
        facts_from_memory(self._nest, setting)
        stored = store(setting, walk, self._nest)
        if many := too_many(self._nest, stored.accesses.values()):
            self._refuse([*refusals, many])
            return None
        overlap_assumptions(setting, stored, self._stores(walk, stored))
        products, hopeless = product_obligations(setting)
        refusals += [
            refusal(
                node,
                "wrap",
                "this product of unsigned numbers may wrap around, and no bound for it is seen; "
                "compute it in size_t or in a signed type.",
            )
            for node in hopeless
        ]
        assumptions, unprovable = self._settle(setting, [*setting.obligations, *stored.obligations, *products])
        refusals += stored.refusals + unprovable
        if refusals:
            self._refuse(refusals)
            return None
        return self._nest_of(setting, walk, stored, (*assumptions, *stored.assumptions))

    def _refuse(self, refusals: list[Refusal]) -> None:
        unique = dict.fromkeys(refusals)
        self.refusals = tuple(sorted(unique, key=lambda one: (one.line, one.column)))

    @staticmethod
    def _stores(walk: Walk, stored: Stored) -> dict[str, Any]:
        return {
            access.storage: walk.statements[number].touches[place].node
            for (number, place), access in stored.accesses.items()
            if access.write
        }

    def _directives(self) -> list[Refusal]:
        span = self._source.span(self._nest)
        if span is None:
            return []
        found = [
            Refusal(
                token.line,
                token.column,
                "directive",
                "a directive stands inside the nest, which would move with the loops; take it out first.",
            )
            for token in self._source.directives_in(span)
        ]
        for token in self._source.directives_before(span):
            if "pragma" in token.text.split("(")[0].lower():
                found.append(
                    Refusal(
                        token.line,
                        token.column,
                        "directive",
                        "a pragma before the loop speaks of the loop as it stands; take it out first.",
                    )
                )
        return found

    # ------------------------------------------------------------ obligations

    def _settle(self, setting: Setting, obligations: list[Obligation]) -> tuple[list[Assumption], list[Refusal]]:
        """Prove each obligation, or make it an assumption; what can never hold is refused."""
        assumptions: dict[tuple[AssumptionCode, Formula], Assumption] = {}
        refusals = []
        for obligation in dict.fromkeys(obligations):
            condition = setting.knowledge.condition(obligation)
            if condition is None:
                continue
            if condition == AnyOf():
                refusals.append(_hopeless(obligation))
                continue
            key = (obligation.code, condition)
            storages = obligation.storages
            if key in assumptions:
                storages = tuple(dict.fromkeys((*assumptions[key].storages, *storages)))
            text = formula_text(condition, setting.texts())
            assumptions[key] = Assumption(obligation.code, text, condition, storages)
        return list(assumptions.values()), refusals

    # ------------------------------------------------------------ the value

    def _nest_of(self, setting: Setting, walk: Walk, stored: Stored, assumptions: tuple[Assumption, ...]) -> Nest:
        span = self._source.span(self._nest)
        assert span is not None
        statements = tuple(self._statement(number, walk, stored) for number in range(len(walk.statements)))
        parameters, storages = with_readable(setting, walk.evaluated, setting.knowledge.parameters.values(), stored.storages,
                                             stored.held_in)
        return with_known_ranges(Nest(
            self._address,
            self._function.decl.name,
            span,
            walk.tree,  # type: ignore[arg-type]
            self._loops(setting, walk),
            statements,
            parameters,
            storages,
            tuple(setting.knowledge.facts),
            assumptions,
            self._source.identifiers,
        ))

    def _statement(self, number: int, walk: Walk, stored: Stored) -> Statement:
        raw = walk.statements[number]
        accesses: dict[Access, None] = {}
        for place in range(len(raw.touches)):
            accesses[stored.accesses[number, place]] = None
        return Statement(raw.id, raw.text, raw.span, raw.context.loops, raw.context.formula, tuple(accesses))

    def _loops(self, setting: Setting, walk: Walk) -> tuple[LoopText, ...]:
        found = []
        for raw in walk.loops:
            live = not raw.header.declared_in_for and live_after(raw.header.binding, self._nest, self._names)
            found.append(
                loop_text(self._source, raw.node, raw.id, raw.header, raw.context.loops, raw.spans, live, setting)
            )
        return tuple(found)


def _hopeless(obligation: Obligation) -> Refusal:
    if obligation.code is AssumptionCode.ROW_BOUND:
        return refusal(
            obligation.node,
            "row-bound",
            "the subscript leaves its row for all sizes; "
            "write the array with subscripts of its own for rows and columns.",
        )
    return refusal(
        obligation.node,
        "wrap",
        "unsigned arithmetic wraps around here for all sizes; write it with signed numbers or in another order.",
    )
