"""The dependences of a nest as a table."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..model import Nest
from .table import Column, Look, paragraph, table

if TYPE_CHECKING:
    from ..dependence import Dependences, Edge

_COLUMNS = (Column("kind", whole=True), Column("cell"), Column("from line", whole=True), Column("to line", whole=True),
            Column("loops", whole=True), Column("distance", whole=True), Column("direction", whole=True),
            Column("carried by", whole=True))


def dependences_lines(nest: Nest, dependences: Dependences, look: Look) -> list[str]:
    """The statements, the dependences between them, and what these rest on."""
    lines = [f"{nest.address} in {nest.function}", ""]
    statements = [(statement.id, statement.text) for statement in nest.statements]
    lines += table((Column("line", right=True, whole=True), Column("statement")), statements, look)
    lines.append("")
    if dependences.edges:
        lines += table(_COLUMNS, [_row(edge) for edge in dependences.edges], look)
        lines += ["", *paragraph("distance: how many iterations later the second one comes, outermost loop first; "
                                 "direction: < later, = same, > earlier, <= same or later, * any.", look)]
    else:
        lines.append("No dependences: every order of the iterations is legal.")
    if dependences.assumptions:
        lines += ["", "This rests on what the code does not state:"]
        for assumption in dependences.assumptions:
            lines += paragraph(f"{assumption.text} [{assumption.code.value}]", look, "  - ", "    ")
    return lines


def _row(edge: Edge) -> tuple[str, ...]:
    distance = "varies" if edge.distance is None else " ".join(map(str, edge.distance))
    return (edge.kind, edge.storage + ("" if edge.exact else " (any cell)"), edge.source, edge.target,
            " ".join(edge.common), distance, " ".join(edge.direction), edge.carried_by or "-")
