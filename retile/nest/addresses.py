"""Every ``for`` of a file under its address."""

from __future__ import annotations

import sys
from collections.abc import Iterable
from functools import cached_property
from typing import Any

from pycparser import c_ast

from ..model import Address, Nest, Refusal, RetileError
from ..source import Source
from ..values import dataclass
from .reading import NestReader
from .refusals import refusal
from .scopes import descendants
from .unit import Unit
from .walk import iterator_names


@dataclass(frozen=True)
class Found:
    """A ``for`` of the file, read as a nest or refused."""

    address: Address
    function: str
    outermost: bool  # not inside another ``for``
    loops: tuple[str, ...]  # ids of its loops, in text order
    nest: Nest | None
    refusals: tuple[Refusal, ...]


@dataclass(frozen=True)
class _For:
    """A ``for`` before it is read."""

    function: Any
    node: Any
    outermost: bool

    @property
    def line(self) -> int:
        return int(self.node.coord.line)

    @property
    def column(self) -> int:
        return int(self.node.coord.column or 1)


class _File:
    def __init__(self, source: Source) -> None:
        self.source = source
        self.unit = Unit(source)
        self._per_function: dict[int, tuple[_For, ...]] = {}
        self._per_line: dict[int, int] = {}

    @cached_property
    def loops(self) -> tuple[_For, ...]:
        """All loops of the file, in text order."""
        return self._loops_of(self.source.functions)

    def loops_on(self, line: int) -> tuple[_For, ...]:
        """The loops on a line; only the functions that reach over it are parsed."""
        here = [function for function, first, last in self._lines if first <= line <= last]
        found = [loop for function in here for loop in self._in_function(function) if loop.line == line]
        return tuple(sorted(found, key=lambda loop: loop.column))

    @cached_property
    def _lines(self) -> tuple[tuple[Any, int, int], ...]:
        """Each function with its first and last line; one whose extent is not sure may reach over any."""
        found = []
        for function in self.source.functions:
            span = self.source.function_span(function)
            found.append((function, 0, sys.maxsize) if span is None
                         else (function, span.line, self.source.at(span.end)[0]))
        return tuple(found)

    def _loops_of(self, functions: Iterable[Any]) -> tuple[_For, ...]:
        found = [loop for function in functions for loop in self._in_function(function)]
        return tuple(sorted(found, key=lambda loop: (loop.line, loop.column)))

    def _in_function(self, function: Any) -> tuple[_For, ...]:
        if not self.source.has_word(function, "for"):
            return ()
        if id(function) not in self._per_function:
            inner: set[int] = set()
            loops = []
            for node in descendants(function.body):
                if isinstance(node, c_ast.For):
                    loops.append(_For(function, node, id(node) not in inner))
                    if id(node) not in inner:
                        inner.update(id(one) for one in descendants(node.stmt) if isinstance(one, c_ast.For))
            self._per_function[id(function)] = tuple(loops)
        return self._per_function[id(function)]

    def address(self, loop: _For) -> Address:
        """FILE:LINE, with the column where the line has several loops."""
        if loop.line not in self._per_line:
            self._per_line[loop.line] = len(self.loops_on(loop.line))
        shared = self._per_line[loop.line] > 1
        return Address(self.source.path, loop.line, loop.column if shared else None)

    def read(self, loop: _For) -> Found:
        """The loop as a nest, or refused."""
        address = self.address(loop)
        names = iterator_names(loop.node)
        reader = NestReader(self.unit, loop.function, loop.node, address)
        try:
            nest = reader.read()
            refusals = reader.refusals
        except RecursionError:
            nest, refusals = None, (refusal(loop.node, "unsupported", "this nest is too deep to be read."),)
        return Found(address, loop.function.decl.name, loop.outermost, names, nest, refusals)


def read_nests(source: Source, *, inner: bool = True) -> tuple[Found, ...]:
    """Every ``for`` of the file, in text order, each as a nest of its own or refused; RetileError if C is malformed.

    Without ``inner`` only those that stand in no other ``for``.
    """
    file = _File(source)
    return tuple(file.read(loop) for loop in file.loops if inner or loop.outermost)


def read_nest(source: Source, line: int, column: int | None = None) -> Found:
    """The nest of the ``for`` that starts on a line (and in a column, where several do).

    RetileError if there is none, or if several start there and no column is given.
    """
    file = _File(source)
    there = list(file.loops_on(line))
    if not there:
        raise RetileError(source.complaint(line, None, "no `for` starts on this line", _nearest(file, line)))
    if column is not None:
        there = [loop for loop in there if loop.column == column]
        if not there:
            raise RetileError(source.complaint(line, column, "no `for` starts in this column", _nearest(file, line)))
    if len(there) > 1:
        choices = ", ".join(str(file.address(loop)) for loop in there)
        raise RetileError(
            source.complaint(
                line, there[0].column, "several `for` loops start on this line", f"Say which one: {choices}."
            )
        )
    return file.read(there[0])


def _nearest(file: _File, line: int) -> str:
    if not file.loops:
        return "The functions of this file have no `for` loops."
    nearest = min(file.loops, key=lambda loop: abs(loop.line - line))
    return f"The nearest `for` is at {file.address(nearest)}."
