"""Nests made by hand, without any C text, for tests of the rooms that know none."""

from __future__ import annotations

from dataclasses import replace

from retile.affine import Affine, AllOf, Bound, Formula, bound_names
from retile.model import (Access, Address, CType, LoopText, Nest, Parameter, ScalarClass, Span, Statement, Storage,
                          StorageKind)
from retile.tree import Leaf, Loop, Node

INT = CType("int", 32, True)
DOUBLE = CType("double", 64, True, True)
A = Affine.of


def span(start: int, end: int, line: int) -> Span:
    return Span(start, end, line, 1)


Accesses = list[tuple[str, bool, tuple]]
Step = tuple[str, Bound, Bound, int]


def chain(loops: list[Step], statements: list[Accesses], parameters: str = "n") -> Nest:
    """A perfect nest: (id, first, last, step) from the outside in, and per statement its (array, write, subscripts)."""
    body: list = list(statements)
    for loop in reversed(loops):
        body = [(loop, body)]
    return nest(body[0], parameters)


def nest(outermost: tuple[Step, list], parameters: str = "n", scalars: dict[str, tuple[str, ...]] | None = None) -> Nest:
    """A nest of (loop, body) pairs and statements; ``scalars``: private ones with the loops they are private to."""
    made = _Maker()
    tree = made.node(outermost, (), ())
    arrays = dict.fromkeys(access.storage for statement in made.statements for access in statement.accesses)
    private = scalars or {}
    storages = tuple(
        Storage(a, a, StorageKind.SCALAR, DOUBLE, 8, (), scope="block", scalar=ScalarClass.PRIVATE, private_to=private[a],
                live_after=False) if a in private else Storage(a, a, StorageKind.ARRAY, DOUBLE, 8, ()) for a in arrays)
    return Nest(Address("survey.c", 10), "survey", span(0, 1000, 10), (tree,), tuple(made.loops), tuple(made.statements),
                tuple(Parameter(p, p, INT, "argument") for p in parameters.split()), storages, (), (), frozenset())


class _Maker:
    """Gives every node a place in a text that does not exist: one line and ten characters per statement or header."""

    def __init__(self) -> None:
        self.line = 20
        self.loops: list[LoopText] = []
        self.statements: list[Statement] = []

    def node(self, what: tuple | list, loops: tuple[str, ...], domain: tuple[Formula, ...]) -> Node:
        here = span(10 * self.line, 10 * self.line + 9, self.line)
        self.line += 1
        if isinstance(what, list):
            id = str(here.line)
            accesses = tuple(Access(a, write, tuple(A(s) for s in subscripts), True, here) for a, write, subscripts in what)
            self.statements.append(Statement(id, id, here, loops, AllOf(domain), accesses))
            return Leaf(id, tuple((loop, A(loop)) for loop in loops))
        (id, first, last, step), body = what
        lower, upper = (first, last) if step > 0 else (last, first)
        loop = Loop(id, lower, upper, step, first if isinstance(first, Affine) else A(0), (), id)
        text = LoopText(id, id.split("@")[0], INT, True, first, last, step, here, here, here, "", "", "<", loops, False,
                        not bound_names(first) & set(loops))
        at = len(self.loops)
        self.loops.append(text)
        inner = tuple(self.node(part, (*loops, id), (*domain, loop.constraints())) for part in body)
        whole = span(here.start, 10 * self.line, here.line)
        self.loops[at] = replace(text, span=whole, body=span(here.end, whole.end, here.line))
        return replace(loop, body=inner)


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

# for k { for i = k+1 .. : a[i][k] /= a[k][k];  for i, j = k+1 .. : a[i][j] -= a[i][k] * a[k][j]; }
FACTORISATION = nest((("k", ZERO, n - 1, 1), [
    (("i@21", k + 1, n - 1, 1), [[("a", True, (A("i@21"), k)), ("a", False, (A("i@21"), k)), ("a", False, (k, k))]]),
    (("i@23", k + 1, n - 1, 1), [
        (("j", k + 1, n - 1, 1), [[("a", True, (A("i@23"), j)), ("a", False, (A("i@23"), j)), ("a", False, (A("i@23"), k)),
                                   ("a", False, (k, j))]])])]))
# for i, k { t = a[i][k]; for j: c[i][j] += t * b[k][j]; }
SCALED = nest((("i", ZERO, n - 1, 1), [(("k", ZERO, n - 1, 1), [
    [("t", True, ()), ("a", False, (i, k))],
    (("j", ZERO, n - 1, 1), [[("c", True, (i, j)), ("c", False, (i, j)), ("t", False, ()), ("b", False, (k, j))]])])]),
    scalars={"t": ("i", "k")})
# for i, j { c[i][j] = 0; for k: c[i][j] += a[i][k] * b[k][j]; }
CLEARED = nest((("i", ZERO, n - 1, 1), [(("j", ZERO, n - 1, 1), [
    [("c", True, (i, j))],
    (("k", ZERO, n - 1, 1), [[("c", True, (i, j)), ("c", False, (i, j)), ("a", False, (i, k)), ("b", False, (k, j))]])])]))
# for i, j { s = 0; for k: s += a[i][k] * b[j][k]; c[i][j] = s; }
SUMMED = nest((("i", ZERO, n - 1, 1), [(("j", ZERO, n - 1, 1), [
    [("s", True, ())],
    (("k", ZERO, n - 1, 1), [[("s", True, ()), ("s", False, ()), ("a", False, (i, k)), ("b", False, (j, k))]]),
    [("c", True, (i, j)), ("s", False, ())]])]), scalars={"s": ("i", "j")})
