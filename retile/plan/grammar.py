"""The plan's text: terms from outermost to innermost, then options.

    plan    = term { blank term } [ ";" option { "," option } ]
    term    = ( loop | "(" sum ")" ) [ ":" chunk ]
    sum     = [ "-" ] product { ("+" | "-") product }
    product = [ integer "*" ] loop
    chunk   = integer | identifier
    option  = see ``options``

A wrong plan is a wrong call: one message, with the place in the plan marked.
"""

from __future__ import annotations

import re

from ..model import Nest, Plan, Term
from .options import Options, PlanText, read_options
from ..values import replace

_TERM = re.compile(r"\S+")
_PRODUCT = re.compile(r"([+-]?)(?:(\d+)\*)?([^+\-*]+)")


def form_text(form: tuple[tuple[str, int], ...]) -> str:
    """A sum of loops as a plan writes it: ``i``, ``(2*t+i)``."""
    if len(form) == 1 and form[0][1] == 1:
        return form[0][0]
    parts = "".join(f"{'-' if factor < 0 else '+'}{'' if abs(factor) == 1 else f'{abs(factor)}*'}{loop}"
                    for loop, factor in form)
    return f"({parts.removeprefix('+')})"


def term_text(term: Term) -> str:
    """A term as a plan writes it."""
    return form_text(term.form) + ("" if term.chunk is None else f":{term.chunk}")


def parse_plan(text: str, nest: Nest) -> Plan:
    """The plan that a text describes for a nest; ``places`` are filled in by ``schedule.placed``.

    Raises RetileError, with the place in the plan marked, if the text is not a plan or does not fit the nest.
    """
    plan = PlanText(text)
    order, semicolon, rest = text.partition(";")
    terms = tuple(_term(plan, match.start(), match.group(), nest) for match in _TERM.finditer(order))
    if not terms:
        raise plan.complaint(0, 1, "it names no loop", f"Loops here: {_loop_names(nest)}.")
    _check_terms(plan, terms, nest)
    terms = _executed(terms)
    options = read_options(plan, len(order) + 1, rest, nest, terms) if semicolon else Options()
    written = " ".join(order.split())
    if options.words:
        written += "; " + ", ".join(f"{word} {value}" for word, value in options.words)
    return Plan(written, terms, options.words, aligned=options.aligned, unrolled=options.unrolled,
                buffers=options.buffers, inner=options.inner, threaded=options.threaded)


def _loop_names(nest: Nest) -> str:
    return ", ".join(loop.id for loop in nest.loops)


def _term(plan: PlanText, start: int, text: str, nest: Nest) -> Term:
    ids = {loop.id for loop in nest.loops}
    end = start + len(text)
    if text in ids:
        return Term(((text, 1),), None, start, end)
    head, colon, size = text.rpartition(":")
    if not colon or head.count("(") != head.count(")"):
        head, size = text, ""
    variables = {parameter.symbol for parameter in nest.parameters}
    chunk = _chunk(plan, end - len(size), size, ids, variables) if colon and head != text else None
    if head.startswith("(") and head.endswith(")"):
        return Term(_sum(plan, start + 1, head[1:-1], ids, nest), chunk, start, end)
    return Term(((_loop(plan, start, head, ids, nest), 1),), chunk, start, end)


def _chunk(plan: PlanText, start: int, size: str, ids: set[str], variables: set[str]) -> int | str:
    remedy = "A chunk is a whole number of at least 1, as in i:64, or the name of a constant, as in i:I_CHUNK."
    if size.isidentifier() and size.isascii() and size not in ids:
        if size in variables:
            raise plan.complaint(start, start + len(size), f"'{size}' is a variable, not a constant", remedy)
        return size
    if not size.isdecimal():
        raise plan.complaint(start, start + len(size), f"'{size}' is not a chunk", remedy)
    if int(size) < 1:
        raise plan.complaint(start, start + len(size), f"a chunk of {size} iterations covers nothing", remedy)
    if int(size) > 2**31 - 1:
        raise plan.complaint(start, start + len(size), f"a chunk of {size} iterations is too large", remedy)
    return int(size)


def _loop(plan: PlanText, start: int, name: str, ids: set[str], nest: Nest) -> str:
    if name in ids:
        return name
    alike = sorted(id for id in ids if id.split("@")[0] == name)
    if alike:
        raise plan.complaint(start, start + len(name), f"several loops are called '{name}'",
                             f"Tell them apart by their line: {', '.join(alike)}.")
    raise plan.complaint(start, start + len(name), f"the nest has no loop '{name}'", f"Loops here: {_loop_names(nest)}.")


def _sum(plan: PlanText, start: int, text: str, ids: set[str], nest: Nest) -> tuple[tuple[str, int], ...]:
    coefficients: dict[str, int] = {}
    at = 0
    while at < len(text):
        match = _PRODUCT.match(text, at)
        if match is None or (at > 0 and not match.group(1)):
            raise plan.complaint(start + at, start + len(text), "this is not a sum of loops",
                                 "Write it like (2*t+i), without blanks.")
        name = _loop(plan, start + match.start(3), match.group(3), ids, nest)
        factor = int(match.group(2) or 1) * (-1 if match.group(1) == "-" else 1)
        coefficients[name] = coefficients.get(name, 0) + factor
        at = match.end()
    form = tuple((name, factor) for name, factor in coefficients.items() if factor)
    if not form:
        raise plan.complaint(start, start + len(text), "the sum is always 0", "Write it like (2*t+i), without blanks.")
    return form


def _check_terms(plan: PlanText, terms: tuple[Term, ...], nest: Nest) -> None:
    bare: dict[tuple[tuple[str, int], ...], Term] = {}
    chunks: dict[tuple[tuple[str, int], ...], Term] = {}
    for term in terms:
        if term.form in bare:
            what = "the chunks of '{}' stand inside its single iterations" if term.chunk else "'{}' stands twice"
            raise plan.complaint(term.start, term.end, what.format(form_text(term.form)),
                                 "Put chunks to the left of the bare term, and every bare term there once.")
        coarser = chunks.get(term.form)
        if term.chunk is None:
            bare[term.form] = term
        elif coarser is not None and not _falls(coarser.chunk, term.chunk):
            raise plan.complaint(term.start, term.end, f"chunks of one loop must fall from left to right, and "
                                 f"{term.chunk} does not fall from {coarser.chunk}",
                                 "Put the larger chunk first, or leave one of them out.")
        else:
            chunks[term.form] = term
    _check_moved(plan, terms, tuple(bare.values()), nest)


def _falls(coarser: int | str | None, finer: int | str) -> bool:
    if isinstance(coarser, int) and isinstance(finer, int):
        return finer < coarser
    return finer != coarser  # of a name nothing is known, but one constant does not cut a loop twice


def _check_moved(plan: PlanText, terms: tuple[Term, ...], bare: tuple[Term, ...], nest: Nest) -> None:
    """The bare terms must determine every loop that the plan moves, and no loop around one of these may be missing."""
    placed = {loop for term in bare for loop, _ in term.form}
    for term in terms:
        for loop in (needed for loop, _ in term.form for needed in (*nest.loop(loop).outer, loop)):
            if loop not in placed:
                own = loop in dict(term.form)
                what = f"loop '{loop}' has no bare term" if own else f"loop '{loop}' stands around these and is not named"
                raise plan.complaint(term.start, term.end, what, f"Add the bare term {loop} to the plan.")
    loops = sorted(placed)
    if len(bare) > len(loops):
        raise plan.complaint(bare[-1].start, bare[-1].end, f"there are {len(bare)} bare terms for {len(loops)} loops",
                             "A bare skewed term takes the place of one bare loop: leave that one out.")
    matrix = [[dict(term.form).get(loop, 0) for loop in loops] for term in bare]
    if len(bare) < len(loops) or abs(_determinant(matrix)) != 1:
        raise plan.complaint(bare[0].start, bare[-1].end, "the bare terms do not determine all iterators",
                             "They must be as many as the moved loops, with determinant 1 or -1.")


def _determinant(matrix: list[list[int]]) -> int:
    """The determinant, by expansion along the first row: plans have few loops."""
    if not matrix:
        return 1
    return sum((-1) ** at * factor * _determinant([row[:at] + row[at + 1:] for row in matrix[1:]])
               for at, factor in enumerate(matrix[0]) if factor)


def _executed(terms: tuple[Term, ...]) -> tuple[Term, ...]:
    """The terms as loops: a bare skewed sum is a loop of chunks of 1, inside which the replaced loops run once each."""
    plain = {term.loop for term in terms if term.chunk is None and _is_plain(term)}
    moved = dict.fromkeys(loop for term in terms for loop, _ in term.form)
    end = terms[-1].end
    return (*(term if term.chunk is not None or _is_plain(term) else replace(term, chunk=1) for term in terms),
            *(Term(((loop, 1),), None, end, end) for loop in moved if loop not in plain))


def _is_plain(term: Term) -> bool:
    return len(term.form) == 1 and term.form[0][1] == 1
