"""What a random nest and plan have to satisfy; used by test_random.py and by long runs.

``examine`` asks the program under test about one case and holds each of its answers against brute force:

* ``legal``: no pair of instances is reversed at several small sizes, and the variants in both remainder styles compute
  every cell by the same operations (equal tags), touch no further cell of the caller and stay defined;
* ``illegal``: the witness runs: at its sizes both instances happen in the order told, they share a cell, one of them
  writes, the kind is right, and the plan puts them the other way round.
"""

from __future__ import annotations

import functools
import re
from collections import Counter
from dataclasses import dataclass, field

from asked import Answer, ask
from random_nests import Case

from oracle import Aligned, Log, TooLong, Undefined, Unsupported, compare, observe, times_of, verdict_at
from oracle_values import Instance
from retile.affine import Affine, AllOf, AnyOf, Constraint, Formula
from retile.model import Assumption, Judgement, RetileError, Violation

STEPS = 6000


@dataclass
class Finding:
    """The answer about one case, and what is wrong with it."""

    verdict: str
    problems: list[str] = field(default_factory=list)
    notes: Counter = field(default_factory=Counter)
    answer: Answer | None = None


def sizes_of(case: Case, seed: int) -> list[dict[str, int]]:
    """Small sizes for a case: two that leave room for conflicts, one at the edge."""
    spread = [(4, 5, 6), (5, 3, 4), (3, 6, 5), (6, 4, 3)]
    edges = [(0, 3, 2), (1, 1, 1), (2, 0, 4), (3, 2, 1), (0, 0, 0), (1, 4, 3)]
    chosen = [spread[seed % 4], spread[(seed + 1 + seed // 4 % 3) % 4], edges[seed % 6]]
    return [dict(zip(case.sizes, values, strict=True)) for values in chosen]


def examine(case: Case, seed: int = 0, thorough: bool = True) -> Finding:
    """Ask about a case and check the answer; ``thorough``: in both remainder styles, else in one by the seed."""
    try:
        answer = ask(case.text, case.line)
        if answer.opened.found.nest is None:
            codes = [refusal.code for refusal in answer.opened.refusals]
            return Finding("refused", notes=Counter(f"refused: {code}" for code in codes))
        judgement = answer.check(case.plan)
    except RetileError as problem:
        return Finding("error", notes=Counter([f"error: {_short(str(problem))}"]))
    finding = Finding(judgement.verdict.value, answer=answer)
    if finding.verdict == "legal":
        _examine_legal(case, judgement, answer, seed, thorough, finding)
    elif finding.verdict == "illegal":
        for violation in judgement.violations:
            finding.problems += witness_problems(case, judgement, violation, finding.notes)
    elif finding.verdict == "refused":
        finding.notes.update(f"plan refused: {refusal.code}" for refusal in judgement.refusals)
    else:
        finding.notes.update(f"unproven: {_short(unproven.reason)}" for unproven in judgement.unproven)
    return finding


def aligned_of(judgement: Judgement, sizes: dict[str, int]) -> Aligned:
    """Where the plan puts statements among the iterations of loops they are not in, for the oracle."""
    return [(int(re.match(r"\d+", a.statement).group()), a.loop, functools.partial(_value_of, a.value, sizes),
             a.chunks_only) for a in judgement.plan.aligned]


def _value_of(form: Affine, sizes: dict[str, int], iterators: dict[str, int]) -> int:
    by_symbol = {name: iterators[name.partition("@")[0]] for name in form.names() if name not in sizes}
    return form.evaluate({**sizes, **by_symbol})


def _short(text: str) -> str:
    return re.sub(r"'[^']*'|\d+", "_", text.splitlines()[0])[:90]


# ---------------------------------------------------------------- legal


def _examine_legal(case: Case, judgement: Judgement, answer: Answer, seed: int, thorough: bool,
                   finding: Finding) -> None:
    chosen = sizes_of(case, seed)
    for sizes in chosen:
        try:
            held = assumptions_hold(judgement.assumptions, sizes)
            aligned = aligned_of(judgement, sizes)
            outcomes = [verdict_at(case.text, case.function, case.line, case.plan, sizes, may=may, steps=STEPS,
                                   aligned=aligned) for may in (False, True)]
        except KeyError:  # a place told in terms of an expression of the text: the tags decide alone
            finding.notes["place not decided"] += 1
            continue
        except (Undefined, TooLong) as reason:
            finding.notes[f"no ground: {type(reason).__name__}"] += 1
            continue
        if held is None:
            finding.notes["assumption not decided"] += 1
        elif held:
            # scalars of the function may be copied or given storage of their own: the tags below judge them
            clashes = [c for o in outcomes for c in (*o.clashes, *o.stale) if not c.private]
            finding.problems += [f"false legal at {sizes}: {clash}" for clash in clashes[:1]]
            finding.notes["compared"] += 1
    for remainder in ("clamp", "peel") if thorough else (("clamp", "peel")[seed % 2],):
        _examine_variant(case, answer, f"{case.plan}; remainder {remainder}", chosen, finding)


def _examine_variant(case: Case, answer: Answer, plan: str, chosen: list[dict[str, int]], finding: Finding) -> None:
    judgement = answer.check(plan)
    for trust in (False, True) if judgement.assumptions else (False,):
        try:
            variant = answer.variant(plan, trust=trust)
        except RetileError as problem:
            finding.notes[f"no variant: {_short(str(problem))}"] += 1
            finding.problems.append(f"legal, but no variant for {plan}: {problem}")
            return
        for sizes in chosen:
            if trust and not assumptions_hold(judgement.assumptions, sizes):
                continue
            try:
                wrong = compare(case.text, variant.text, case.function, sizes, steps=STEPS)
            except (Undefined, TooLong):
                continue
            finding.notes["tags compared"] += 1
            if wrong:
                finding.problems.append(f"variant of {plan} (trust {trust}) at {sizes}: {wrong[:3]}\n{variant.text}")


def assumptions_hold(assumptions: tuple[Assumption, ...], sizes: dict[str, int]) -> bool | None:
    """Whether the assumptions about sizes hold; None where one is about something else than sizes."""
    try:
        return all(holds(a.condition, sizes) for a in assumptions if a.condition is not None)
    except KeyError:
        return None


def holds(formula: Formula, values: dict[str, int]) -> bool:
    """A formula's truth at given values."""
    if isinstance(formula, Constraint):
        value = formula.form.evaluate(values)
        return value == 0 if formula.equality else value >= 0
    parts = (holds(part, values) for part in formula.parts)
    if isinstance(formula, AllOf):
        return all(parts)
    assert isinstance(formula, AnyOf)
    return any(parts)


# ---------------------------------------------------------------- illegal


def witness_problems(case: Case, judgement: Judgement, violation: Violation, notes: Counter) -> list[str]:
    """What is wrong with a witness; empty if it happens just as told."""
    told = dict(violation.parameters)
    problem = ["never tried"]
    for fill in (0, 3, 1, 6):
        sizes = {name: told.get(name, fill) for name in case.sizes}
        try:
            instances = observe(case.text, case.function, case.line, sizes, may=True, steps=5 * STEPS)
        except TooLong:
            notes["witness too large to replay"] += 1
            return []
        except Undefined as reason:
            problem = [f"the witness lies outside the domain at {sizes}: {reason}: {violation}"]
            continue
        times = times_of(instances, case.plan, aligned_of(judgement, sizes))
        problem = _replayed(times, violation, instances, sizes)
        if not problem:
            notes["witness replayed"] += 1
            return []
    return problem


def _replayed(times: list[tuple], violation: Violation, instances: Log, sizes: dict[str, int]) -> list[str]:
    sources = [k for k, x in enumerate(instances) if _is(x, violation.source)]
    targets = [k for k, x in enumerate(instances) if _is(x, violation.target)]
    pairs = [(a, b) for a in sources for b in targets if instances[a].run == instances[b].run]
    if not pairs:
        return [f"at {sizes} the witness does not run: {violation}"]
    if not any(a < b for a, b in pairs):
        return [f"at {sizes} the witness runs in the other order: {violation}"]
    sharing = [(a, b) for a, b in pairs if a < b and _share(instances[a], instances[b], violation.kind)]
    if not sharing:
        return [f"at {sizes} the witness shares no cell as {violation.kind}: {violation}"]
    if not any(times[b] < times[a] for a, b in sharing):
        return [f"at {sizes} the plan keeps the order of the witness {times[a]} {times[b]}: {violation}"
                for a, b in sharing[:1]]
    return []


def _is(instance: Instance, told: object) -> bool:
    if instance.line != told.line:
        return False
    values = instance.iterators
    return all(values.get(name.partition("@")[0]) == value for name, value in told.iterators)


def _share(first: Instance, second: Instance, kind: str) -> bool:
    wants = {"flow": (True, False), "anti": (False, True), "output": (True, True)}[kind]
    for obj, offset, writes in first.accesses:
        for other, place, also in second.accesses:
            same = obj is other or (obj.kind == other.kind == "block" and obj.declared == other.declared)
            if same and offset == place and (writes, also) == wants:
                return True
    return False


__all__ = ["Finding", "Unsupported", "examine", "sizes_of", "witness_problems"]
