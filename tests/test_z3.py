"""The verdict against z3: is there a pair of instances that the plan reverses, for any sizes?

z3 reads the C text by a path of its own (z3_nest.py).  Where it finds a pair although the verdict is ``legal``, the
sizes that it found must be ones at which the original is undefined, or that an assumption of the verdict excludes.
"""

from __future__ import annotations

import time
from collections import Counter

import pytest
from asked import ask
from examination import assumptions_hold
from random_nests import seeded_case
from test_textbook import EXAMPLES, LINE
from z3_nest import ZNest, reversed_pair

from oracle import TooLong, Undefined, Unsupported, observe, verdict_at
from retile.model import RetileError

GROUPS, QUESTIONS, SECONDS = 6, 60, 7.0


@pytest.mark.parametrize("name", EXAMPLES)
def test_textbook(name):
    example = EXAMPLES[name]
    nest = ZNest(example.text, LINE)
    for plan in (*example.legal, *example.illegal):
        judgement = ask(example.text, LINE).check(plan)
        if judgement.plan.aligned:
            continue  # z3 is asked about the default places only
        assert judgement.verdict.value == ("illegal" if reversed_pair(nest, plan) else "legal"), (plan, example.source)


@pytest.mark.parametrize("group", range(GROUPS))
def test_random_nests(group):
    seen, end = Counter(), time.monotonic() + SECONDS
    for seed in range(700_000 + 1000 * group, 700_000 + 1000 * group + QUESTIONS):
        seen[question(seed)] += 1
        if time.monotonic() > end and min(seen["legal"], seen["illegal"]) >= 2:
            break
    assert seen["legal"] >= 2 and seen["illegal"] >= 2, seen


def question(seed: int) -> str:
    """The common verdict about the case of a seed, or why there is none."""
    case = seeded_case(seed)
    try:
        nest = ZNest(case.text, case.line)
        found = reversed_pair(nest, case.plan)
        opened = ask(case.text, case.line)
        if opened.opened.found.nest is None:
            return "refused"
        judgement = opened.check(case.plan)
    except Unsupported:
        return "not read by z3"
    except RetileError:
        return "no plan"
    told = judgement.verdict.value
    if judgement.plan.aligned:
        return "other places"  # z3 is asked about the default places only
    if told not in ("legal", "illegal"):
        return told
    if found is None:
        assert told == "legal", f"z3 proves that nothing is reversed: {judgement.violations}\n{case}"
    elif told == "legal":
        assert excused(case, judgement, found[0]), f"seed {seed}: z3 finds {found}\n{case}"
        return "undefined sizes"
    return told


def excused(case, judgement, sizes: dict[str, int]) -> bool:
    """True if the original is undefined at these sizes or the verdict does not speak of them."""
    if not assumptions_hold(judgement.assumptions, sizes):
        return True
    try:
        observe(case.text, case.function, case.line, sizes, may=True)
    except Undefined:
        return True
    except TooLong:
        return False
    return False


@pytest.mark.parametrize("group", range(2))
def test_the_encoding_agrees_with_brute_force(group):
    """What z3 proves impossible never happens at small sizes; where nothing is undefined, its pairs do happen."""
    decided = 0
    for seed in range(800_000 + 100 * group, 800_000 + 100 * group + 40):
        case = seeded_case(seed)
        try:
            found = reversed_pair(ZNest(case.text, case.line), case.plan)
        except Unsupported:
            continue
        sizes = [{"n": 4, "m": 5, "w": 6}, {"n": 5, "m": 3, "w": 4}] if found is None else [found[0]]
        for values in sizes:
            if max(values.values()) > 12:
                continue
            try:
                outcome = verdict_at(case.text, case.function, case.line, case.plan, values, may=True)
            except (Undefined, TooLong):
                continue
            decided += 1
            assert bool(outcome.clashes) == (found is not None), f"seed {seed} at {values}: z3 {found}\n{case}"
    assert decided >= 10
