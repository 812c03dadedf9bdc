"""Values as JSON documents: the fields that other programs rely on (more may be added, none renamed).

Every function takes values of ``model`` and gives plain dictionaries and lists for ``json.dumps``.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING, Any

from ..model import Address, Assumption, Instance, Judgement, Nest, Plan, Refusal, Statement, Violation

if TYPE_CHECKING:
    from ..dependence import Dependences, Edge
    from ..nest import Found

Document = dict[str, Any]


def of_assumption(assumption: Assumption) -> Document:
    """``{"code", "text", "testable"}``."""
    return {"code": assumption.code.value, "text": assumption.text, "testable": assumption.testable}


def of_refusal(refusal: Refusal) -> Document:
    """``{"line", "column", "code", "reason"}``."""
    return {"line": refusal.line, "column": refusal.column, "code": refusal.code, "reason": refusal.reason}


def of_plan(plan: Plan) -> Document:
    """``{"plan", "options"}``: the terms, and what stands behind the ``;``, both as a PLAN argument takes them."""
    return {"plan": plan.order_text, "options": options_text(plan)}


def options_text(plan: Plan) -> str:
    """The options of a plan as a PLAN argument takes them, without the ``;``; empty if it has none."""
    return plan.text.partition(";")[2].strip()


# ---------------------------------------------------------------- nests

def of_nests(found: Iterable[Found]) -> Document:
    """The document of ``retile nests``."""
    return {"nests": [of_found(one) for one in found]}


def of_found(found: Found) -> Document:
    """One ``for`` of a file."""
    return {
        "address": str(found.address), "file": found.address.file, "line": found.address.line,
        "function": found.function, "outermost": found.outermost, "loops": list(found.loops),
        "status": "ready" if found.nest is not None else "refused",
        "refusals": [of_refusal(refusal) for refusal in found.refusals],
        "assumptions": [of_assumption(a) for a in found.nest.assumptions] if found.nest is not None else [],
    }


# ---------------------------------------------------------------- depend

def of_dependences(nest: Nest, dependences: Dependences) -> Document:
    """The document of ``retile depend`` for a nest that retile reads."""
    return {
        "address": str(nest.address),
        "statements": [of_statement(statement) for statement in nest.statements],
        "dependences": [of_edge(edge) for edge in dependences.edges],
        "assumptions": [of_assumption(assumption) for assumption in dependences.assumptions],
        "refusals": [],
    }


def of_refused_dependences(address: Address, refusals: Iterable[Refusal]) -> Document:
    """The document of ``retile depend`` for a nest that it does not read."""
    return {"address": str(address), "statements": [], "dependences": [], "assumptions": [],
            "refusals": [of_refusal(refusal) for refusal in refusals]}


def of_statement(statement: Statement) -> Document:
    """``{"id", "line", "text"}``."""
    return {"id": statement.id, "line": statement.line, "text": statement.text}


def of_edge(edge: Edge) -> Document:
    """One dependence; distance and direction count the loops that both statements share, outermost first."""
    return {
        "kind": edge.kind, "array": edge.storage, "source": edge.source, "target": edge.target,
        "distance": None if edge.distance is None else list(edge.distance), "direction": list(edge.direction),
        "loops": list(edge.common), "carried_by": edge.carried_by,
        "certain": edge.exact, "assumptions": [of_assumption(assumption) for assumption in edge.assumptions],
    }


# ---------------------------------------------------------------- check

def of_judgement(address: Address, judgement: Judgement) -> Document:
    """The document of ``retile check``."""
    return {
        "address": str(address), **of_plan(judgement.plan), "verdict": judgement.verdict.value,
        "violations": [of_violation(violation) for violation in judgement.violations],
        "unproven": [{"source": u.source, "target": u.target, "reason": u.reason, "needs": u.needs}
                     for u in judgement.unproven],
        "instead": judgement.instead, **of_places(judgement.plan),
        "refusals": [of_refusal(refusal) for refusal in judgement.refusals],
        "assumptions": [of_assumption(assumption) for assumption in judgement.assumptions],
    }


def of_places(plan: Plan) -> Document:
    """Where statements stand that the text has outside a loop of the plan: at a value, or again in every iteration."""
    return {"places": [{"statement": a.statement, "loop": a.loop, "value": str(a.value), "chunks_only": a.chunks_only}
                       for a in plan.aligned],
            "repeated": list(plan.copied), "kept": list(plan.kept)}


def of_violation(violation: Violation) -> Document:
    """One witness; ``source`` comes first in the original."""
    return {
        "kind": violation.kind, "array": violation.array, "parameters": dict(violation.parameters),
        "source": of_instance(violation.source), "target": of_instance(violation.target),
        "cell": None if violation.cell is None else list(violation.cell),
        "note": violation.note or None,
    }


def of_instance(instance: Instance) -> Document:
    """``{"statement", "line", "iterators"}``; the iterators have the values of the C variables."""
    return {"statement": instance.statement, "line": instance.line, "iterators": iterator_values(instance)}


def iterator_values(instance: Instance) -> dict[str, int]:
    """The values of the loops around an instance by the C variables' names; by loop where one hides another."""
    names = [loop.split("@")[0] for loop, _ in instance.iterators]
    return {name if names.count(name) == 1 else loop: value for name, (loop, value) in zip(names, instance.iterators)}


# ---------------------------------------------------------------- rewrite

def of_rewriting(address: Address, judgement: Judgement, text: str | None, diff: str | None) -> Document:
    """The document of ``retile rewrite``; ``text`` and ``diff`` are null unless the verdict is legal."""
    judged = of_judgement(address, judgement)
    return {"address": judged.pop("address"), "plan": judged.pop("plan"), "options": judged.pop("options"),
            "verdict": judged.pop("verdict"), "text": text, "diff": diff, **judged}


# ---------------------------------------------------------------- measure

def of_measure_refused(address: Address, sizes: Mapping[str, int], plans: Iterable[tuple[Plan, Judgement | None]],
                       refusals: Iterable[Refusal]) -> Document:
    """The document of ``retile measure`` when nothing was measured: a plan was not legal, or the nest is refused."""
    trials = [{**of_plan(plan), "verdict": "legal" if judgement is None else judgement.verdict.value,
               "violations": [of_violation(violation) for violation in judgement.violations] if judgement else [],
               "verified": False, "identical": False, "seconds": None, "speedup": None} for plan, judgement in plans]
    return {"address": str(address), "host": None, "sizes": dict(sizes), "baseline": None, "trials": trials,
            "best": None, "refusals": [of_refusal(refusal) for refusal in refusals]}
