"""Suggested plans, as lines of text and as a JSON document."""

from __future__ import annotations

import shlex
from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING

from ..model import Address, Nest, Refusal
from .document import Document, of_plan, of_refusal
from .table import Look, coloured, paragraph

if TYPE_CHECKING:
    from ..suggest import Advice


def suggestion_lines(address: Address, nest: Nest, sizes: Mapping[str, int], advice: Advice, look: Look) -> list[str]:
    """The plans with their reasons, the most promising first, or why there are none."""
    at = ", ".join(f"{name} = {value}" for name, value in sizes.items())
    lines = [f"{address} in {nest.function}" + (f" at {at}" if at else ""), ""]
    if advice.leave is not None:
        lines += paragraph(f"Leave it: {advice.leave}.", look)
    for suggestion in advice.suggestions:
        lines += paragraph(coloured(suggestion.plan.text, "strong", look), look)
        lines += [*paragraph(f"{suggestion.kind}: {suggestion.why}", look, "    "), ""]
    if advice.suggestions:
        lines += paragraph("All of these are legal. Which is fastest, only a measurement tells.", look)
    lines += [line for text in advice.assumed for line in paragraph(f"Assumed: {text}.", look)]
    if advice.suggestions:
        given = [f"--set {shlex.quote(f'{p.text}={sizes.get(p.text, 1000)}')}" for p in nest.parameters
                 if p.kind != "expression"]  # these follow from the others
        lines += ["", " ".join(["Next: retile measure", shlex.quote(str(address)), *given])]
    return lines


def of_advice(address: Address, advice: Advice) -> Document:
    """The document of ``retile suggest``; ``leave`` is null if there are plans."""
    plans = [{**of_plan(s.plan), "kind": s.kind, "why": s.why} for s in advice.suggestions]
    return {"address": str(address), "plans": plans, "leave": advice.leave, "assumed": list(advice.assumed),
            "refusals": []}


def of_refused_advice(address: Address, refusals: Iterable[Refusal]) -> Document:
    """The document of ``retile suggest`` for a nest that retile does not read."""
    return {"address": str(address), "plans": [], "leave": None, "assumed": [],
            "refusals": [of_refusal(refusal) for refusal in refusals]}
