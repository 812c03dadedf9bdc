"""The dependence room: from a nest to the exact relations between its instances."""

from .analysis import analyse, defined, original_times
from .edges import Dependences, Edge

__all__ = ["Dependences", "Edge", "analyse", "defined", "original_times"]
