"""What stands behind the ``;`` of a plan.

    option = "remainder" ( "clamp" | "peel" )
           | "reassociate" ( "no" | "yes" )
           | "place" statement ( "at" | "with" ) loop "=" sum

``place 17 at j = k``: the statement of line 17, which is not in the loop ``j``, stands where ``j`` has the value ``k``;
``with``: it goes with the chunk of ``j`` that holds ``k``, before or after the chunk's single iterations, as the text
has it.  retile looks for such places itself; stated ones are taken as they are, and judged.
"""

from __future__ import annotations

import re

from ..affine import Affine
from ..model import Alignment, Nest, RetileError, Statement, Term

# The options with a fixed set of values.
OPTIONS = {"remainder": ("clamp", "peel"), "reassociate": ("no", "yes")}

_KNOWN = ", ".join([*(f"{word} {'|'.join(values)}" for word, values in OPTIONS.items()), "place LINE at LOOP = VALUE",
                    "place LINE with LOOP = VALUE"])
_PLACE = re.compile(r"place\s+(\S+)\s+(at|with)\s+(\S+?)\s*=\s*(\S.*)")
_PRODUCT = re.compile(r"\s*([+-]?)\s*(?:(\d+)\s*\*\s*)?([^+\-*\s]+)\s*")


class PlanText:
    """The text of a plan, to complain about."""

    def __init__(self, text: str) -> None:
        self.text = text

    def complaint(self, start: int, end: int, what: str, remedy: str) -> RetileError:
        """The one message of a wrong plan, with ``text[start:end]`` marked."""
        mark = " " * start + "^" * max(1, end - start)
        return RetileError(f"wrong plan: {what}\n    {self.text}\n    {mark}\n{remedy}")


def read_options(plan: PlanText, start: int, text: str, nest: Nest, terms: tuple[Term, ...]) \
        -> tuple[tuple[tuple[str, str], ...], tuple[Alignment, ...]]:
    """The options as (word, value), and the places among them; ``start``: where ``text`` begins in the plan.

    Raises RetileError, with the place in the plan marked, for a word, a value or a name that is not known.
    """
    found: list[tuple[str, str]] = []
    aligned: list[Alignment] = []
    for match in re.finditer(r"[^,]+", text):
        option = match.group().strip()
        begin = start + match.start() + len(match.group()) - len(match.group().lstrip())
        if not option:
            continue
        word, _, value = option.partition(" ")
        if word == "place":
            aligned.append(_alignment(plan, begin, option, nest, terms))
        elif value.strip() not in OPTIONS.get(word, ()):
            raise plan.complaint(begin, begin + len(option), f"'{option}' is not an option", f"Options: {_KNOWN}.")
        elif word in dict(found):
            raise plan.complaint(begin, begin + len(option), f"option '{word}' stands twice", "Leave one of the two out.")
        found.append((word, " ".join(value.split())))
    return tuple(found), tuple(aligned)


def _alignment(plan: PlanText, begin: int, option: str, nest: Nest, terms: tuple[Term, ...]) -> Alignment:
    match = _PLACE.fullmatch(option)
    if match is None:
        raise plan.complaint(begin, begin + len(option), "this is not a place", "Write it like: place 17 at j = k.")
    id, word, loop, value = match.groups()
    statement = next((s for s in nest.statements if s.id == id), None)
    if statement is None:
        raise plan.complaint(begin + match.start(1), begin + match.end(1), f"the nest has no statement '{id}'",
                             f"Statements here: {', '.join(s.id for s in nest.statements)}.")
    moved = dict.fromkeys(name for term in terms for name, _ in term.form)
    if loop not in moved or loop in statement.loops:
        what = "is around it" if loop in statement.loops else "is not a loop of the plan"
        raise plan.complaint(begin + match.start(3), begin + match.end(3), f"'{loop}' {what}",
                             f"Loops it can stand in: {', '.join(x for x in moved if x not in statement.loops) or 'none'}.")
    form = _value(plan, begin + match.start(4), value, statement, nest, tuple(moved))
    return Alignment(id, loop, form, word == "with")


def _value(plan: PlanText, begin: int, text: str, statement: Statement, nest: Nest, moved: tuple[str, ...]) -> Affine:
    """A sum of the statement's own moved iterators, sizes of the nest and integers."""
    known = {name: name for name in statement.loops if name in moved} | {p.text: p.symbol for p in nest.parameters}
    total, at = Affine(), 0
    while at < len(text):
        match = _PRODUCT.match(text, at)
        if match is None or (at > 0 and not match.group(1)):
            raise plan.complaint(begin + at, begin + len(text), "this is not a sum", "Write it like 2*k + 1.")
        name, factor = match.group(3), int(match.group(2) or 1) * (-1 if match.group(1) == "-" else 1)
        if not name.isdecimal() and name not in known:
            raise plan.complaint(begin + match.start(3), begin + match.end(3), f"'{name}' is not known at the statement",
                                 f"Names here: {', '.join(known) or 'none'}.")
        total = total + (Affine.of(int(name)) if name.isdecimal() else Affine.of(known[name])) * factor
        at = match.end()
    return total
