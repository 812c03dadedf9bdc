"""Plans: their text, their meaning, the verdict about them and the trees built from them."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hand_nests import BACKWARD, CLEARED, DOWN, DRIFT, FACTORISATION, PRODUCT, SCALED, SUMMED, TRIANGLE
from walk import Run, runs

from retile.dependence import analyse
from retile.model import Judgement, Nest, RetileError, Verdict
from retile.plan import build_tree, copied_scalars, is_legal, judge, nearest_legal, parse_plan, placed
from retile.questions import order_kept, same_instances, values_arrive
from retile.tree import Loop, Node


@pytest.mark.parametrize("text, start, length, part", [
    ("t q", 2, 1, "no loop 'q'"),
    ("i", 0, 1, "'t' stands around"),
    ("t:4 i t:2", 0, 3, "'t' has no bare term"),
    ("i:0 t i", 2, 1, "covers nothing"),
    ("i:-3 t i", 2, 2, "not a chunk"),
    ("i:8x t i", 2, 2, "not a chunk"),
    ("t i i:4", 4, 3, "inside its single iterations"),
    ("t:4 t:8 t i", 4, 3, "does not fall"),
    ("t:8 t:8 t i", 4, 3, "does not fall"),
    ("t i t", 4, 1, "stands twice"),
    ("(t+i) t i", 8, 1, "3 bare terms for 2 loops"),
    ("(2*t+i) i", 0, 9, "do not determine"),
    ("(t+i)", 0, 5, "do not determine"),
    ("(t+):4 t i", 2, 1, "not a sum"),
    ("(t-t):4 t i", 1, 3, "always 0"),
    ("t i; unroll", 5, 6, "not an option"),
    ("t i; place 22", 5, 8, "not a place"),
    ("t i; place 99 at t = 1", 11, 2, "no statement '99'"),
    ("t i; place 22 at i = t", 17, 1, "'i' is around it"),
    ("t i; place 22 at q = t", 17, 1, "'q' is not a loop"),
    ("t i; remainder peel, remainder clamp", 21, 15, "stands twice"),
    ("", 0, 1, "names no loop"),
])
def test_wrong_plan_is_marked(text: str, start: int, length: int, part: str) -> None:
    with pytest.raises(RetileError) as caught:
        parse_plan(text, DRIFT)
    message = str(caught.value).splitlines()
    assert part in message[0]
    assert message[1] == f"    {text}"
    assert message[2] == "    " + " " * start + "^" * length
    assert len(message) == 4


def test_plan_is_read() -> None:
    plan = parse_plan("  t:4   (2*t+i):8 t i ; remainder peel ", DRIFT)
    assert plan.text == "t:4 (2*t+i):8 t i; remainder peel"
    assert [(term.form, term.chunk) for term in plan.terms] == [
        ((("t", 1),), 4), ((("t", 2), ("i", 1)), 8), ((("t", 1),), None), ((("i", 1),), None)]
    assert plan.options == (("remainder", "peel"),)


# What a moment is, written down again with Python integers: p = (x - first) / step, floor(p / S); where first depends
# on another loop x itself (-x when counting down) and floor of it over S * |step|.
def moment(nest: Nest, plan_text: str, run: Run, sizes: dict[str, int]) -> tuple[int, ...]:
    values = {**sizes, **dict(run[1])}
    vector = []
    for term in parse_plan(plan_text, nest).terms:
        loops = [nest.loop(id) for id, _ in term.form]
        if len(loops) == 1 and not loops[0].independent:
            placed_by, unit = values[loops[0].id] * (1 if loops[0].step > 0 else -1), abs(loops[0].step)
        else:
            placed_by, unit = 0, 1
            for loop, (_, factor) in zip(loops, term.form, strict=True):
                number = (values[loop.id] - loop.first.evaluate(values)) // loop.step
                placed_by += factor * (values[loop.id] if len(loops) > 1 and loop.step == 1 else number)
        chunk = sizes[term.chunk] if isinstance(term.chunk, str) else term.chunk
        vector.append(placed_by if chunk is None else placed_by // (chunk * unit))
    return tuple(vector)


PLANS = [
    (PRODUCT, ["i j k", "k:4 j:3 i k j", "i:6 j:4 k:2 i:3 j:2 k j i", "k:5 i:5 k:2 j k i", "k:K_CHUNK i:6 j:J_CHUNK i k j"]),
    (BACKWARD, ["i j", "i:3 j:3 i j", "j i", "(i+j):3 i j", "(2*i+j):5 j:2 i j", "(i+j) i", "i (i+j)", "(-i) j"]),
    (TRIANGLE, ["j i", "i:3 j:2 i j", "j:3 i j", "j:5 i:3 j:2 i j", "(i+j):4 j i", "j:J_CHUNK i j"]),
    (DOWN, ["j i", "i:2 j:3 i j", "j:2 i:2 j i", "i:I_CHUNK j:J_CHUNK i j"]),
    (DRIFT, ["i:3 t i", "(i+t):4 t i", "t:2 (i+t):3 t i", "(2*t+i):4 i t", "t (t+i)", "(2*t+i) t", "(t+i):4 (2*t+i) t", "(t+i):I_CHUNK t i", "i:I_CHUNK t i"]),
]


@pytest.mark.parametrize("nest, text", [(nest, text) for nest, texts in PLANS for text in texts])
def test_tree_runs_the_instances_in_the_order_of_the_plan(nest: Nest, text: str) -> None:
    plan = placed(parse_plan(text, nest), nest)
    tree = build_tree(nest, plan)
    for size in (0, 1, 2, 3, 5, 7, 8):
        sizes = {p.symbol: size + at for at, p in enumerate(nest.parameters)}
        sizes |= {"I_CHUNK": 2, "J_CHUNK": 3, "K_CHUNK": 4}
        original = list(runs(nest.tree, sizes))
        got = list(runs(tree, sizes))
        assert sorted(got) == sorted(original)
        assert got == sorted(got, key=lambda run: moment(nest, text, run, sizes))


@pytest.mark.parametrize("nest, text", [(nest, text) for nest, texts in PLANS for text in texts])
def test_verdict_and_questions_agree(nest: Nest, text: str) -> None:
    dependences = analyse(nest)
    judgement = judge(nest, dependences, parse_plan(text, nest))
    tree = build_tree(nest, judgement.plan)
    assert same_instances(tree, nest, dependences.context) == []
    assert bool(order_kept(tree, dependences)) == (judgement.verdict is Verdict.ILLEGAL)
    assert is_legal(nest, dependences, judgement.plan) == (judgement.verdict is Verdict.LEGAL)


IMPERFECT = [
    (CLEARED, ["k:3 i j k", "i:2 j:3 k:4 i k j", "k i j", "j i k"]),
    (SCALED, ["j:3 i k j", "k:2 j:3 i k j", "j:2 k i j", "j i k", "k:K_CHUNK i:2 k i j"]),
    (FACTORISATION, ["j:3 k i@21 i@23 j", "k i@21 j i@23", "k:2 j:3 k i@21 i@23 j", "j k i@21 i@23",
                     "j:J_CHUNK k i@21 i@23 j", "i@23 k i@21 j", "i@23:2 k i@21 i@23 j"]),
    (SUMMED, ["i:2 j:3 k:2 i j k", "i:3 j:2 k:2 k i j", "i j:2 k:2 j k", "i:3 j:2 j k i"]),
]


@pytest.mark.parametrize("nest, text", [(nest, text) for nest, texts in IMPERFECT for text in texts])
def test_imperfect_nest_runs_every_instance_with_its_dependences_kept(nest: Nest, text: str) -> None:
    dependences = analyse(nest)
    judgement = judge(nest, dependences, parse_plan(text, nest))
    assert judgement.verdict is Verdict.LEGAL
    plan = judgement.plan
    tree = build_tree(nest, plan)
    scalars = copied_scalars(nest, plan)
    assert same_instances(tree, nest, dependences.context, plan.copied) == []
    assert order_kept(tree, dependences, [edge for edge in dependences.edges if edge.storage not in scalars]) == []
    assert values_arrive(tree, nest, dependences.context, plan.copied) == []
    for size in (0, 1, 2, 3, 5, 7):
        sizes = {"n": size, "J_CHUNK": 2, "K_CHUNK": 3}
        assert final_values(nest, list(runs(tree, sizes))) == final_values(nest, list(runs(nest.tree, sizes)))


def final_values(nest: Nest, order: list[Run]) -> dict[tuple, object]:
    """What the cells hold after a run, each value named by how it was computed."""
    memory: dict[tuple, object] = {}
    for id, iterators in order:
        values, result = dict(iterators), []
        if id in ("store", "fetch"):
            scalar, cell = (iterators[0][0],), ("kept", *iterators)
            memory[cell if id == "store" else scalar] = memory.get(scalar if id == "store" else cell)
            continue
        for access in nest.statement(id).accesses:
            cell = (access.storage, *(subscript.evaluate(values) for subscript in access.subscripts or ()))
            if not access.write:
                result.append(memory.get(cell, cell))
        for access in nest.statement(id).accesses:
            if access.write:
                cell = (access.storage, *(subscript.evaluate(values) for subscript in access.subscripts or ()))
                memory[cell] = hash((id, *result))
    return {cell: value for cell, value in memory.items() if cell[0] in "abc"}


def test_pivot_statement_waits_for_its_column() -> None:
    plan = judge(FACTORISATION, analyse(FACTORISATION), parse_plan("j:3 k i@21 i@23 j", FACTORISATION)).plan
    assert [(a.statement, a.loop, str(a.value)) for a in plan.aligned] == [("22", "j", "k")]


@pytest.mark.parametrize("text", ["k:2 i j k", "i:2 k:2 i j k", "i:20000 j:30000 k:2 i j k"])
def test_no_array_keeps_values_without_bound(text: str) -> None:
    judgement = judge(SUMMED, analyse(SUMMED), parse_plan(text, SUMMED))
    assert (judgement.verdict, judgement.plan.kept) == (Verdict.ILLEGAL, ())


def test_a_stated_place_is_taken_and_judged() -> None:
    dependences = analyse(FACTORISATION)

    def judged(place: str) -> Judgement:
        return judge(FACTORISATION, dependences, parse_plan(f"j:3 k i@21 i@23 j; place 22 {place}", FACTORISATION))

    good = judged("at j = k")
    assert good.verdict is Verdict.LEGAL
    assert [(a.statement, a.loop, str(a.value), a.chunks_only) for a in good.plan.aligned] == [("22", "j", "k", False)]
    assert judged("with j = k").verdict is Verdict.LEGAL
    assert judged("at j = 2*k - n + 7").verdict is Verdict.ILLEGAL  # too early at some sizes
    assert judged("at j = n + 5").verdict is Verdict.ILLEGAL  # too late
    with pytest.raises(RetileError, match="'m' is not known"):
        judged("at j = m")


def test_a_value_that_does_not_arrive_is_noticed() -> None:
    dependences = analyse(SCALED)
    plan = judge(SCALED, dependences, parse_plan("j:3 i k j", SCALED)).plan
    assert plan.copied == ("22",)
    tree = build_tree(SCALED, plan)

    def moved(nodes: tuple[Node, ...]) -> tuple[Node, ...]:
        """The tree with the statements of every list in reverse."""
        return tuple(replace(node, body=moved(node.body)) if isinstance(node, Loop) else node for node in nodes[::-1])

    assert values_arrive(moved(tree), SCALED, dependences.context, plan.copied)


def test_witness_is_the_smallest() -> None:
    judgement = judge(BACKWARD, analyse(BACKWARD), parse_plan("j i", BACKWARD))
    assert judgement.verdict is Verdict.ILLEGAL
    (violation,) = judgement.violations
    assert (violation.kind, violation.array, violation.parameters, violation.cell) == ("flow", "a", (("n", 3),), (1, 1))
    assert violation.source.iterators == (("i", 1), ("j", 1))
    assert violation.target.iterators == (("i", 2), ("j", 0))


def test_witness_names_a_chunk_that_shows_it() -> None:
    judgement = judge(DRIFT, analyse(DRIFT), parse_plan("t:T_CHUNK i:I_CHUNK t i", DRIFT))
    for violation in judgement.violations:
        sizes = dict(violation.parameters)
        plan = f"t:{sizes['T_CHUNK']} i:{sizes['I_CHUNK']} t i"
        assert sizes["I_CHUNK"] == 1  # apart in i
        assert sizes["T_CHUNK"] > 1  # together in t
        before, after = (moment(DRIFT, plan, ("20", run.iterators), sizes) for run in (violation.target, violation.source))
        assert before < after


@pytest.mark.parametrize("nest, text, instead", [
    (DRIFT, "i:8 t i", "(t+i):8 t i"),  # distance (1, -1) needs a skew of one: the smallest that is legal
    (DRIFT, "t:4 i:8 t i", "t:4 (t+i):8 t i"),
    (BACKWARD, "i:8 j:8 i j", "i:8 (i+j):8 i j"),
    (BACKWARD, "j i", None),
    (DRIFT, "i:8 t i; unroll i", None),  # skewed, no chunk of i would be left to write out
    (DRIFT, "(t+i):2 i t:2 t", "(t+i):2 t i"),  # not t t:2 i, whose chunks stand inside single iterations
])
def test_nearest_legal_plan(nest: Nest, text: str, instead: str | None) -> None:
    dependences = analyse(nest)
    found = nearest_legal(nest, dependences, parse_plan(text, nest))
    assert found == instead
    if found:
        assert judge(nest, dependences, parse_plan(found, nest)).verdict is Verdict.LEGAL


def test_chunks_that_bound_what_waits_are_proposed() -> None:
    dependences = analyse(SUMMED)
    assert nearest_legal(SUMMED, dependences, parse_plan("k:64 i j k", SUMMED)) == "i:32 j:32 k:64 i j k"
    assert nearest_legal(SUMMED, dependences, parse_plan("k:64 j:16 i j k", SUMMED)) == "i:32 j:16 k:64 i j k"
