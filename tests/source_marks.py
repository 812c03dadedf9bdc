"""C texts with marks around the statements whose extents are to be found: ``⟦for (…) …⟧``."""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import Any

from pycparser import c_ast

from retile.source import CompilerCall, Source, open_source
from retile.source.parse import nodes

COMPILERS = [cc for cc in ("gcc", "clang") if shutil.which(cc)]
OPEN, CLOSE = "⟦", "⟧"


def unmarked(marked: str) -> tuple[str, set[tuple[int, int]]]:
    """The text without its marks, and the extents that they enclosed."""
    text, starts, extents = "", [], set()
    for character in marked:
        if character == OPEN:
            starts.append(len(text))
        elif character == CLOSE:
            extents.add((starts.pop(), len(text)))
        else:
            text += character
    assert not starts
    return text, extents


def opened(folder: Path, text: str | bytes, flags: tuple[str, ...] = (), *, cc: str = "cc") -> Source:
    """A source with this text."""
    path = folder / "survey.c"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return open_source(str(path), CompilerCall(cc, flags))


def statements(
    source: Source, kinds: Any = (c_ast.For, c_ast.While, c_ast.DoWhile, c_ast.If, c_ast.Switch)
) -> list[Any]:
    """All nodes of some kinds in the functions of the file, in text order."""
    found = [node for function in source.functions for node in nodes(function.body) if isinstance(node, kinds)]
    return sorted(found, key=lambda node: node.coord.number)


def extents(
    source: Source, kinds: Any = (c_ast.For, c_ast.While, c_ast.DoWhile, c_ast.If, c_ast.Switch)
) -> set[tuple[int, int]]:
    """The known extents of these nodes, after checking that all extents of the file nest properly."""
    for function in source.functions:
        check_nesting(source, function.body, source.function_span(function))
    spans = [source.span(node) for node in statements(source, kinds)]
    return {(span.start, span.end) for span in spans if span is not None}


def check_nesting(source: Source, node: Any, outer: Any) -> None:
    """Every known extent lies in that of the statement around it, and its line and column are those of its start."""
    span = source.span(node)
    if span is not None:
        assert outer is None or outer.start <= span.start < span.end <= outer.end
        assert source.at(span.start) == (span.line, span.column)
        header = source.header_span(node)
        assert header is None or (header.start == span.start and source.text[header.end - 1] == ")")
        outer = span
    for _, child in node.children():
        check_nesting(source, child, outer)
