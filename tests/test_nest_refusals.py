"""What a nest is refused for: the code and the line, and a reason that says what stands there."""

from __future__ import annotations

import pytest
from nest_execution import opened
from nest_refused import REFUSED
from retile.model import RetileError
from retile.nest import read_nest, read_nests


@pytest.mark.parametrize(("text", "expected"), [case[1:] for case in REFUSED], ids=[case[0] for case in REFUSED])
def test_a_nest_is_refused_with_line_and_code(text, expected, tmp_path):
    found = next(f for f in read_nests(opened(text, tmp_path)) if f.outermost)
    assert found.nest is None
    assert tuple((refusal.line, refusal.code) for refusal in found.refusals) == expected


@pytest.mark.parametrize("text", [case[1] for case in REFUSED], ids=[case[0] for case in REFUSED])
def test_a_reason_is_one_sentence_about_the_place(text, tmp_path):
    for found in read_nests(opened(text, tmp_path)):
        for refusal in found.refusals:
            assert refusal.reason.endswith(".") and "\n" not in refusal.reason
            assert 1 <= refusal.line <= len(text.splitlines()) and refusal.column >= 1


def test_all_reasons_of_a_nest_are_given_in_text_order(tmp_path):
    text = """\
void log_ping(int);
void sweep(int pings, double *depth, const int *cell) {
    for (int i = 0; i < pings; i++) {
        *(i > 3 ? depth : depth + 1) = 1;
        log_ping(i);
        if (depth[i] > 9) break;
    }
}
"""
    found = read_nest(opened(text, tmp_path), 3)
    assert [(r.line, r.code) for r in found.refusals] == [(4, "pointer"), (5, "call"), (6, "break")]


def test_an_inner_loop_may_be_read_where_the_outer_is_refused(tmp_path):
    text = """\
void flush(void);
void sweep(int pings, int beams, double *depth) {
    for (int i = 0; i < pings; i++) {
        for (int j = 0; j < beams; j++)
            depth[i * beams + j] *= 2;
        flush();
    }
}
"""
    outer, inner = read_nests(opened(text, tmp_path))
    assert outer.nest is None and [r.code for r in outer.refusals] == ["call"]
    assert inner.nest is not None and not inner.outermost and inner.loops == ("j",)
    assert {p.symbol: p.kind for p in inner.nest.parameters if p.symbol in ("i", "beams")} == {
        "i": "outer iterator",
        "beams": "argument",
    }


SHARED = """\
void sweep(int pings, double *depth) {
    for (int i = 0; i < pings; i++) depth[i] = 0; for (int i = 0; i < pings; i++) depth[i] += 1;
}
"""


def test_several_loops_on_a_line_are_told_apart_by_column(tmp_path):
    source = opened(SHARED, tmp_path)
    with pytest.raises(RetileError) as raised:
        read_nest(source, 2)
    assert f"{source.path}:2:5" in str(raised.value) and f"{source.path}:2:51" in str(raised.value)
    assert str(read_nest(source, 2, 51).address) == f"{source.path}:2:51"


@pytest.mark.parametrize(
    ("line", "column", "word"), [(1, None, "line"), (3, None, "line"), (2, 9, "column"), (99, None, "line")]
)
def test_an_address_without_a_loop_is_an_error_with_a_remedy(line, column, word, tmp_path):
    source = opened(SHARED, tmp_path)
    with pytest.raises(RetileError) as raised:
        read_nest(source, line, column)
    assert f"no `for` starts {'on this line' if word == 'line' else 'in this column'}" in str(raised.value)
    assert f"{source.path}:2:5" in str(raised.value)


def test_a_file_without_loops_has_no_nests(tmp_path):
    assert read_nests(opened("int depth_of(int ping) { return ping; }\n", tmp_path)) == ()
