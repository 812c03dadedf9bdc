"""What is known of the parameters, and what has to be: facts, proofs, and assumptions where a proof fails.

An obligation is a formula that must hold at every point of a domain.  The parameter values at which some point of the
domain violates it are a projection; nothing left means proven, else the complement is the condition of an assumption.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from ..affine import Affine, AllOf, AnyOf, Constraint, Formula, at_most, formula_names
from ..model import Assumption, AssumptionCode, CType, Parameter
from ..sets import Region
from ..values import dataclass
from .readable import formula_text

# How many convex pieces the facts of several cases may have together.
_MOST_PIECES = 24


@dataclass(frozen=True)
class Obligation:
    """A formula that must hold throughout a domain for the nest to be read as it is."""

    code: AssumptionCode
    formula: Formula
    domain: Formula
    iterators: tuple[str, ...]
    node: Any  # where it comes from, for a refusal
    storages: tuple[str, ...] = ()
    # How many facts were known when it arose: later ones may themselves rest on it, so they prove nothing of it.
    known: int | None = None


class Knowledge:
    """Parameters and facts, as they become known during the reading."""

    def __init__(self, nest: Any = None) -> None:
        """``nest``: the syntax node ahead of which the parameters are evaluated."""
        self.nest = nest
        self.parameters: dict[str, Parameter] = {}
        self.iterator_types: dict[str, CType] = {}
        self.facts: dict[Formula, None] = {}
        self._ranges: dict[str, Formula] = {}
        self._conditions: dict[tuple[Any, ...], Formula | None] = {}

    def add_fact(self, fact: Formula) -> None:
        """Note a fact; trivial ones are dropped."""
        if not (isinstance(fact, AllOf) and not fact.parts):
            self.facts.setdefault(fact)

    def add_choice(self, fact: Formula) -> None:
        """Note a fact of several cases, unless the cases of all facts multiply to too many.

        Every set that is made from the facts has that many pieces.  Without the fact less is known, nothing wrong.
        """
        if self.region(fact).size <= _MOST_PIECES:
            self.add_fact(fact)

    def add_parameter(self, parameter: Parameter) -> str:
        """Note a parameter and the facts of its type; gives its symbol."""
        if parameter.symbol not in self.parameters:
            self.parameters[parameter.symbol] = parameter
            if not parameter.type.signed:
                self.add_fact(Constraint(Affine.of(parameter.symbol)))
            if parameter.type.bits < 32:
                self.add_fact(type_range(parameter.symbol, parameter.type))
        return parameter.symbol

    def ranges(self, names: Iterable[str]) -> Formula:
        """The ranges of the types of these parameters and iterators."""
        return AllOf(tuple(self._range(name) for name in sorted(names)))

    def _range(self, name: str) -> Formula:
        if name not in self._ranges:
            type_ = self.parameters[name].type if name in self.parameters else self.iterator_types.get(name)
            if type_ is None:
                return AllOf()
            self._ranges[name] = type_range(name, type_)
        return self._ranges[name]

    def region(self, *formulas: Formula, known: int | None = None) -> Region:
        """All that is known, or the first ``known`` facts, and these formulas."""
        both = AllOf((*tuple(self.facts)[:known], *formulas))
        return Region.where(both, self.ranges(formula_names(both)))

    def _few(self, *formulas: Formula) -> Region:
        """As ``region``, without the facts of several cases where that would be many pieces."""
        found = self.region(*formulas)
        if found.size <= _MOST_PIECES:
            return found
        both = AllOf((*(fact for fact in self.facts if _is_one_case(fact)), *formulas))
        return Region.where(both, self.ranges(formula_names(both)))

    def proves(self, domain: Formula, formula: Formula) -> bool:
        """True if the formula holds at every point of the domain."""
        names = formula_names(formula)
        return self.region(domain, self.ranges(names)).implies(formula)

    def condition(self, obligation: Obligation) -> Formula | None:
        """What must hold of the parameters; None if it always does, false (an empty ``AnyOf``) if it never can."""
        rests_on = len(self.facts) if obligation.known is None else obligation.known
        key = (obligation.formula, obligation.domain, obligation.iterators, rests_on)
        if key not in self._conditions:
            self._conditions[key] = self._condition(obligation)
        return self._conditions[key]

    def _condition(self, obligation: Obligation) -> Formula | None:
        names = formula_names(obligation.formula)
        known = self.region(obligation.domain, self.ranges(names), known=obligation.known)
        bad = (known - Region.where(obligation.formula)).without(obligation.iterators)
        if bad.is_empty():
            return None
        # Only sizes at which the domain has points count; elsewhere the shorter condition may say no needlessly.
        bad = bad.relative_to(known.without(obligation.iterators))
        context = self.region(self.ranges(bad.names()), known=obligation.known)
        good = (Region.where() - bad).relative_to(context)
        return AnyOf() if (good & context).is_empty() else good.formula()

    def forget_conditions(self) -> None:
        """Facts were taken back: what was concluded from them is not known any more."""
        self._conditions.clear()

    def exact_condition(self, obligation: Obligation) -> Formula | None:
        """As ``condition``, but not a word more than is needed: for what is taken as a fact.

        None too where the fact would have too many cases to be of use.
        """
        names = formula_names(obligation.formula)
        known = self._few(obligation.domain, self.ranges(names))
        bad = (known - Region.where(obligation.formula)).without(obligation.iterators)
        if bad.is_empty():
            return None
        context = self._few(self.ranges(bad.names()))
        good = (context - bad).relative_to(context)
        if (context - bad).is_empty():
            return AnyOf()
        return good.formula() if good.size <= _MOST_PIECES else None


def _is_one_case(formula: Formula) -> bool:
    """True for a formula without a disjunction."""
    if isinstance(formula, AnyOf):
        return False
    return isinstance(formula, Constraint) or all(_is_one_case(part) for part in formula.parts)


def type_range(name: str, type_: CType) -> Formula:
    """Where a symbol lies by its type."""
    value = Affine.of(name)
    return AllOf((at_most(type_.smallest, value), at_most(value, type_.largest)))


def assumption(obligation: Obligation, condition: Formula, texts: Mapping[str, str]) -> Assumption:
    """The assumption that the condition holds, in words."""
    return Assumption(obligation.code, formula_text(condition, texts), condition, obligation.storages)
