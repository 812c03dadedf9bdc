"""The second round of a search: neighbours of the plan that was fastest in the first.

A chunk twice or half as large, a block with another number of rows or columns: one number of the plan changes at a
time, and inner chunks still cut the outer ones evenly (hill climbing on the few numbers that matter).
"""

from __future__ import annotations

from collections.abc import Iterator

from ..dependence import Dependences
from ..model import Nest, Plan, Term
from ..plan.grammar import term_text
from ..values import replace
from .advice import Court
from .idea import Suggestion

_FEWEST, _MOST = 2, 1 << 16
_MOST_ROWS = 16  # written out


def neighbours(nest: Nest, dependences: Dependences, plan: Plan, tried: set[str], most: int) -> tuple[Suggestion, ...]:
    """Legal plans with one chunk changed; ``tried``: texts that were measured already."""
    court, found = Court(nest, dependences), list[Suggestion]()
    for text, why in _variations(plan):
        if len(found) >= most:
            break
        if text not in tried and (legal := court.plan(text)) is not None:
            tried.add(text)
            found.append(Suggestion(legal, "neighbour", why))
    return tuple(found)


def _variations(plan: Plan) -> Iterator[tuple[str, str]]:
    chunked = [at for at, term in enumerate(plan.terms) if isinstance(term.chunk, int)]
    for factor in (2.0, 0.5, 1.5, 3.0):
        for at in reversed(chunked):
            term = plan.terms[at]
            assert isinstance(term.chunk, int)
            size = _whole(plan.terms, at, int(term.chunk * factor))
            limit = _MOST_ROWS if term.loop in plan.unrolled and _is_last(plan, at) else _MOST
            if _FEWEST <= size <= limit and size != term.chunk:
                terms = _evened(plan.terms, at, size)
                if terms is not None:
                    yield _text(plan, terms), f"{term_text(term)} became {term_text(terms[at])}"
    for at in (at for at in chunked if plan.terms[at].loop in plan.unrolled and _is_last(plan, at)):
        for more in (1, -1, 2):
            size = int(plan.terms[at].chunk or 0) + more
            terms = _evened(plan.terms, at, size) if _FEWEST <= size <= _MOST_ROWS else None
            if terms is not None:
                yield _text(plan, terms), f"{term_text(plan.terms[at])} became {term_text(terms[at])}"


def _whole(terms: tuple[Term, ...], at: int, size: int) -> int:
    """A size near another one that the next smaller chunk of the loop cuts evenly."""
    within = [term.chunk for term in terms[at + 1:] if term.form == terms[at].form]
    inside = next((chunk for chunk in within if isinstance(chunk, int)), 1)
    return max(1, round(size / inside)) * inside


def _is_last(plan: Plan, at: int) -> bool:
    """True for the smallest chunk of its loop."""
    return not any(term.form == plan.terms[at].form and term.chunk is not None for term in plan.terms[at + 1:])


def _evened(terms: tuple[Term, ...], at: int, size: int) -> tuple[Term, ...] | None:
    """The terms with another chunk, and the chunks around it made whole numbers of it; None if they would not fall."""
    changed = list(terms)
    changed[at] = replace(terms[at], chunk=size)
    inside = size
    for place in range(at - 1, -1, -1):
        chunk = changed[place].chunk
        if changed[place].form == terms[at].form and isinstance(chunk, int):
            whole = max(2, round(chunk / inside)) * inside
            changed[place], inside = replace(changed[place], chunk=whole), whole
    within = [term.chunk for term in changed[at:] if term.form == terms[at].form and isinstance(term.chunk, int)]
    if any(outer <= inner or outer % inner for outer, inner in zip(within, within[1:])):
        return None
    return tuple(changed)


def _text(plan: Plan, terms: tuple[Term, ...]) -> str:
    """The plan's text with other chunks, in the options too: ``pack b at k:512``."""
    words = []
    for word, value in plan.options:
        if word == "pack":
            name, _, place = value.rpartition(" at ")
            old = next((at for at, term in enumerate(plan.terms) if term_text(term) == place), None)
            value = f"{name} at {term_text(terms[old])}" if old is not None else value
        words.append(f"{word} {value}")
    order = " ".join(term_text(term) for term in terms)
    return order + ("; " + ", ".join(words) if words else "")
