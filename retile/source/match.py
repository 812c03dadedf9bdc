"""Statements of the syntax tree beside the statements that the structure of the tokens shows."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pycparser import c_ast

from .structure import Shape

_KINDS = {
    c_ast.Compound: "compound",
    c_ast.For: "for",
    c_ast.While: "while",
    c_ast.DoWhile: "do",
    c_ast.If: "if",
    c_ast.Switch: "switch",
    c_ast.Label: "label",
    c_ast.Case: "case",
    c_ast.Default: "case",
}


def shapes_of(node: Any, shape: Shape) -> dict[int, tuple[Any, Shape]]:
    """For each statement in ``node`` its shape, by the node's ``id``, as far as both surely agree."""
    found: dict[int, tuple[Any, Shape]] = {}
    _match(node, shape, found)
    return found


def _match(node: Any, shape: Shape, found: dict[int, tuple[Any, Shape]]) -> None:
    place = getattr(node, "coord", None)
    if place is not None and not shape.start <= place.number <= shape.end:
        return
    if _KINDS.get(type(node), "simple") != shape.kind:
        return
    found[id(node)] = (node, shape)
    if shape.kind == "compound":
        _match_items(_items(node.block_items or ()), _children(shape.children), found)
        return
    inner = [node.iftrue, node.iffalse] if shape.kind == "if" else [getattr(node, "stmt", None)]
    for child, child_shape in zip((item for item in inner if item is not None), shape.children):
        _match_items(_items((child,)), _children((child_shape,)), found)


def _items(items: Any) -> Iterator[Any]:
    """The statements of a block; those that the parser hung under a case label stand where they stand in the text."""
    for item in items:
        if isinstance(item, (c_ast.Case, c_ast.Default)):
            yield from _items(item.stmts or ())
        else:
            yield item


def _children(shapes: tuple[Shape, ...]) -> Iterator[Shape]:
    for shape in shapes:
        if shape.kind == "case":
            yield from _children(shape.children)
        else:
            yield shape


def _match_items(items: Iterator[Any], shapes: Iterator[Shape], found: dict[int, tuple[Any, Shape]]) -> None:
    """Each shape takes the items that lie in it: one, or the declarators of one declaration."""
    placed = [item for item in items if getattr(item, "coord", None) is not None]
    position = 0
    for shape in shapes:
        inside = []
        while position < len(placed) and placed[position].coord.number <= shape.end:
            if placed[position].coord.number >= shape.start:
                inside.append(placed[position])
            position += 1
        declarations = all(isinstance(item, (c_ast.Decl, c_ast.Typedef)) for item in inside)
        if len(inside) == 1 or (shape.kind == "simple" and declarations):
            for item in inside:
                _match(item, shape, found)
