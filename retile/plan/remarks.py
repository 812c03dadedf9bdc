"""What is said about dependences that a plan would not need to keep, if only more were known or given away."""

from __future__ import annotations

from ..dependence import Edge
from ..model import CType, Storage

_DONE = {"+": "additions to", "*": "multiplications of", "min": "choices of the smallest", "max": "choices of the largest"}


def order_of_updates(family: str, storage: Storage) -> str:
    """Why the order of two updates of one family counts; empty for what is no pair of updates."""
    if not family:
        return ""
    floating = isinstance(storage.element, CType) and storage.element.floating
    if family in ("min", "max"):
        reason = "which of two equal values or NaN is left may differ" if floating else "the value is cut when it is stored"
    else:
        reason = "another order may round differently" if floating else \
            "signed arithmetic may overflow at an intermediate value in one order and not in another"
    return f"Only the order of the {_DONE.get(family, 'updates of')} {storage.name} forbids it: {reason}. " \
        "If that does not matter, add '; reassociate yes' to the plan."


def same_cells(edge: Edge, source: int, target: int) -> str:
    """The fact that would settle a dependence through a subscript that is not affine."""
    if source == target:
        fact = f"that line {source} touches another cell of {edge.storage} each time"
    else:
        fact = f"that lines {source} and {target} touch different cells of {edge.storage}"
    return fact + ("; or, if another order of the updates does not matter, '; reassociate yes'" if edge.update else "")
