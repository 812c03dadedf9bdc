"""The verdict against z3: is there a pair of instances that the plan reverses, for any sizes?

z3 reads the C text by a path of its own (z3_nest.py).  Where it finds a pair although the verdict is ``legal``, the
sizes that it found must be ones at which the original is undefined, or that an assumption of the verdict excludes.

The default run asks as many questions as fit its seconds; ``pytest -m long tests/test_z3.py -s`` asks about every plan of
the grid over all nests written by hand, then about random nests, until ``--pairs`` questions have an answer of both sides.
"""

from __future__ import annotations

import functools
import re
import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator

import pytest
import z3
from asked import ask
from examination import assumptions_hold
from plan_grid import plans
from test_textbook import EXAMPLES, LINE
from z3_cases import Case, seeded_case
from z3_hand import NESTS
from z3_nest import Aligned, ZNest, reversed_pair

from oracle import TooLong, Undefined, Unsupported, observe, verdict_at
from retile.affine import Affine
from retile.model import Judgement, RetileError

# Of the default run: groups of random and of hand-written nests, the seconds of each group, and the most questions in it.
GROUPS, SECONDS, QUESTIONS = 6, 3.5, 60


@pytest.mark.parametrize("name", EXAMPLES)
def test_textbook(name):
    example = EXAMPLES[name]
    for plan in (*example.legal, *example.illegal):
        assert question(Case(example.text, LINE, plan, ())) in ("legal", "illegal", "undefined sizes"), (plan, example.source)


@pytest.mark.parametrize("group", range(GROUPS))
def test_random_nests(group):
    first = 700_000 + 1000 * group
    check(seeded_case(seed) for seed in range(first, first + QUESTIONS))


@pytest.mark.parametrize("group", range(GROUPS))
def test_nests_written_by_hand(group):
    cases = [case for name in NESTS for case in by_hand(name)]
    check(cases[7 * at % len(cases)] for at in range(group, len(cases), GROUPS))


def check(cases: Iterable[Case]) -> None:
    """Ask about the cases for the seconds of a group; both answers must come up."""
    seen, end = Counter(), time.monotonic() + SECONDS
    for case in cases:
        seen[question(case)] += 1
        if time.monotonic() > end and min(seen["legal"], seen["illegal"]) >= 2:
            break
    assert seen["legal"] >= 2 and seen["illegal"] >= 2, seen


@pytest.mark.long
def test_many_questions(request):
    """Goes on after disagreements and shows all of them."""
    wanted, seed = request.config.getoption("pairs"), request.config.getoption("seed")
    seen, wrong = {"by hand": Counter(), "random": Counter()}, []
    for kind, case in _many(seed * 1_000_000):
        if kind == "random" and sum(_decided(counter) for counter in seen.values()) >= wanted:
            break
        try:
            seen[kind][question(case)] += 1
        except AssertionError as problem:
            wrong.append(str(problem))
    for kind, counter in seen.items():
        print(f"\n{kind}: {_decided(counter)} questions answered by both, " + ", ".join(
            f"{count} {what}" for what, count in counter.most_common()))
    assert not wrong, f"{len(wrong)} disagree\n" + "\n\n".join(wrong[:20])


def _many(first: int) -> Iterator[tuple[str, Case]]:
    yield from (("by hand", case) for name in NESTS for case in by_hand(name))
    while True:
        yield "random", seeded_case(first)
        first += 1


def _decided(counter: Counter) -> int:
    return counter["legal"] + counter["illegal"] + counter["undefined sizes"]


@functools.cache
def by_hand(name: str) -> tuple[Case, ...]:
    """A nest written by hand with every plan of the grid."""
    nest = NESTS[name]
    opened = ask(nest.text, nest.line).opened
    sizes = tuple(re.findall(r"\bint (\w+)", nest.text.partition("{")[0]))
    return tuple(Case(nest.text, nest.line, plan, sizes) for plan in plans(opened.nest))


@functools.lru_cache(maxsize=8)
def _read(text: str, line: int) -> ZNest:
    return ZNest(text, line)


def question(case: Case) -> str:
    """The common verdict about a case, or why there is none."""
    try:
        nest = _read(case.text, case.line)
        opened = ask(case.text, case.line)
        if opened.opened.found.nest is None:
            return "refused"
        judgement = opened.check(case.plan)
        found = reversed_pair(nest, case.plan, _aligned(judgement))
    except Unsupported:
        return "not read by z3"
    except RetileError:
        return "no plan"
    told = judgement.verdict.value
    if told not in ("legal", "illegal"):
        return told
    if found is None:
        assert told == "legal", f"z3 proves that nothing is reversed: {judgement.violations}\n{case}"
    elif told == "legal":
        assert excused(case, judgement, found[0]), f"legal, but z3 finds {found}\n{case}"
        return "undefined sizes"
    return told


def _aligned(judgement: Judgement) -> Aligned:
    """Where the plan puts statements among the iterations of loops they are not in, in terms of z3."""
    return [(int(re.match(r"\d+", a.statement).group()), a.loop, _value(a.value), a.chunks_only)
            for a in judgement.plan.aligned]


def _value(form: Affine) -> Callable[[dict], z3.ArithRef]:
    def value(env: dict) -> z3.ArithRef:
        total = z3.IntVal(form.constant)
        for symbol, factor in form.terms:
            if not isinstance(symbol, str) or symbol.partition("@")[0] not in env:
                raise Unsupported(f"a place at {form}")
            total = total + factor * env[symbol.partition("@")[0]]
        return total

    return value


def excused(case: Case, judgement: Judgement, sizes: dict[str, int]) -> bool:
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
