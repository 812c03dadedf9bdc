"""A legal plan near one that is not: first with the smallest skew, then in another order, then with fewer chunks."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from itertools import combinations, islice, permutations, product

from ..dependence import Dependences
from ..model import Nest, Plan, RetileError, ScalarClass, Term
from ..values import replace
from .grammar import parse_plan, term_text
from .schedule import stays_whole
from .verdict import is_legal

# How many plans of each kind are tried: an answer must feel instant, and far-fetched plans help nobody.
_MOST_SKEWED = 20
_MOST_ORDERS = 12
_MOST_FEWER = 24
_LARGEST_SKEW = 3
# For the first few of them other places of statements are looked for too, with so many trials each.
_SEARCHED = 3
# A plan costs about a millisecond for each dependence that it is held against: with many of those, fewer plans are tried.
_MOST_EDGES = 500
_TRIALS = 30
# Iterations per loop of which each has a value of a scalar waiting: two loops of them fill half a small first cache.
_WAITING = 32


def nearest_legal(nest: Nest, dependences: Dependences, plan: Plan) -> str | None:
    """The text of a legal plan near an illegal one, options kept; None if none was found.

    Rectangular chunks of a loop that carries dependences backwards get skewed by the loops outside it, with the
    smallest factors that do (Wolf & Lam, "A data locality optimizing algorithm", 1991).
    """
    original = tuple(loop.id for loop in nest.loops)
    candidates = tuple(_distinct(plan, (*_bounded(nest, plan), *_candidates(plan.terms, original)), original))
    most = max(_SEARCHED, _MOST_EDGES // max(1, len(dependences.edges)))
    for trials, some in ((0, candidates[:most]), (_TRIALS, candidates[:_SEARCHED])):
        for text in some:
            proposal = _parsed(text + plan.text[len(plan.order_text):], nest)
            if proposal is not None and is_legal(nest, dependences, proposal, trials):
                return proposal.text
    return None


def _parsed(text: str, nest: Nest) -> Plan | None:
    """The plan of a text; None if it is none, such as one with chunks inside single iterations, or without a chunk that an
    option speaks of."""
    try:
        return parse_plan(text, nest)
    except RetileError:
        return None


def _distinct(plan: Plan, candidates: Iterable[tuple[Term, ...]], original: tuple[str, ...]) \
        -> Iterator[str]:
    """The texts of the candidates, each once, without the plan itself and the original order."""
    seen = {plan.order_text}
    for terms in candidates:
        text = " ".join(term_text(term) for term in terms)
        bare = [term.loop for term in terms if term.chunk is None]
        changed = len(bare) < len(terms) or bare != [id for id in original if id in bare]
        if text in seen or not changed:
            continue
        seen.add(text)
        yield text


def _bounded(nest: Nest, plan: Plan) -> Iterator[tuple[Term, ...]]:
    """The terms with chunks in front that bound how many values of the interrupted scalars wait at a time."""
    loops = dict.fromkeys(loop for storage in nest.storages
                          if storage.scalar is ScalarClass.PRIVATE and not stays_whole(plan, storage, nest)
                          for loop in storage.private_to)
    own = {loop: next((term for term in plan.terms if term.chunk is not None and term.form == ((loop, 1),)),
                      Term(((loop, 1),), _WAITING, 0, 0)) for loop in loops}
    if own:
        yield (*own.values(), *(term for term in plan.terms if term not in own.values()))


def _candidates(terms: tuple[Term, ...], original: tuple[str, ...]) -> Iterator[tuple[Term, ...]]:
    bare = tuple(term for term in terms if term.chunk is None)
    in_order = tuple(sorted(bare, key=lambda term: original.index(term.loop)))
    yield from islice(_skewed(terms, original), _MOST_SKEWED)
    yield from islice(_skewed(_with_bare(terms, in_order), original), _MOST_SKEWED)
    yield from (_with_bare(terms, order) for order in islice(_by_closeness(bare), _MOST_ORDERS))
    yield from islice(_fewer(terms, in_order), _MOST_FEWER)


def _fewer(terms: tuple[Term, ...], in_order: tuple[Term, ...]) -> Iterator[tuple[Term, ...]]:
    """The terms with some chunks left out, as few as possible, in the plan's order and in the original one."""
    chunked = tuple(term for term in terms if term.chunk is not None)
    for count in range(len(chunked) - 1, -1, -1):
        for kept in combinations(chunked, count):
            fewer = tuple(term for term in terms if term.chunk is None or term in kept)
            yield fewer
            yield _with_bare(fewer, in_order)


def _with_bare(terms: tuple[Term, ...], bare: tuple[Term, ...]) -> tuple[Term, ...]:
    """The terms with their bare ones, from left to right, replaced by these."""
    left = iter(bare)
    return tuple(next(left) if term.chunk is None else term for term in terms)


def _by_closeness(bare: tuple[Term, ...]) -> list[tuple[Term, ...]]:
    if len(bare) > 5:
        return []
    places = {term: at for at, term in enumerate(bare)}

    def inversions(order: tuple[Term, ...]) -> int:
        return sum(places[a] > places[b] for a, b in combinations(order, 2))

    return sorted(permutations(bare), key=inversions)[1:]


def _skewed(terms: tuple[Term, ...], original: tuple[str, ...]) -> Iterator[tuple[Term, ...]]:
    """The terms with chunks of inner loops skewed by the outermost loop, smallest factors first."""
    named = {term.loop for term in terms if term.chunk is None}
    outermost = next(id for id in original if id in named)
    inner = [at for at, term in enumerate(terms)
             if term.chunk is not None and len(term.form) == 1 and term.loop != outermost]
    factors = sorted(product(range(_LARGEST_SKEW + 1), repeat=len(inner)), key=lambda f: (sum(f), max(f, default=0)))
    for choice in factors[1:]:
        skew = dict(zip(inner, choice, strict=True))
        yield tuple(replace(term, form=((outermost, skew[at]), *term.form)) if skew.get(at) else term
                    for at, term in enumerate(terms))
