"""The plan's text: terms from outermost to innermost, then options.

    plan    = term { blank term } [ ";" option { "," option } ]
    term    = ( loop | "(" sum ")" ) [ ":" chunk ]
    sum     = [ "-" ] product { ("+" | "-") product }
    product = [ integer "*" ] loop
    option  = word blank value

A wrong plan is a wrong call: one message, with the place in the plan marked.
"""

from __future__ import annotations

import re

from ..model import Nest, Plan, RetileError, Term

# The options that a plan may carry, and the values each of them takes.
OPTIONS = {"remainder": ("clamp", "peel")}

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


class _PlanText:
    """The text of a plan, to complain about."""

    def __init__(self, text: str) -> None:
        self.text = text

    def complaint(self, start: int, end: int, what: str, remedy: str) -> RetileError:
        mark = " " * start + "^" * max(1, end - start)
        return RetileError(f"wrong plan: {what}\n    {self.text}\n    {mark}\n{remedy}")


def parse_plan(text: str, nest: Nest) -> Plan:
    """The plan that a text describes for a nest; ``places`` are filled in by ``schedule.placed``.

    Raises RetileError, with the place in the plan marked, if the text is not a plan or does not fit the nest.
    """
    plan = _PlanText(text)
    order, semicolon, rest = text.partition(";")
    terms = tuple(_term(plan, match.start(), match.group(), nest) for match in _TERM.finditer(order))
    if not terms:
        raise plan.complaint(0, 1, "it names no loop", f"Loops here: {_loop_names(nest)}.")
    _check_terms(plan, terms, nest)
    options = _options(plan, len(order) + 1, rest) if semicolon else ()
    written = " ".join(order.split())
    if options:
        written += "; " + ", ".join(f"{word} {value}" for word, value in options)
    return Plan(written, terms, options)


def _loop_names(nest: Nest) -> str:
    return ", ".join(loop.id for loop in nest.loops)


def _term(plan: _PlanText, start: int, text: str, nest: Nest) -> Term:
    ids = {loop.id for loop in nest.loops}
    end = start + len(text)
    if text in ids:
        return Term(((text, 1),), None, start, end)
    head, colon, size = text.rpartition(":")
    if not colon or head.count("(") != head.count(")"):
        head, size = text, ""
    chunk = _chunk(plan, end - len(size), size) if colon and head != text else None
    if head.startswith("(") and head.endswith(")"):
        return Term(_sum(plan, start + 1, head[1:-1], ids, nest), chunk, start, end)
    return Term(((_loop(plan, start, head, ids, nest), 1),), chunk, start, end)


def _chunk(plan: _PlanText, start: int, size: str) -> int:
    remedy = "A chunk is the number of iterations of one step: a whole number of at least 1, as in i:64."
    if not size.isdecimal():
        raise plan.complaint(start, start + len(size), f"'{size}' is not a chunk", remedy)
    if int(size) < 1:
        raise plan.complaint(start, start + len(size), f"a chunk of {size} iterations covers nothing", remedy)
    if int(size) > 2**31 - 1:
        raise plan.complaint(start, start + len(size), f"a chunk of {size} iterations is too large", remedy)
    return int(size)


def _loop(plan: _PlanText, start: int, name: str, ids: set[str], nest: Nest) -> str:
    if name in ids:
        return name
    alike = sorted(id for id in ids if id.split("@")[0] == name)
    if alike:
        raise plan.complaint(start, start + len(name), f"several loops are called '{name}'",
                             f"Tell them apart by their line: {', '.join(alike)}.")
    raise plan.complaint(start, start + len(name), f"the nest has no loop '{name}'", f"Loops here: {_loop_names(nest)}.")


def _sum(plan: _PlanText, start: int, text: str, ids: set[str], nest: Nest) -> tuple[tuple[str, int], ...]:
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


def _check_terms(plan: _PlanText, terms: tuple[Term, ...], nest: Nest) -> None:
    bare: dict[str, Term] = {}
    chunks: dict[tuple[tuple[str, int], ...], Term] = {}
    for term in terms:
        if term.chunk is None:
            _check_bare(plan, term, bare)
            bare[term.loop] = term
            continue
        coarser = chunks.get(term.form)
        if len(term.form) == 1 and term.loop in bare:
            raise plan.complaint(term.start, term.end, f"the chunks of '{term.loop}' stand inside its single iterations",
                                 f"Put this term to the left of the bare {term.loop}.")
        if coarser is not None and coarser.chunk is not None and term.chunk >= coarser.chunk:
            raise plan.complaint(term.start, term.end, f"chunks of one loop must fall from left to right, and "
                                 f"{term.chunk} does not fall from {coarser.chunk}",
                                 "Put the larger chunk first, or leave one of them out.")
        chunks[term.form] = term
    for term in terms:
        _check_named(plan, term, bare, nest)


def _check_bare(plan: _PlanText, term: Term, bare: dict[str, Term]) -> None:
    if len(term.form) > 1 or term.form[0][1] != 1:
        raise plan.complaint(term.start, term.end, "a skewed term needs a chunk",
                             "Write it like (i+t):64 beside the bare loops.")
    if term.loop in bare:
        raise plan.complaint(term.start, term.end, f"loop '{term.loop}' stands twice", "Leave one of the two out.")


def _check_named(plan: _PlanText, term: Term, bare: dict[str, Term], nest: Nest) -> None:
    for loop, _ in term.form:
        for needed in (*nest.loop(loop).outer, loop):
            if needed in bare:
                continue
            what = f"loop '{needed}' has no term of its own" if needed == loop else \
                f"loop '{needed}' is outside '{loop}' and is not named"
            raise plan.complaint(term.start, term.end, what, f"Add the bare term {needed} to the plan.")


def _options(plan: _PlanText, start: int, text: str) -> tuple[tuple[str, str], ...]:
    found: dict[str, str] = {}
    for match in re.finditer(r"[^,]+", text):
        words = match.group().split()
        begin = start + match.start() + len(match.group()) - len(match.group().lstrip())
        end = start + match.end()
        if not words:
            continue
        known = ", ".join(f"{word} {'|'.join(values)}" for word, values in OPTIONS.items())
        if len(words) != 2 or words[0] not in OPTIONS or words[1] not in OPTIONS[words[0]]:
            raise plan.complaint(begin, end, f"'{' '.join(words)}' is not an option", f"Options: {known}.")
        if words[0] in found:
            raise plan.complaint(begin, end, f"option '{words[0]}' stands twice", "Leave one of the two out.")
        found[words[0]] = words[1]
    return tuple(found.items())
