"""Random nests in mixed integer types: wherever the assumptions hold, what was read is what runs."""

from __future__ import annotations

import re
from random import Random

import pytest
from nest_execution import Event, events_read, events_run, opened, parameter_values
from nest_random import Nests
from oracle_text import Undefined, Unsupported
from oracle_values import TooLong
from retile.affine import formula_names
from retile.model import Nest
from retile.nest import read_nest
from walk import holds

LINE = 4


def usable(nest: Nest, sizes: dict[str, int]) -> bool:
    """True if the assumptions hold at these sizes, and this module can compute every parameter as C would."""
    if any("unsigned long long" in p.text and "-" in p.text for p in nest.parameters):
        return False  # a difference below zero becomes a large number in C only
    values = parameter_values(nest, sizes)
    return all(holds(a.condition, values) for a in nest.assumptions if a.condition is not None)


def certain_cells(events: set[Event], unknown: frozenset[str]) -> set[Event]:
    """Events without the objects of which some access may be to any cell."""
    return {(line, at, frozenset(cell for cell in reads if cell[0] not in unknown),
             frozenset(cell for cell in writes if cell[0] not in unknown))
            for line, at, reads, writes in events}


def check(seed: int, directory) -> int:
    """Compare one random nest at three sizes; the number of instances compared."""
    text = Nests(seed).text()
    nest = read_nest(opened(text, directory), LINE).nest
    if nest is None:
        return 0
    assert not any(formula_names(fact) - {p.symbol for p in nest.parameters} for fact in nest.facts)
    unknown = frozenset(nest.storage(access.storage).object for statement in nest.statements
                        for access in statement.accesses if access.subscripts is None)
    lines = {statement.span.line for statement in nest.statements}
    random, compared = Random(seed), 0
    for _ in range(3):
        sizes = {"n": random.randint(0, 6), "m": random.randint(0, 6), "ld": random.choice([3, 6, 9, 16])}
        if not usable(nest, sizes):
            continue
        try:
            run = events_run(text, nest.function, LINE, sizes, frozenset(), steps=20_000)
        except (Undefined, Unsupported, TooLong):
            continue
        values = parameter_values(nest, sizes)
        assert all(holds(fact, values) for fact in nest.facts), (sizes, text)
        run = certain_cells({event for event in run if event[0] in lines}, unknown)
        read = certain_cells(events_read(nest, sizes), unknown)
        assert read == run, (sizes, text)
        compared += len(run)
    return compared


@pytest.mark.parametrize("block", range(4))
def test_random_nests_are_read_as_they_run(block, tmp_path):
    assert sum(check(seed, tmp_path) for seed in range(10 * block, 10 * block + 10)) > 20


@pytest.mark.long
def test_many_random_nests_are_read_as_they_run(tmp_path, pytestconfig):
    first, count = pytestconfig.getoption("--seed") * 1000, pytestconfig.getoption("--pairs")
    assert sum(check(seed, tmp_path) for seed in range(first, first + count)) > count


def test_the_generator_writes_many_different_nests():
    texts = {Nests(seed).text() for seed in range(50)}
    assert len(texts) == 50 and any(re.search(r"-- >", text) for text in texts) and any("!=" in text for text in texts)
