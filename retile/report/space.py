"""What a picture of an iteration space shows: points, dependences between them, and the order of a plan.

The space is that of the deepest statement of a nest, at sizes small enough to be looked at.  Dependences are exact, so
they are evaluated at these sizes, not drawn after their direction; of those with one distance one pair, near the
middle, stands for all.  The order is that of the moments that the verdict is about (``plan.schedule``).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING

from ..affine import Affine, at_most, formula_names
from ..model import Judgement, LoopText, Nest, Plan, RetileError, Statement
from ..order import Coordinate, Cut
from ..sets import Region
from ..values import dataclass, replace
from .links import Frame, Link, links
from .sizes import choose_sizes, loop_values

if TYPE_CHECKING:
    from ..dependence import Dependences

DEEPEST = 3
_WISHED = {1: 8, 2: 8, 3: 6}  # iterations per loop, by the number of loops
_MOST = {1: 24, 2: 16, 3: 10}  # of a loop that is shown whole
_LARGEST_CHUNK = 8  # up to which the wish grows, so that a plan's chunks are seen
_NAMED_CHUNK = 3  # iterations, where a constant of the program says how many

Values = tuple[int, ...]


@dataclass(frozen=True)
class Axis:
    """A loop and the values of it that are shown."""

    loop: LoopText
    values: Values  # in the loop's own order
    whole: int  # how many it has at these sizes


@dataclass(frozen=True)
class Walk:
    """The order of a plan."""

    plan: Plan  # chunks whose size is a name of the program have a number here
    judgement: Judgement
    points: tuple[Values, ...]  # in the order of the plan
    outer: dict[Values, Values]  # per point the numbers of its chunks of the outermost level of each chunked term
    chunks: dict[Values, Values]  # the same of all levels


@dataclass(frozen=True)
class Space:
    """An iteration space at some sizes."""

    nest: Nest
    statement: Statement
    axes: tuple[Axis, ...]  # outermost first
    sizes: tuple[tuple[str, int], ...]  # as C text, of the parameters that bound the space and those that were given
    points: tuple[Values, ...]
    links: tuple[Link, ...]
    notes: tuple[str, ...]  # sentences on what is not drawn
    walk: Walk | None


def iteration_space(nest: Nest, dependences: Dependences, sizes: Mapping[str, int],
                    judgement: Judgement | None = None) -> Space:
    """The space of a nest's deepest statement, in the order of a judged plan if there is one.

    ``sizes`` are those that the user gave, by the name of a parameter or of a constant in the plan; others are chosen.
    Raises RetileError for nests too deep to be drawn, unknown names, and sizes at which there is nothing to draw.
    """
    statement = _deepest(nest)
    plan, sizes = _with_numbers(judgement.plan, nest, sizes) if judgement is not None else (None, dict(sizes))
    domain = Region.union(dependences.domains[s.id] for s in nest.statements if s.loops == statement.loops)
    given = _by_symbol(nest, sizes)
    wish = _wish(statement, plan)
    chosen = choose_sizes(nest, statement, domain, given, wish)
    inside = domain.at(chosen).only(statement.loops)
    axes = tuple(_axis(nest.loop(id), inside, wish, _MOST[len(statement.loops)]) for id in statement.loops)
    shown = inside & Region.where(*(part for axis in axes for part in (
        at_most(min(axis.values), Affine.of(axis.loop.id)), at_most(Affine.of(axis.loop.id), max(axis.values)))))
    points = tuple(shown.points(statement.loops))
    if not points:
        raise RetileError(f"{nest.address}: line {statement.id} is not executed in the first iterations of all "
                          f"its loops; choose smaller sizes with --set, or the address of an inner loop.")
    walk = _walk(nest, statement, plan, judgement, points, chosen)
    frame = Frame(statement.loops, tuple(nest.loop(id).step for id in statement.loops), shown,
                  tuple(axis.values for axis in axes), {p: at for at, p in enumerate(walk.points)} if walk else {})
    found, notes = links(nest, dependences, frame, chosen)
    named = formula_names(statement.domain) | set(given)
    said = tuple((p.text, chosen[p.symbol]) for p in nest.parameters if p.symbol in named)
    return Space(nest, statement, axes, said, points, found, (*_windows(axes), *notes, *_too_large(walk)), walk)


def _deepest(nest: Nest) -> Statement:
    """The first of the statements with the most loops around; RetileError if there are too many of them."""
    if not nest.statements:
        raise RetileError(f"{nest.address}: the nest has no statement whose iterations could be drawn.")
    statement = max(nest.statements, key=lambda s: len(s.loops))
    if len(statement.loops) <= DEEPEST:
        return statement
    inner = nest.loop(statement.loops[-DEEPEST])
    raise RetileError(f"{nest.address}: line {statement.id} stands in {len(statement.loops)} loops of this nest; "
                      f"--space draws one, two or three. Give the address of an inner loop, such as "
                      f"{nest.address.file}:{inner.span.line} (loop {inner.id}).")


def _with_numbers(plan: Plan, nest: Nest, sizes: Mapping[str, int]) -> tuple[Plan, dict[str, int]]:
    """The plan with a number for every chunk that has a name, and the sizes without these names."""
    from ..plan import placed

    names = {term.chunk for term in plan.terms if isinstance(term.chunk, str)}
    for name in names:
        if sizes.get(name, 1) < 1:
            raise RetileError(f"--set {name}={sizes[name]}: a chunk has at least one iteration.")
    terms = tuple(replace(term, chunk=sizes.get(term.chunk, _NAMED_CHUNK)) if isinstance(term.chunk, str) else term
                  for term in plan.terms)
    parameters = {text for parameter in nest.parameters for text in (parameter.symbol, parameter.text)}
    return placed(replace(plan, terms=terms, places=()), nest), \
        {name: value for name, value in sizes.items() if name not in names or name in parameters}


def _by_symbol(nest: Nest, sizes: Mapping[str, int]) -> dict[str, int]:
    symbols = {name: p.symbol for p in nest.parameters for name in (p.symbol, p.text)}
    strange = [name for name in sizes if name not in symbols]
    if strange:
        known = ", ".join(p.text for p in nest.parameters) or "none"
        raise RetileError(f"{nest.address}: the nest has no size {', '.join(strange)}; it has {known}.")
    return {symbols[name]: value for name, value in sizes.items()}


def _wish(statement: Statement, plan: Plan | None) -> int:
    """How many iterations a loop should have: enough for a second chunk of the plan, which need not be full."""
    chunks = [term.chunk for term in plan.terms if isinstance(term.chunk, int)] if plan is not None else []
    return max([_WISHED[len(statement.loops)], *(chunk + 2 for chunk in chunks if chunk <= _LARGEST_CHUNK)])


def _axis(loop: LoopText, inside: Region, wish: int, most: int) -> Axis:
    """The values of a loop in a space; only the first ones if there are more than ``most``."""
    whole = loop_values(loop, inside)
    return Axis(loop, tuple(whole[:wish] if len(whole) > most else whole), len(whole))


# ---------------------------------------------------------------- the plan's order

def _walk(nest: Nest, statement: Statement, plan: Plan | None, judgement: Judgement | None,
          points: tuple[Values, ...], sizes: Mapping[str, int]) -> Walk | None:
    """The points in the order of a plan, and among those that the plan leaves together in the original order."""
    if plan is None or judgement is None:
        return None
    from ..dependence import original_times
    from ..plan.schedule import moment, moments

    time = (*moments(plan, statement.id), *original_times(nest)[statement.id])
    terms = [term for term in plan.terms if term.chunk is not None and all(x in statement.loops for x, _ in term.form)]
    levels = [moment(term, nest) for term in terms]
    first = [at for at, term in enumerate(terms) if term.form not in [t.form for t in terms[:at]]]
    values = {point: {**sizes, **dict(zip(statement.loops, point, strict=True))} for point in points}
    chunks = {point: tuple(level.evaluate(values[point]) for level in levels) for point in points}
    outer = {point: tuple(chunks[point][at] for at in first) for point in points}
    ordered = sorted(points, key=lambda point: _evaluated(time, values[point]))
    return Walk(plan, judgement, tuple(ordered), outer, chunks)


def _evaluated(time: Sequence[Coordinate], values: Mapping[str, int]) -> Values:
    return tuple(c if isinstance(c, int) else (c.form if isinstance(c, Cut) else c).evaluate(values) for c in time)


# ---------------------------------------------------------------- what is not drawn

def _windows(axes: Iterable[Axis]) -> list[str]:
    return [f"Of {axis.loop.id} the first {len(axis.values)} of {axis.whole} iterations are drawn."
            for axis in axes if len(axis.values) < axis.whole]


def _too_large(walk: Walk | None) -> list[str]:
    """A word on chunks without a border in the picture."""
    if walk is None:
        return []
    chunked = [term for term in walk.plan.terms if term.chunk is not None]
    if not chunked or len(set(walk.chunks.values())) > 1:
        return []
    return ["All of this lies in one chunk: smaller chunks, or larger sizes with --set, show where the plan cuts."]
