"""What a plan would read from memory, or divide by, sooner than the original does, and perhaps where it does not.

    if (key[i] > 0)
        for (int k = 0; k < g->cols; k++)       chunks of k, or k moved outward, need g->cols ahead of the condition

Where sizes say when the original reads it, the variant asks them first; a condition on data it cannot ask.
"""

from __future__ import annotations

from collections.abc import Iterator

from ..affine import AnyOf, bound_names
from ..model import Nest, Plan, Refusal
from ..tree import Guard, Loop, Node, children

_Spans = frozenset[tuple[int, int] | None]


def reads_ahead(nest: Nest, plan: Plan) -> Iterator[Refusal]:
    """The loops of a plan whose bounds the original reads only under conditions on data that the plan has inside them."""
    hidden = {parameter.symbol: parameter.text for parameter in nest.parameters if parameter.readable == AnyOf()}
    if not hidden:
        return
    from .build import build_tree

    original = {loop.of: spans for loop, spans in _loops(nest.tree, frozenset())}
    for loop, spans in _loops(build_tree(nest, plan), frozenset()):
        names = (bound_names(loop.lower) | bound_names(loop.upper)) & set(hidden)
        if names and not original[loop.of] <= spans:
            source = nest.loop(loop.of)
            yield Refusal(source.span.line, source.span.column, "reads-ahead",
                          f"{hidden[min(names)]} is evaluated only where a condition on data holds, and the plan would need it "
                          "sooner; copy it to a variable before the nest, if it can be evaluated there")
            return


def _loops(nodes: tuple[Node, ...], spans: _Spans) -> Iterator[tuple[Loop, _Spans]]:
    """All loops, each with the conditions on data around it."""
    for node in nodes:
        inside = spans
        if isinstance(node, Loop):
            yield node, spans
        elif isinstance(node, Guard) and (node.condition is None or node.partly):
            inside = spans | {node.span}
        yield from _loops(children(node), inside)


def hidden_texts(nest: Nest) -> tuple[str, ...]:
    """The C texts of what the original reads only where a condition on data holds."""
    found = [p.text for p in nest.parameters if p.readable == AnyOf()]
    found += [s.pointer_text for s in nest.storages if s.readable == AnyOf()]
    return tuple(text for text in dict.fromkeys(found) if not any(other != text and other in text for other in found))
