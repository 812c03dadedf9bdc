"""The rewrite room: from a legal plan to C text."""

from .layout import InternalError
from .variant import diff, rewrite

__all__ = ["InternalError", "diff", "rewrite"]
