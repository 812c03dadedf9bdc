"""The history of a number in words: the operations and cells that made it, as an expression."""

from __future__ import annotations

from collections.abc import Callable

from .tags import Book

_DEPTH = 4  # levels of operations that are shown
_WIDTH = 150  # characters
_INFIX = frozenset({"+", "-", "*", "/", "%", "<<", ">>", "&", "|", "^", "<", "<=", ">", ">=", "==", "!="})


class Histories:
    """Writes histories; ``cell`` gives the name of a cell of an object."""

    def __init__(self, book: Book, cell: Callable[[str, int], str]) -> None:
        self._book, self._cell = book, cell

    def pair(self, expected: int, found: int) -> tuple[str, str]:
        """Two different histories, from where they part if that is too deep to be seen."""
        while True:
            texts = self.text(expected), self.text(found)
            if texts[0] != texts[1]:
                return texts
            ours, theirs = self._book.operands(expected), self._book.operands(found)
            parted = next(((a, b) for a, b in zip(ours, theirs, strict=False) if a != b), None)
            if parted is None:
                return texts
            expected, found = parted

    def text(self, tag: int) -> str:
        """A history as an expression, cut where it gets deep."""
        text = self._text(tag, _DEPTH)
        return text if len(text) <= _WIDTH else self._text(tag, 2)

    def _text(self, tag: int, depth: int) -> str:
        operation, operands = self._book.entries[tag]
        if operation.name == "constant":
            return f"{operands}"
        if operation.name == "initial":
            return self._cell(*operands) if operands[1] != "parameter" else str(operands[0])
        if depth == 0:
            return "..."
        parts = [self._text(part, depth - 1) for part in self._book.operands(tag)]
        if operation.name in _INFIX:
            return f"({parts[0]} {operation.name} {parts[1]})"
        if operation.name == "negate":
            return f"-{parts[0]}"
        if operation.name in ("convert", "truncate"):
            return f"({operation.kind.name}){parts[0]}"
        return f"{operation.name}({', '.join(parts)})"
