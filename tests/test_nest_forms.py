"""Forms of hot loops: read as they run, and every legal variant leaves what the original leaves."""

from __future__ import annotations

import pytest
from asked import ask
from nest_execution import events_read, events_run, line_of_first_for
from nest_forms import COMPILED, FORMS
from oracle import compare
from retile.trial import verify
from test_nest_execution import in_structures, with_memory

NAMES = [form[0] for form in FORMS]


@pytest.mark.parametrize(("text", "sizes"), [(form[1], form[2]) for form in FORMS], ids=NAMES)
def test_a_form_is_read_as_it_runs(text, sizes):
    line = line_of_first_for(text)
    nest = ask(text, line).opened.nest
    bytes_of = {s.object: s.element_bytes for s in nest.storages if s.element_bytes and "." in s.name}
    read, run = (in_structures(with_memory(events), bytes_of)
                 for events in (events_read(nest, sizes), events_run(text, nest.function, line, sizes, frozenset())))
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


@pytest.mark.parametrize(("text", "sizes", "plans"), [form[1:] for form in COMPILED], ids=[form[0] for form in COMPILED])
def test_compiled_variants_of_a_form_leave_the_same(text, sizes, plans):
    answer = ask(text, line_of_first_for(text))
    found = legal_plans(text, plans)
    assert found
    for plan in found:
        verification = verify(answer.opened.source, answer.opened.nest, answer.variant(plan, trust=False))
        assert verification.verified, (plan, verification)


UNION = """\
union word {{ float f; unsigned u; short parts[2]; }};
void survey(int n, union word *w, double *depth) {{
    for (int i = 1; i < n; i++)
        {body}
}}
"""


@pytest.mark.parametrize(("body", "kinds"), [
    ("w[i].f = w[i - 1].u;", ["flow"]), ("w[i].u = w[i + 1].f;", ["anti"]), ("w[i].f = w[i].u;", []), ("w[i] = w[i - 1];", ["flow"])])
def test_members_of_a_union_are_one_cell(body, kinds):
    assert [edge[0] for edge in ask(UNION.format(body=body), 3).edges()] == kinds


@pytest.mark.parametrize("body", ["w[i].parts[1] = 0;", "depth[w->u] = 1; w[i].f = 2;", "*(&w[i].u + 1) = 1;",
                                  "for (unsigned j = 0; j < w->u; j++) { depth[j] = 1; w[i].f = 1; }"])
def test_parts_of_a_union_are_no_sizes_and_no_arrays(body):
    answer = ask(UNION.format(body=body), 3)
    assert answer.opened.refusals or not any("w" in parameter.text for parameter in answer.opened.nest.parameters)
