"""The report formatters, on values made by hand."""

import re

from retile.model import (Address, Assumption, AssumptionCode, Instance, Judgement, Plan, Refusal, Unproven, Verdict,
                          Violation)
from retile.report import document
from retile.report.table import Column, Look, paragraph, table
from retile.report.verdict import verdict_lines

ADDRESS = Address("grids/relax.c", 30)
NO_OVERLAP = Assumption(AssumptionCode.NO_OVERLAP, "a and c do not overlap", storages=("a", "c"))
ROWS = Assumption(AssumptionCode.OTHER, "the rows of depth are distinct")
REVERSED = Violation("flow", "z", (("n", 4), ("m", 4)), Instance("34", 34, (("i", 1), ("j", 2))),
                     Instance("34", 34, (("i", 2), ("j", 1))), (1, 2))


def lines_of(judgement: Judgement, look: Look = Look()) -> str:
    return "\n".join(verdict_lines(ADDRESS, judgement, lambda refusal: f"PLACE {refusal.line}", look))


def test_an_illegal_verdict_shows_two_executions_that_a_person_can_follow():
    said = lines_of(Judgement(Verdict.ILLEGAL, Plan("j i", ()), violations=(REVERSED,), instead="i j"))
    assert said == """\
illegal: grids/relax.c:30 with plan "j i"

At n = 4, m = 4 the plan reverses two executions that touch z[1][2] (flow dependence).
In the original order:

  first   line 34, i = 1, j = 2   writes z[1][2]
  later   line 34, i = 2, j = 1   reads z[1][2]

With the plan the second of them comes first and would read the cell before it has its value.

A legal plan near it: retile check grids/relax.c:30 'i j'"""


def test_more_than_two_witnesses_are_counted_not_shown():
    said = lines_of(Judgement(Verdict.ILLEGAL, Plan("j i", ()), violations=(REVERSED,) * 5))
    assert said.count("In the original order") == 2
    assert "3 more of the dependences are reversed" in said


def test_a_legal_verdict_names_what_it_rests_on_and_what_to_do_next():
    said = lines_of(Judgement(Verdict.LEGAL, Plan("i:64 i", ()), assumptions=(NO_OVERLAP,)))
    assert said.startswith("legal: ")
    assert "  - a and c do not overlap [no-overlap]\n" in said
    assert "tests this when the function is called" in said
    assert said.endswith("Next: retile rewrite --diff grids/relax.c:30 'i:64 i'")


def test_what_cannot_be_tested_is_not_promised_to_be():
    said = lines_of(Judgement(Verdict.UNPROVEN, Plan("j i", ()), assumptions=(ROWS,),
                              unproven=(Unproven("9", "9", "rows may be the same.", "rows of depth are distinct"),)))
    assert "Not decided for line 9: rows may be the same." in said
    assert "It would be settled by: rows of depth are distinct" in said
    assert "tests this when" not in said


def test_a_refusal_shows_its_place():
    said = lines_of(Judgement(Verdict.REFUSED, Plan("j i", ()), refusals=(Refusal(7, 3, "call", "a call"),)))
    assert said == 'refused: grids/relax.c:30 with plan "j i"\n\nPLACE 7'


def test_colour_only_when_asked():
    judgement = Judgement(Verdict.LEGAL, Plan("i", ()))
    assert "\x1b" not in lines_of(judgement)
    assert "\x1b" in lines_of(judgement, Look(80, colour=True))


def test_tables_fit_the_width_and_lose_nothing():
    text = "a long reason with many words that has to be broken into several lines somewhere"
    columns = (Column("address", whole=True), Column("reason"))
    narrow = table(columns, [("x.c:12", text)], Look(40))
    assert max(map(len, narrow)) <= 40
    assert " ".join(" ".join(line[9:] for line in narrow[2:]).split()) == text
    wide = table(columns, [("x.c:12", text)], Look())
    assert len(wide) == 3 and wide[2] == f"x.c:12   {text}"
    assert all(line == line.rstrip() for line in narrow + wide)


def test_table_cells_are_text_not_markup():
    assert table((Column("cell"),), [("z[bold]x[/bold]",)], Look())[-1] == "z[bold]x[/bold]"


def test_the_best_row_is_stressed_in_colour():
    lines = table((Column("plan"),), [("i",), ("j",)], Look(30, colour=True), best=1)
    assert "\x1b" in lines[-1] and "\x1b" not in lines[-2]
    assert re.sub(r"\x1b\[[\d;]*m", "", lines[-1]).strip() == "j"


def test_paragraphs_break_at_blanks_only():
    assert paragraph("a" * 60 + " b", Look(40), "- ", "  ") == ["- " + "a" * 60, "  b"]
    assert paragraph("one two", Look(), "- ") == ["- one two"]


def test_the_document_of_a_verdict_has_the_fields_of_the_contract():
    judgement = Judgement(Verdict.ILLEGAL, Plan("j i; remainder peel", (), (("remainder", "peel"),)),
                          violations=(REVERSED,), assumptions=(NO_OVERLAP,))
    assert document.of_judgement(ADDRESS, judgement) == {
        "address": "grids/relax.c:30", "plan": "j i", "options": "remainder peel", "verdict": "illegal",
        "violations": [{
            "kind": "flow", "array": "z", "parameters": {"n": 4, "m": 4}, "cell": [1, 2], "note": None,
            "source": {"statement": "34", "line": 34, "iterators": {"i": 1, "j": 2}},
            "target": {"statement": "34", "line": 34, "iterators": {"i": 2, "j": 1}}}],
        "unproven": [], "instead": None, "places": [], "repeated": [], "kept": [], "refusals": [],
        "assumptions": [{"code": "no-overlap", "text": "a and c do not overlap", "testable": True}]}


def test_the_document_of_a_rewriting_without_a_variant_has_no_text():
    refused = Judgement(Verdict.REFUSED, Plan("j i", ()), refusals=(Refusal(7, 3, "call", "a call"),))
    written = document.of_rewriting(ADDRESS, refused, None, None)
    assert list(written)[:6] == ["address", "plan", "options", "verdict", "text", "diff"]
    assert written["text"] is None and written["diff"] is None
    assert written["refusals"] == [{"line": 7, "column": 3, "code": "call", "reason": "a call"}]


def test_iterators_go_by_their_names_in_c():
    assert document.iterator_values(Instance("9", 9, (("t", 1), ("i@14", 2)))) == {"t": 1, "i": 2}
    assert document.iterator_values(Instance("9", 9, (("i@3", 1), ("i@14", 2)))) == {"i@3": 1, "i@14": 2}
