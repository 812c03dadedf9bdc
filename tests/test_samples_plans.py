"""Every sample under a grid of plans: legal variants compute the same, witnesses of illegal ones are real."""

import atexit
import shutil
import tempfile
from functools import cache
from pathlib import Path

import oracle
import pytest
from command_line import SAMPLES
from plan_grid import plans

import retile
from retile.affine import Affine
from retile.library import OpenNest
from retile.model import Judgement, Verdict, Violation
from retile.report.document import iterator_values
from retile.trial import Settings, verify_all


# The interpreter would take minutes over a whole window of echoes.
SMALLER = {"echo_filter.c": ((b"768u", b"12u"), (b"512u", b"11u"))}


def sample(file: Path) -> Path:
    """The sample, or a copy of it with smaller arrays."""
    if file.name not in SMALLER:
        return file
    text = file.read_bytes()
    for large, small in SMALLER[file.name]:
        assert large in text
        text = text.replace(large, small)
    copy = Path(tempfile.mkdtemp(prefix="retile-test-")) / file.name
    copy.write_bytes(text)
    atexit.register(shutil.rmtree, copy.parent)
    return copy


@cache
def ready() -> dict[str, OpenNest]:
    """All outermost nests of the samples that are not refused, by file and function."""
    found = {}
    for file in sorted(SAMPLES.glob("*.c")):
        opened = retile.open_file(sample(file), flags=("-std=c11",))
        for one in opened.nests():
            if one.outermost and one.nest is not None:
                found[f"{file.name}:{one.function}"] = opened.nest(one.address.line)
    return found


@cache
def judged(name: str, most: int) -> tuple[Judgement, ...]:
    nest = ready()[name]
    return tuple(nest.check(plan) for plan in plans(nest.nest, most))


def variants_compute_the_same(name: str, most: int, settings: Settings) -> None:
    nest = ready()[name]
    legal = [judgement.plan.text for judgement in judged(name, most) if judgement.verdict is Verdict.LEGAL]
    wanted = [nest.plan(plan, remainder=style) for number, plan in enumerate(legal)
              for style in (("clamp", "peel") if most > 10 else ("clamp", "peel")[number % 2:][:1])]
    results = verify_all(nest.source, nest.nest, [nest.rewrite(plan) for plan in wanted], settings)
    fewest = 3 if nest.nest.parameters else 1
    for plan, result in zip(wanted, results, strict=True):
        assert result.verified, f"{name} with {plan.text!r}: {result.difference or result.failure}"
        assert len(result.cases) >= fewest, f"{name} with {plan.text!r} ran at {result.cases} only"


def witnesses_are_real(name: str, most: int) -> None:
    for judgement in judged(name, most):
        if judgement.verdict is Verdict.ILLEGAL:
            assert judgement.violations
        for violation in judgement.violations:
            replay(ready()[name], judgement, violation)


def replay(nest: OpenNest, judgement: Judgement, violation: Violation) -> None:
    """Run the original at the witness's sizes: both instances happen, share a cell, and the plan reverses them."""
    plan = judgement.plan.text
    sizes = dict(violation.parameters)
    text = nest.source.text.replace("\r\n", "\n")
    line = nest.address.line
    instances = oracle.observe(text, nest.nest.function, line, sizes, may=True)
    times = oracle.times_of(instances, plan, aligned(nest, judgement, sizes))
    places = []
    for end in (violation.source, violation.target):
        at = [number for number, one in enumerate(instances) if one.line == end.line
              and one.iterators.items() >= iterator_values(end).items()]
        assert at, f"{plan!r}: {end} does not happen at {sizes}"
        places.append(at)
    assert any(first < later and times[later] < times[first] and shares(instances[first], instances[later], violation)
               for first in places[0] for later in places[1]), f"{nest.address} {plan!r}: {violation} is no witness"


def aligned(nest: OpenNest, judgement: Judgement, sizes: dict[str, int]) -> tuple:
    """Where statements outside a loop stand in it, as the oracle takes it."""
    def value_of(form):
        return lambda iterators: form.evaluate({**sizes, **iterators})

    names = {loop.id: Affine.of(loop.iterator) for loop in nest.nest.loops}
    return tuple((nest.nest.statement(statement).line, loop, value_of(form.substitute(names)))
                 for statement, loop, form in judgement.plan.aligned)


def shares(first: oracle.Instance, later: oracle.Instance, violation: Violation) -> bool:
    """Both touch one cell, in the ways that the kind of dependence says."""
    writes = {"flow": (True, False), "anti": (False, True), "output": (True, True)}[violation.kind]
    cells = [{(obj.kind, obj.declared, offset) for obj, offset, write in one.accesses if write == wanted}
             for one, wanted in zip((first, later), writes)]
    return bool(cells[0] & cells[1])


NAMES = sorted(ready())
FAST = Settings(flags=("-O1",), sanitize=False)


def test_there_are_nests_to_try():
    assert len(NAMES) >= 35


@pytest.mark.parametrize("name", NAMES)
def test_legal_variants_compute_the_same(name):
    variants_compute_the_same(name, 6, FAST)


@pytest.mark.parametrize("name", NAMES)
def test_witnesses_are_real(name):
    witnesses_are_real(name, 6)


def test_the_grid_has_plans_of_every_verdict():
    verdicts = {judgement.verdict for name in NAMES for judgement in judged(name, 6)}
    assert verdicts == {Verdict.LEGAL, Verdict.ILLEGAL, Verdict.UNPROVEN}


@pytest.mark.long
@pytest.mark.parametrize("name", NAMES)
def test_many_legal_variants_compute_the_same(name):
    variants_compute_the_same(name, 40, Settings(flags=("-O2",)))


@pytest.mark.long
@pytest.mark.parametrize("name", NAMES)
def test_many_witnesses_are_real(name):
    witnesses_are_real(name, 40)
