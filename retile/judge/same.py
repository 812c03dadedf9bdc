"""Whether the statements of a variant that write memory are the original's own, word for word."""

from __future__ import annotations

from typing import Any

from pycparser import c_ast, c_generator

_CHANGES = ("++", "--", "p++", "p--")
_MEMORY = (c_ast.ArrayRef, c_ast.StructRef, c_ast.UnaryOp)


def writes_alike(original: c_ast.FuncDef, variant: c_ast.FuncDef | None) -> bool:
    """True if the variant's function writes to memory in no other words than the original's."""
    if variant is None:
        return False
    return writes_of(variant) <= writes_of(original)


def writes_of(function: c_ast.FuncDef) -> set[str]:
    """The texts of the expressions in a function that change something in memory."""
    found: set[str] = set()
    waiting: list[Any] = [function.body]
    generator = c_generator.CGenerator()
    while waiting:
        node = waiting.pop()
        changed = node.lvalue if isinstance(node, c_ast.Assignment) else \
            node.expr if isinstance(node, c_ast.UnaryOp) and node.op in _CHANGES else None
        if isinstance(changed, _MEMORY):
            found.add(generator.visit(node))
        elif isinstance(node, c_ast.FuncCall):
            found.add(generator.visit(node))
        waiting += [child for _, child in node.children()]
    return found
