"""The suggest room: a nest, its dependences and a host; legal plans worth a trial there, each with the reason."""

from .advice import suggest
from .idea import Advice, Suggestion
from .search import neighbours

__all__ = ["Advice", "Suggestion", "neighbours", "suggest"]
