"""How the user wrote a loop, as text and extents."""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..affine import Affine, bound_names
from ..model import LoopText, Span
from ..source import Source
from .loops import Header
from .readable import bound_text
from .refusals import refused
from .scopes import descendants
from .setting import Setting, c_text


def spans_of(source: Source, loop: Any) -> tuple[Span, Span, Span]:
    """The loop, its header, its body; Refused if the loop has no text of its own."""
    span, header, body = source.span(loop), source.header_span(loop), source.body_span(loop)
    if span is None or header is None or body is None:
        raise refused(
            loop, "macro", "the loop comes out of a macro, so it has no text of its own to rewrite; write the loop out."
        )
    return span, header, body


def loop_text(
    source: Source,
    loop: Any,
    id: str,
    header: Header,
    outer: tuple[str, ...],
    spans: tuple[Span, Span, Span],
    live_after: bool,
    setting: Setting,
) -> LoopText:
    """The value that tells the other rooms of a loop's text."""
    texts = setting.texts()
    bound, relation = _bound(source, loop, header, texts, setting)
    independent = not bound_names(header.first) & setting.loop_ids
    return LoopText(
        id,
        header.binding.name,
        header.type,
        header.declared_in_for,
        header.first,
        header.last,
        header.step,
        *spans,
        _first(source, loop, header, texts, setting),
        bound,
        relation,
        outer,
        live_after,
        independent,
    )


def _first(source: Source, loop: Any, header: Header, texts: dict[str, str], setting: Setting) -> str:
    if header.before_first or _computed_inside(header.first_node, setting):
        return bound_text(header.first, texts)
    parts = source.for_parts(loop)
    text = "" if parts is None else source.slice(parts[0])
    _, equals, value = text.partition("=")
    return " ".join(value.split()) if equals and "/*" not in value and "//" not in value else c_text(header.first_node)


def _bound(source: Source, loop: Any, header: Header, texts: dict[str, str], setting: Setting) -> tuple[str, str]:
    """The bound as C and the relation of the iterator to it; a mixed condition is given as one inclusive bound."""
    if header.relation == "-->" and _computed_inside(header.bound_node, setting):
        return bound_text(header.last, texts), "-->"
    if header.relation == "-->":
        return ("0" if header.bound_node is None else c_text(header.bound_node)), "-->"
    if header.bound_node is None or _computed_inside(header.bound_node, setting):
        return bound_text(header.last, texts), _inclusive(header)
    parts = source.for_parts(loop)
    text = "" if parts is None else source.slice(parts[1])
    if "/*" in text or "//" in text or not isinstance(loop.cond, c_ast.BinaryOp):
        return c_text(header.bound_node), header.relation
    left, right = _sides(text, loop.cond.op)
    mine_left = loop.cond.right is header.bound_node
    return (" ".join((right if mine_left else left).split()) or c_text(header.bound_node)), header.relation


def _computed_inside(node: Any, setting: Setting) -> bool:
    """True if a bound uses a value that the nest computes: its name means nothing outside."""
    return node is not None and any(
        setting.names.of(one) in setting.definitions for one in descendants(node) if isinstance(one, c_ast.ID)
    )


def _inclusive(header: Header) -> str:
    return "<=" if header.step > 0 else ">="


def _sides(text: str, op: str) -> tuple[str, str]:
    """The text on both sides of the one comparison outside brackets; empty if there are several."""
    depth, at = 0, []
    for place, character in enumerate(text):
        depth += (character in "([{") - (character in ")]}")
        if depth == 0 and text.startswith(op, place) and text[place - 1 : place] not in ("<", ">", "-", "=", "!"):
            if text[place + len(op) : place + len(op) + 1] not in ("=", "<", ">"):
                at.append(place)
    return (text[: at[0]], text[at[0] + len(op) :]) if len(at) == 1 else ("", "")


def origin_of(header: Header) -> Affine:
    """A value on the loop's grid, where that matters."""
    if isinstance(header.first, Affine):
        return header.first
    if abs(header.step) == 1:
        return Affine()
    raise refused(
        header.first_node,
        "step",
        "the first value is the larger or smaller of two that change in the nest, and "
        "the step is not one; give the loop a plain first value.",
    )
