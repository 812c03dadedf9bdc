"""The verdict about a plan in words, so that a person can check it by hand."""

from __future__ import annotations

import shlex
from collections.abc import Callable, Iterable

from ..model import Address, Assumption, Instance, Judgement, Plan, Refusal, Unproven, Verdict, Violation
from .document import iterator_values
from .table import Look, coloured, paragraph

_STYLE = {Verdict.LEGAL: "good", Verdict.ILLEGAL: "bad", Verdict.UNPROVEN: "doubtful", Verdict.REFUSED: "bad"}
# What the two instances of a dependence do to the cell that they share, in the original order.
_DEEDS = {"flow": ("writes", "reads"), "anti": ("reads", "writes"), "output": ("writes", "writes")}
_HARM = {
    "flow": "would read the cell before it has its value",
    "anti": "would overwrite the cell before it has been read",
    "output": "would leave the wrong one of two values in the cell",
}

_SHOWN = 2  # witnesses that a person reads; one already settles the verdict

# Makes file, line, source line and caret of a refusal; the ``complaint`` of a source.
Place = Callable[[Refusal], str]


def verdict_lines(address: Address, judgement: Judgement, place: Place, look: Look) -> list[str]:
    """All that ``retile check`` prints about a plan."""
    word = coloured(judgement.verdict.value, _STYLE[judgement.verdict], look)
    lines = [f"{word}: {address} with plan {judgement.plan.text!r}".replace("'", '"'), ""]
    if judgement.verdict is Verdict.LEGAL:
        lines += paragraph("Every variant in this order computes the same as the original, for all sizes.", look)
    for violation in sorted(judgement.violations, key=lambda one: list(_DEEDS).index(one.kind))[:_SHOWN]:
        lines += _separated(lines, violation_lines(violation, look))
    if len(judgement.violations) > _SHOWN:
        more = len(judgement.violations) - _SHOWN
        lines += ["", f"{more} more of the dependences {'is' if more == 1 else 'are'} reversed; --json shows all."]
    notes = {violation.note for violation in judgement.violations}
    if "" not in notes:
        for note in sorted(notes):
            lines += _separated(lines, paragraph(note, look))
    for unproven in judgement.unproven:
        lines += _separated(lines, unproven_lines(unproven, look))
    for refusal in judgement.refusals:
        lines += _separated(lines, place(refusal).splitlines())
    if place_lines(judgement.plan, look):
        lines += _separated(lines, place_lines(judgement.plan, look))
    if judgement.assumptions:
        lines += _separated(lines, assumption_lines(judgement.assumptions, look))
    return lines + _separated(lines, next_lines(address, judgement, look))


def _separated(before: list[str], block: list[str]) -> list[str]:
    return ["", *block] if block and before and before[-1] else block


def violation_lines(violation: Violation, look: Look) -> list[str]:
    """The witness: the sizes, the two instances in original order, the cell they share, and what would go wrong."""
    first, then = _DEEDS[violation.kind]
    cell = cell_text(violation)
    sizes = ", ".join(f"{name} = {value}" for name, value in violation.parameters)
    opening = f"At {sizes} the" if sizes else "The"
    rows = [("first", violation.source, first), ("later", violation.target, then)]
    places = [_instance_text(instance) for _, instance, _ in rows]
    width = max(map(len, places))
    lines = paragraph(f"{opening} plan reverses two executions that touch {cell} ({violation.kind} dependence).", look)
    lines += ["In the original order:", ""]
    lines += [f"  {when}   {where:<{width}}   {deed} {cell}" for (when, _, deed), where in zip(rows, places)]
    closing = f"With the plan the second of them comes first and {_HARM[violation.kind]}."
    return [*lines, "", *paragraph(closing, look)]


def cell_text(violation: Violation) -> str:
    """The shared cell as C writes it: ``c[1][2]``; the name alone where it has no subscripts or any cell is meant."""
    if violation.cell is None:
        return violation.array
    return violation.array + "".join(f"[{subscript}]" for subscript in violation.cell)


def _instance_text(instance: Instance) -> str:
    values = ", ".join(f"{name} = {value}" for name, value in iterator_values(instance).items())
    return f"line {instance.line}" + (f", {values}" if values else "")


def unproven_lines(unproven: Unproven, look: Look) -> list[str]:
    """What could not be decided, and the fact that would settle it."""
    pair = f"line {unproven.source}" if unproven.source == unproven.target \
        else f"lines {unproven.source} and {unproven.target}"
    lines = paragraph(f"Not decided for {pair}: {unproven.reason}", look)
    return lines + (paragraph(f"It would be settled by: {unproven.needs}", look, "  ") if unproven.needs else [])


def place_lines(plan: Plan, look: Look) -> list[str]:
    """Where statements went that the text has outside a loop of the plan."""
    lines = []
    for a in plan.aligned:
        where = f"with the chunk of {a.loop} that holds {a.value}" if a.chunks_only else f"where {a.loop} = {a.value}"
        lines += paragraph(f"Line {a.statement}, outside the loop over {a.loop}, runs {where}.", look)
    for statement in plan.copied:
        lines += paragraph(f"Line {statement} runs again wherever its value is needed.", look)
    for scalar in plan.kept:
        lines += paragraph(f"The values of {scalar} that wait are kept in a small array.", look)
    return lines


def assumption_lines(assumptions: Iterable[Assumption], look: Look) -> list[str]:
    """The facts that the code does not state, one per line, with what becomes of each."""
    assumptions = tuple(assumptions)
    lines = ["This rests on what the code does not state:"]
    for assumption in assumptions:
        lines += paragraph(f"{assumption.text} [{assumption.code.value}]", look, "  - ", "    ")
    if all(assumption.testable for assumption in assumptions):
        lines += paragraph("The variant tests this when the function is called, and else runs the original loops.",
                           look)
    return lines


def next_lines(address: Address, judgement: Judgement, look: Look) -> list[str]:
    """The command that a user would give next."""
    place = shlex.quote(str(address))
    plan = shlex.quote(judgement.plan.text)
    if judgement.verdict is Verdict.LEGAL:
        return [f"Next: retile rewrite --diff {place} {plan}"]
    if judgement.instead is not None:
        return [f"A legal plan near it: retile check {place} {shlex.quote(judgement.instead)}"]
    if judgement.verdict is Verdict.REFUSED:
        return []
    return [f"Next: retile depend {place} shows every dependence that an order must keep."]
