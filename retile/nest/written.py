"""An expression of the syntax tree as C, with the parentheses that it needs and no more."""

from __future__ import annotations

from typing import Any

from pycparser import c_ast, c_generator


class _Writer(c_generator.CGenerator):
    def __init__(self) -> None:
        super().__init__(reduce_parentheses=True)

    def visit_TernaryOp(self, node: Any) -> str:  # noqa: N802, the name is the library's
        """``n < 3 ? n : 3``, which binds more weakly than all but assignments and commas."""
        parts = [self.visit(part) for part in (node.cond, node.iftrue, node.iffalse)]
        weaker = (c_ast.Assignment, c_ast.ExprList)
        for at, part in enumerate((node.cond, node.iftrue, node.iffalse)):
            if isinstance(part, weaker) or (at == 0 and isinstance(part, c_ast.TernaryOp)):
                parts[at] = f"({parts[at]})"
        return f"{parts[0]} ? {parts[1]} : {parts[2]}"


def c_text(node: Any) -> str:
    """An expression as C text, macros expanded."""
    return str(_Writer().visit(node))
