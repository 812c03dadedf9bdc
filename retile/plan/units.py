"""The pieces of a nest that a plan moves as a whole: text between the loops that it names."""

from __future__ import annotations

from collections.abc import Iterable

from ..model import Nest, Plan
from ..tree import Guard, Leaf, Loop, Node, Verbatim, children, loops_of
from ..values import dataclass
from .schedule import last_bare


@dataclass(frozen=True)
class Unit:
    """Neighbouring nodes of the original that no named loop stands in: they move as one piece of text."""

    nodes: tuple[Node, ...]
    span: tuple[int, int]
    loops: tuple[str, ...]  # ids of the named loops around it
    guards: tuple[Guard, ...]  # moved with it: conditions between the named loops
    depths: tuple[int, ...]  # how many of the loops stand around each of them
    statement: str  # id of one of its statements: all have the same places


def asked_ahead(plan: Plan, unit: Unit) -> tuple[int, ...]:
    """Of the conditions that are asked once for all they guard, from the outermost on: how many terms stand around each.

    A condition on data stays where it is, ahead of the loops inside it, where the plan has all loops around it outermost and
    no others among them: with ``i:4 i j`` that of ``for (i) if (a[i] > 0) for (j)`` is asked once for each ``i``.
    """
    if plan.aligned or plan.copied or plan.kept or plan.buffers or plan.unrolled or plan.threaded is not None \
            or any(isinstance(term.chunk, str) for term in plan.terms):
        return ()
    levels: list[int] = []
    for depth in unit.depths:
        level = last_bare(plan, unit.loops[:depth]) + 1
        if any(loop not in unit.loops[:depth] for term in plan.terms[:level] for loop, _ in term.form):
            break
        levels.append(level)
    on_data = [at for at, guard in enumerate(unit.guards[:len(levels)]) if guard.condition is None or guard.partly]
    return tuple(levels[:on_data[-1] + 1]) if on_data else ()


def moved_conditions(nest: Nest, plan: Plan) -> frozenset[str]:
    """Ids of the conditions that stand between named loops: the tree evaluates them more often than the original."""
    named = {term.loop for term in plan.terms if term.chunk is None}
    found: set[str] = set()
    _find_conditions(nest.tree, nest, named, found)
    return frozenset(found)


def _find_conditions(nodes: tuple[Node, ...], nest: Nest, named: set[str], found: set[str]) -> None:
    for node in nodes:
        if isinstance(node, Loop | Guard) and _holds_named((node,), named):
            if isinstance(node, Guard):
                found.update(leaf.statement for leaf in nodes if isinstance(leaf, Leaf) and _reads(leaf, node, nest))
            _find_conditions(node.body, nest, named, found)


def _reads(leaf: Leaf, guard: Guard, nest: Nest) -> bool:
    """True for what reads the condition of a guard, which has the same place in the text."""
    span = nest.statement(leaf.statement).span
    return (span.start, span.end) == guard.span


def _holds_named(nodes: Iterable[Node], named: set[str]) -> bool:
    return any(loop.of in named for loop in loops_of(tuple(nodes)))


def units(nest: Nest, plan: Plan) -> tuple[Unit, ...]:
    """The pieces of the nest's text that the plan moves, in text order."""
    named = {term.loop for term in plan.terms if term.chunk is None}
    apart = dict.fromkeys(plan.copied, False) | dict.fromkeys(moved_conditions(nest, plan), True)
    asked = frozenset(_split_conditions(nest.tree, named))
    return tuple(_units(nest.tree, nest, named, (), (), (), apart, asked))


def _split_conditions(nodes: tuple[Node, ...], named: set[str]) -> Iterable[tuple[int, int] | None]:
    """The extents of the conditions in one of whose branches a named loop stands: neither branch moves with its ``if``."""
    for node in nodes:
        if isinstance(node, Guard) and _holds_named((node,), named):
            yield node.span
        yield from _split_conditions(children(node), named)


def _units(nodes: tuple[Node, ...], nest: Nest, named: set[str], loops: tuple[str, ...], guards: tuple[Guard, ...],
           depths: tuple[int, ...], apart: dict[str, bool], asked: frozenset[tuple[int, int] | None]) -> Iterable[Unit]:
    """``apart``: statements that do not share a unit with their neighbours; True for those left out altogether.

    ``asked``: conditions whose branches move each under a condition of its own.
    """
    run: list[Node] = []
    for node in (*nodes, None):
        alone = isinstance(node, Leaf) and node.statement in apart
        split = isinstance(node, Guard) and node.span in asked
        if node is not None and not alone and not split and not _holds_named((node,), named):
            run.append(node)
            continue
        if run:
            yield _unit(tuple(run), nest, loops, guards, depths)
            run = []
        if isinstance(node, Leaf) and not apart[node.statement]:
            yield _unit((node,), nest, loops, guards, depths)
        elif isinstance(node, Loop):
            yield from _units(node.body, nest, named, (*loops, node.of), guards, depths, apart, asked)
        elif isinstance(node, Guard):
            yield from _units(node.body, nest, named, loops, (*guards, node), (*depths, len(loops)), apart, asked)


def _unit(nodes: tuple[Node, ...], nest: Nest, loops: tuple[str, ...], guards: tuple[Guard, ...],
          depths: tuple[int, ...]) -> Unit:
    spans = [span for node in nodes for span in _extents(node, nest)]
    ids = list(statements_in(nodes))
    return Unit(nodes, (min(start for start, _ in spans), max(end for _, end in spans)), loops, guards, depths, ids[0])


def _extents(node: Node, nest: Nest) -> Iterable[tuple[int, int]]:
    if isinstance(node, Leaf):
        span = nest.statement(node.statement).span
        yield span.start, span.end
    elif isinstance(node, Loop):
        span = nest.loop(node.of).span
        yield span.start, span.end
    elif isinstance(node, Guard):
        if node.span is not None:
            yield node.span
        for inner in node.body:
            yield from _extents(inner, nest)


def statements_in(nodes: Iterable[Node]) -> Iterable[str]:
    """Ids of all statements of some nodes, in text order."""
    for node in nodes:
        if isinstance(node, Leaf):
            yield node.statement
        else:
            yield from statements_in(children(node))
