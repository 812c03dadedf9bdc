"""How large a nest may be.

Every question about a nest is one about integer sets: their cost rises steeply with the loops around a statement (each
is a dimension, twice for a pair of instances), and with the square of the accesses to one storage.  What is beyond
these limits is refused before any question is asked, so that an answer takes seconds whatever the file holds.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection
from typing import Any

from pycparser import c_ast

from ..model import Access, Refusal
from .refusals import refusal
from .scopes import FunctionNames, children

LOOPS = 12  # inside one another
ARRAYS = 100  # in one nest
DIVISIONS = 8  # in the subscripts of one access, remainders included
PAIRS = 12_000  # of accesses to one storage, at least one of them a write, of all storages together


def too_deep(nest: Any, names: FunctionNames) -> Refusal | None:
    """A refusal at the first loop that has too many around it, those around the nest included."""
    around = sum(isinstance(node, c_ast.For) for node in names.ancestors(nest))
    waiting = [(nest, around)]
    while waiting:
        node, depth = waiting.pop()
        if isinstance(node, c_ast.For):
            depth += 1
            if depth > LOOPS:
                return refusal(node, "too-large", f"more than {LOOPS} loops lie in one another here; "
                                                  "move inner ones to a function of their own.")
        waiting.extend((child, depth) for child in children(node))
    return None


def too_many(nest: Any, accesses: Collection[Access]) -> Refusal | None:
    """A refusal of a nest with more arrays, pairs of accesses, or divisions in one access than can be compared."""
    if any(_divisions(access) > DIVISIONS for access in accesses):
        return refusal(nest, "too-large", f"a subscript has more than {DIVISIONS} divisions or remainders; "
                                          "compute it in a loop over each part.")
    arrays = {access.storage for access in accesses if access.subscripts != ()}
    if len(arrays) > ARRAYS:
        return refusal(nest, "too-large", f"{len(arrays)} arrays are used here, more than the {ARRAYS} of which each is "
                                          "compared with each; split the loops.")
    counts: Counter[str] = Counter()
    writes: Counter[str] = Counter()
    for access in accesses:
        counts[access.storage] += 1
        writes[access.storage] += access.write
    pairs = {name: count * count - (count - writes[name]) ** 2 for name, count in counts.items()}
    if sum(pairs.values()) <= PAIRS:
        return None
    name = max(pairs, key=pairs.__getitem__)
    return refusal(nest, "too-large", f"{counts[name]} accesses to {name}, {writes[name]} of them writes, are more than "
                                      "can be compared in pairs; split the loops, or write them without unrolling.")


def _divisions(access: Access) -> int:
    return len({symbol for form in access.subscripts or () for symbol, _ in form.terms if not isinstance(symbol, str)})
