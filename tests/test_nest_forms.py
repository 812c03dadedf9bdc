"""Forms of hot loops: read as they run, and every legal variant leaves what the original leaves."""

from __future__ import annotations

import pytest
from asked import ask
from nest_execution import events_read, events_run, line_of_first_for
from nest_forms import FORMS
from oracle import compare

NAMES = [form[0] for form in FORMS]


@pytest.mark.parametrize(("text", "sizes"), [(form[1], form[2]) for form in FORMS], ids=NAMES)
def test_a_form_is_read_as_it_runs(text, sizes):
    line = line_of_first_for(text)
    nest = ask(text, line).opened.nest
    read = {event for event in events_read(nest, sizes) if event[2] or event[3]}
    run = {event for event in events_run(text, nest.function, line, sizes, frozenset()) if event[2] or event[3]}
    assert read == run and run


def legal_plans(text: str, plans: tuple[str, ...]) -> list[str]:
    answer = ask(text, line_of_first_for(text))
    return [plan for plan in plans if answer.verdict(plan) == "legal"]


@pytest.mark.parametrize(("text", "sizes", "plans"), [form[1:] for form in FORMS], ids=NAMES)
def test_variants_of_a_form_compute_the_same(text, sizes, plans):
    found = legal_plans(text, plans)
    assert found, "a form that cannot be reordered shows nothing"
    for plan in found:
        for n in (sizes["n"], sizes["n"] - 1, 3, 1, 0):
            for trust in (True, False):
                variant = ask(text, line_of_first_for(text)).variant(plan, trust=trust)
                assert compare(text, variant.text, "survey", {**sizes, "n": n}) == [], plan
