"""The printed nest, read again, executes what the tree that was judged executes, in the same order."""

from __future__ import annotations

from pathlib import Path

import pytest
from rewriting import case_of, without_remark
from test_rewrite_runs import BAND, RECTANGLE, TRIANGLE, UNDER, nest
from walk import runs

from retile.model import Nest
from retile.nest import read_nest
from retile.source import open_source
from retile.tree import Node

SIZES = (0, 1, 4, 7, 8, 9, 17)


def executed(tree: tuple[Node, ...], of: Nest, n: int, m: int) -> list[tuple[int, int]]:
    """The row and column of z of every instance that writes there, in order."""
    cells = {statement.id: access.subscripts for statement in of.statements for access in statement.accesses
             if access.write and access.storage == "z"}
    found = []
    for statement, instance in runs(tree, {"n": n, "m": m}):
        subscripts = cells.get(statement)
        if subscripts is not None:
            values = {**dict(instance), "n": n, "m": m}
            found.append((subscripts[0].evaluate(values), subscripts[1].evaluate(values)))
    return found


@pytest.mark.parametrize(("type", "loops", "plan"), [
    *(("int", RECTANGLE, plan) for plan in ("j i", "j:8 i j", "i:4 j:8 i j", "i:12 i:4 j i", "(i+j):8 i j", "(i+j) i")),
    *(("unsigned", RECTANGLE, plan) for plan in ("j:8 i j", "i:4 j:8 i j")),
    *((type, TRIANGLE, plan) for type in ("int", "unsigned char") for plan in ("j i", "j:8 i j", "i:4 j:8 i j")),
    *(("int", UNDER, plan) for plan in ("j i", "i:4 j:8 i j")),
    *(("int", BAND, plan) for plan in ("j i", "j:8 i j")),
    *(("int", ("for (T i = n - 1; i >= 0; i--)", "for (T j = m - 1; j >= 0; j -= 2)"), plan)
      for plan in ("j i", "i:4 j:8 i j", "j:3 i j")),
    *(("int", ("for (T i = 0; i < n; i += 3)", "for (T j = 1; j <= m; j += 2)"), plan)
      for plan in ("j i", "i:4 j:8 i j", "j:3 i j")),
], ids=str)
def test_what_is_printed_is_what_was_judged(type: str, loops: tuple[str, str], plan: str, tmp_path: Path) -> None:
    case = case_of(tmp_path, nest(type, *loops))
    for remainder in ("clamp", "peel"):
        variant = case.variant(plan, remainder=remainder, trust=True)
        path = tmp_path / "variant.c"
        path.write_text(variant.text)
        above = variant.text[:variant.text.index(without_remark(variant.nest_text).split("\n")[0])]
        above += variant.text[len(above):].partition("for")[0]  # behind an if that asks whether the loop would end
        found = read_nest(open_source(str(path)), above.count("\n") + 1)
        assert found.nest is not None, found.refusals
        for n in SIZES:
            for m in SIZES:
                assert executed(found.nest.tree, found.nest, n, m) == executed(variant.tree, case.nest, n, m)
