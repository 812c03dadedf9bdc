"""How the nest room says no: every refusal is a value with a place, a code and a remedy."""

from __future__ import annotations

from typing import Any

from ..model import Refusal


class Refused(Exception):
    """Carries a refusal from the depth of the reading to its top; never leaves the room."""

    def __init__(self, refusal: Refusal) -> None:
        super().__init__(refusal.reason)
        self.refusal = refusal


def refusal(node: Any, code: str, reason: str) -> Refusal:
    """A refusal at the place of a syntax node; a node without a place is told by line 1."""
    place = getattr(node, "coord", None)
    return Refusal(getattr(place, "line", 0) or 1, getattr(place, "column", 0) or 1, code, reason)


def refused(node: Any, code: str, reason: str) -> Refused:
    """The exception for a refusal at the place of a syntax node."""
    return Refused(refusal(node, code, reason))
