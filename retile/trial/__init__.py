"""Trials: a nest and its variants built on their own, verified against each other and timed."""

from .campaign import measure, verify, verify_all
from .records import (
    FILLS,
    Campaign,
    Difference,
    Event,
    Settings,
    Trial,
    Verification,
    as_text,
    read_result,
    write_result,
)
from .search import in_rounds
from .statistics import Estimate

__all__ = [
    "FILLS",
    "Campaign",
    "Difference",
    "Estimate",
    "Event",
    "Settings",
    "Trial",
    "Verification",
    "as_text",
    "in_rounds",
    "measure",
    "read_result",
    "verify",
    "verify_all",
    "write_result",
]
