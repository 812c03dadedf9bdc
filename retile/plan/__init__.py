"""The plan room: a line of text, its meaning for a nest, and the verdict about it."""

from .alternatives import nearest_legal
from .build import build_tree, moved_conditions
from .grammar import parse_plan
from .schedule import placed
from .verdict import is_legal, judge

__all__ = ["build_tree", "is_legal", "judge", "moved_conditions", "nearest_legal", "parse_plan", "placed"]
