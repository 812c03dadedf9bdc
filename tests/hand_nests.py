"""Nests made by hand, without any C text, for tests of the rooms that know none."""

from __future__ import annotations

from retile.affine import Affine, AllOf, Bound, bound_names
from retile.model import (Access, Address, CType, LoopText, Nest, Parameter, Span, Statement, Storage, StorageKind)
from retile.tree import Leaf, Loop, Node

INT = CType("int", 32, True)
DOUBLE = CType("double", 64, True, True)
A = Affine.of


def span(start: int, end: int, line: int) -> Span:
    return Span(start, end, line, 1)


def chain(loops: list[tuple[str, Bound, Bound, int]], statements: list[list[tuple[str, bool, tuple]]],
          parameters: str = "n", first_line: int = 20) -> Nest:
    """A perfect nest: (id, first, last, step) from the outside in, and per statement its (array, write, subscripts)."""
    ids = tuple(loop[0] for loop in loops)
    texts = tuple(_loop_text(loops, at) for at in range(len(loops)))
    lines = [str(first_line + at) for at in range(len(statements))]
    body: tuple[Node, ...] = tuple(Leaf(line, tuple((id, A(id)) for id in ids)) for line in lines)
    domain = []
    for id, first, last, step in reversed(loops):
        lower, upper = (first, last) if step > 0 else (last, first)
        loop = Loop(id, lower, upper, step, first if isinstance(first, Affine) else A(0), body, id)
        domain.append(loop.constraints())
        body = (loop,)
    made = tuple(
        Statement(line, line, span(500 + at, 501 + at, first_line + at), ids, AllOf(tuple(domain)),
                  tuple(Access(array, write, tuple(A(s) for s in subscripts), True, span(0, 1, 1))
                        for array, write, subscripts in accesses))
        for at, (line, accesses) in enumerate(zip(lines, statements, strict=True)))
    arrays = dict.fromkeys(array for accesses in statements for array, _, _ in accesses)
    storages = tuple(Storage(a, a, StorageKind.ARRAY, DOUBLE, 8, ()) for a in arrays)
    return Nest(Address("survey.c", 10), "survey", span(0, 1000, 10), body, texts, made,
                tuple(Parameter(p, p, INT, "argument") for p in parameters.split()), storages, (), (), frozenset())


def _loop_text(loops: list[tuple[str, Bound, Bound, int]], at: int) -> LoopText:
    id, first, last, step = loops[at]
    outer = tuple(loop[0] for loop in loops[:at])
    here = span(10 * at, 1000 - at, 10 + at)
    return LoopText(id, id, INT, True, first, last, step, here, span(10 * at, 10 * at + 5, 10 + at),
                    span(10 * at + 5, 1000 - at, 10 + at), "", "", "<", outer, False,
                    not (bound_names(first) | bound_names(last)) & set(outer))


i, j, k, m, n, t = (A(name) for name in "ijkmnt")
ZERO = A(0)

PRODUCT = chain([("i", ZERO, n - 1, 1), ("j", ZERO, n - 1, 1), ("k", ZERO, n - 1, 1)],
                [[("c", True, (i, j)), ("c", False, (i, j)), ("a", False, (i, k)), ("b", False, (k, j))]])
# a[i][j] = f(a[i-1][j+1]): distance (1, -1).
BACKWARD = chain([("i", A(1), n - 1, 1), ("j", ZERO, n - 2, 1)],
                 [[("a", True, (i, j)), ("a", False, (i - 1, j + 1))]])
TRIANGLE = chain([("i", ZERO, n - 1, 1), ("j", i, n - 1, 1)], [[("a", True, (i, j)), ("a", False, (i, j))]])
DOWN = chain([("i", n - 1, ZERO, -3), ("j", i, n - 1, 2)], [[("a", True, (i, j)), ("a", False, (i, j))]])
DRIFT = chain([("t", ZERO, m - 1, 1), ("i", A(1), n - 2, 1)],
              [[("a", True, (i,)), ("a", False, (i - 1,)), ("a", False, (i,)), ("a", False, (i + 1,))]], "n m")
