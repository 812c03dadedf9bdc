"""Many choices between sizes: each is a fact of several cases, and the cases must not multiply without end."""

from __future__ import annotations

import time

import pytest
from nest_execution import opened
from retile.nest import read_nest
from walk import holds

CHOICES = ("n < 3 ? n : 3", "m < 9 ? m : 9", "w < 3 ? w : 3", "q < 7 ? q : 7", "n > 4 ? n : 4", "m < w ? m : w")


def text_of(type_: str) -> str:
    first, second, third, fourth, fifth, sixth = CHOICES
    return (f"void survey({type_} n, {type_} m, {type_} w, {type_} q, double (*restrict depth)[64][64]) {{\n"
            f"    for ({type_} y = m - 1; y-- > w;)\n"
            f"        for ({type_} t = ({first}) + y; t < ({second}) - 1; t++)\n"
            f"            for ({type_} i = ({third}); i < ({fourth}) + 2; i++)\n"
            f"                for ({type_} k = ({second}) - 1; k > 1 + ({fifth}); k -= 3)\n"
            f"                    depth[t][i][k] += depth[t + 1][i][k - ({sixth})];\n}}\n")


@pytest.mark.parametrize("type_", ["int", "unsigned short", "size_t"])
@pytest.mark.parametrize("line", [2, 3])
def test_many_choices_are_read_in_bounded_time(type_, line, tmp_path):
    source = opened("#include <stddef.h>\n" + text_of(type_), tmp_path)
    start = time.process_time()
    found = read_nest(source, line + 1)
    assert found.nest is not None, found.refusals
    assert time.process_time() - start < 8  # seconds of this process; a second or two where nothing else runs
    cases = [fact for fact in found.nest.facts if len(str(fact)) > 20_000]
    assert not cases


def test_what_a_choice_inside_a_sum_is_is_known(tmp_path):
    text = ("void survey(int n, double *restrict depth) {\n    for (int i = 0; i < 4; i++)\n"
            "        depth[i + (n < 5 ? n : 5)] = 1;\n}\n")
    nest = read_nest(opened(text, tmp_path), 2).nest
    choice = next(parameter.symbol for parameter in nest.parameters if "?" in parameter.symbol)
    for n in range(-2, 9):
        known = [value for value in range(-3, 10) if all(holds(fact, {"n": n, choice: value}) for fact in nest.facts)]
        assert known == [min(n, 5)]
