"""The nests of files as a table."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from .table import Column, Look, table

if TYPE_CHECKING:
    from ..nest import Found

_COLUMNS = (Column("address", whole=True), Column("function"), Column("loops"), Column("state", whole=True),
            Column("what stands in the way, or is assumed"))


def nests_lines(found: Sequence[Found], look: Look) -> list[str]:
    """A table of nests, a refused one with the line and the reason; a sentence where there are none."""
    if not found:
        return ["No for loop found."]
    return table(_COLUMNS, [_row(one) for one in found], look)


def _row(found: Found) -> tuple[str, ...]:
    if found.nest is None:
        state = "refused"
        remarks = [f"line {refusal.line}: {refusal.reason} [{refusal.code}]" for refusal in found.refusals]
    else:
        state = "ready"
        remarks = [assumption.text for assumption in found.nest.assumptions]
    return str(found.address), found.function, " ".join(found.loops), state, "\n".join(remarks)
