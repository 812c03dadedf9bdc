"""Expressions as text: what is written is what was meant, by the parser's own word."""

from __future__ import annotations

from random import Random

import pytest
from pycparser import c_ast, c_parser
from retile.nest.written import c_text


def parsed(text: str) -> c_ast.Node:
    unit = c_parser.CParser().parse(f"void survey(void) {{ (void)0, ({text}); }}")
    return unit.ext[0].body.block_items[0].exprs[1]


def same(one: c_ast.Node, other: c_ast.Node) -> bool:
    values = [(getattr(one, name), getattr(other, name)) for name in one.attr_names]
    below = [child for _, child in one.children()], [child for _, child in other.children()]
    return type(one) is type(other) and all(a == b for a, b in values) and len(below[0]) == len(below[1]) and \
        all(map(same, *below))


def expression(random: Random, depth: int) -> str:
    if depth == 0 or random.random() < 0.15:
        return random.choice(["n", "m", "3", "g->n", "t[i]", "p->of[2].x", "f(n)"])
    a, b, c = (expression(random, depth - 1) for _ in range(3))
    return random.choice([
        f"({a}) {random.choice(['+', '-', '*', '/', '%', '<<', '>>', '&', '|', '^', '<', '<=', '==', '!=', '&&', '||'])} ({b})",
        f"({a}) ? ({b}) : ({c})", f"({a}) ? ({b}) : ({c})", f"-({a})", f"!({a})", f"~({a})", f"(int)({a})", f"t[{a}]", f"f({a}, {b})",
        f"({a}, {b})"])


@pytest.mark.parametrize("seed", range(20))
def test_a_written_expression_is_parsed_as_the_same_tree(seed):
    random = Random(seed)
    for _ in range(40):
        node = parsed(expression(random, 4))
        assert same(parsed(c_text(node)), node), c_text(node)


@pytest.mark.parametrize("text", ["n < 3 ? n : 3", "(n < m ? n : m) + 2", "a + b * c", "(a + b) * c", "a - (b - c)", "n < 3 ? n : m < 4 ? m : 4",
                                  "(n < 3 ? n : m) < 4 ? 1 : 2", "-(a + b)", "(int) n"])
def test_only_needed_parentheses_are_written(text):
    assert c_text(parsed(text)) == text


def test_the_comparison_tells_trees_apart():
    assert not same(parsed("(a + b) * c"), parsed("a + b * c"))
