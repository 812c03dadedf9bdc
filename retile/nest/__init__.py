"""The nest room: a ``for`` of the syntax tree as loops, statements and affine accesses, or refused with the place."""

from .addresses import Found, read_nest, read_nests

__all__ = ["Found", "read_nest", "read_nests"]
