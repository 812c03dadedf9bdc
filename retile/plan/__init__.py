"""The plan room: a line of text, its meaning for a nest, and the verdict about it."""

from .alternatives import nearest_legal
from .build import build_tree
from .copies import copied_scalars
from .grammar import parse_plan
from .options import MOST_UNROLLED
from .schedule import placed
from .units import moved_conditions
from .verdict import binding_edges, is_legal, judge

__all__ = ["MOST_UNROLLED", "binding_edges", "build_tree", "copied_scalars", "is_legal", "judge", "moved_conditions", "nearest_legal", "parse_plan", "placed"]
