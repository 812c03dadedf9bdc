"""The syntax tree of the preprocessed text, by pycparser, with places in the user's text.

The parser gets one token per line, so that the line of a node's coordinate is the number of a token.  Bodies of
functions
are parsed when somebody looks at them: a file has many functions and a command needs one.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from functools import partial
from typing import Any, NamedTuple

from pycparser import CParser, c_ast
from pycparser.c_lexer import CLexer

from .dialect import EXTRA_TYPES, STATEMENT_EXPRESSION, UNKNOWN_VALUE, ParserText
from .structure import External, Malformed, externals


class Place(NamedTuple):
    """Where a node of the tree comes from: the ``coord`` of every node."""

    file: str
    line: int  # of the file
    column: int | None  # None if the token comes out of a header or is not known
    offset: int | None  # in the user's text: of the token, or of the macro call that it comes from
    number: int  # of the token in the parser's text

    def __str__(self) -> str:
        return f"{self.file}:{self.line}" + (f":{self.column}" if self.column is not None else "")


class SyntaxProblem(Exception):
    """The parser stopped at ``place`` (None: at the end of the file)."""

    def __init__(self, what: str, place: Place | None) -> None:
        super().__init__(what)
        self.what, self.place = what, place


class FuncDef(c_ast.FuncDef):
    """A function definition whose body is parsed on first use (and then may raise RetileError)."""

    __slots__ = ("_make", "_parsed")

    def __init__(self, shell: c_ast.FuncDef, make: Callable[[], c_ast.Compound]) -> None:
        self._make: Callable[[], c_ast.Compound] = make
        self._parsed: c_ast.Compound | None = None
        super().__init__(shell.decl, shell.param_decls, None, shell.coord)

    @property
    def body(self) -> c_ast.Compound:
        """The compound statement."""
        if self._parsed is None:
            self._parsed = self._make()
        return self._parsed

    @body.setter
    def body(self, value: c_ast.Compound | None) -> None:
        self._parsed = value


class Parsed(NamedTuple):
    """The tree of a translation unit."""

    ast: c_ast.FileAST
    functions: tuple[tuple[FuncDef, External], ...]  # all of the unit
    parts: tuple[External, ...]  # everything at file scope


def parse_unit(
    text: ParserText,
    place: Callable[[int], Place],
    make_body: Callable[[External, c_ast.FuncDef], c_ast.Compound],
    wanted: Callable[[External], bool] = lambda part: True,
) -> Parsed:
    """The tree without function bodies, which ``make_body`` makes when they are wanted; SyntaxProblem if it fails.

    What ``wanted`` says no to is left out.
    """
    try:
        parts = [part for part in externals(text.text) if wanted(part)]
    except Malformed:
        _parse(text.text, range(len(text.text)), (), place)  # says where it is wrong
        raise SyntaxProblem("the brackets of this file do not pair", None) from None
    kept: list[int] = []
    for part in parts:
        if part.brace is None:
            kept.extend(range(part.start, part.end + 1))
        else:
            kept.extend(range(part.start, part.brace + 1))
            kept.append(part.end)
    ast = _parse(text.text, kept, (), place)
    bodies = {part.brace: part for part in parts if part.brace is not None}
    functions = []
    for position, node in enumerate(ast.ext):
        if isinstance(node, c_ast.FuncDef):
            definition = bodies.get(node.body.coord.number)
            if definition is None:
                raise SyntaxProblem("this function definition cannot be read", node.coord)
            lazy = FuncDef(node, partial(make_body, definition, node))
            functions.append((lazy, definition))
            ast.ext[position] = lazy
    return Parsed(ast, tuple(functions), tuple(parts))


def parse_function(text: ParserText, part: External, typedefs: Sequence[str], place: Callable[[int], Place]) -> Any:
    """One function definition with its body, given the typedef names that hold there; SyntaxProblem if it fails."""
    ast = _parse(text.text, range(part.start, part.end + 1), typedefs, place)
    if not ast.ext or not isinstance(ast.ext[-1], c_ast.FuncDef):
        raise SyntaxProblem("this function definition cannot be read", place(part.start))
    return ast.ext[-1]


def parse_expression(tokens: Sequence[str], typedefs: Sequence[str]) -> Any:
    """The tree of an expression or a type name, as the operand of ``sizeof``; None if it is neither.

    The nodes' places mean nothing.
    """
    words = ["int", "expression", "=", "sizeof", "(", *tokens, ")", ";"]
    try:
        return _parse(words, range(len(words)), typedefs, lambda index: None).ext[-1].init.expr
    except (SyntaxProblem, AttributeError):
        return None


_FUNCTIONS = f"int {UNKNOWN_VALUE}(); int {STATEMENT_EXPRESSION}();"
_ERROR = re.compile(r"(?:tokens)?:(\d+)(?::\d+)?: (.*)", re.DOTALL)


def _parse(
    text: Sequence[str], kept: Sequence[int], typedefs: Sequence[str], place: Callable[[int], Place | None]
) -> c_ast.FileAST:
    last = 0

    class Watching(CLexer):
        """Some messages of the parser name no place: that of the last token read is near enough."""

        def token(self) -> Any:
            nonlocal last
            token = super().token()
            last = token.lineno if token is not None else last
            return token

    words = [text[index] for index in kept]
    types = [*(set(EXTRA_TYPES).intersection(words)), *typedefs]  # the others would cost more than a short function
    source = "\n".join([_FUNCTIONS + "".join(f"typedef int {name};" for name in types), *words])
    try:
        ast = CParser(lexer=Watching).parse(source, "tokens")
    except RecursionError:
        raise SyntaxProblem("expressions or statements are nested too deep to be read", None) from None
    except Exception as error:  # the parser may also stumble over its own assertions
        raise _problem(error, last, kept, place) from None
    del ast.ext[: 2 + len(types)]
    known: dict[int, Place | None] = {}
    for node in nodes(ast):
        if node.coord is not None:
            line = node.coord.line
            if line not in known:
                known[line] = place(kept[line - 2]) if 2 <= line < len(kept) + 2 else None
            node.coord = known[line]
    return ast


def nodes(root: c_ast.Node) -> Iterator[Any]:
    """All nodes of a tree, each once, in no certain order."""
    stack, seen = [root], set()
    while stack:
        node = stack.pop()
        if id(node) in seen:
            continue
        seen.add(id(node))
        yield node
        stack.extend(child for _, child in node.children())


def _problem(error: Exception, last: int, kept: Sequence[int], place: Callable[[int], Place | None]) -> SyntaxProblem:
    match = _ERROR.match(str(error))
    line = int(match[1]) if match else last
    what = match[2] if match else str(error).removeprefix("tokens").lstrip(": ")
    if type(error).__name__ != "ParseError":
        what = "this cannot be read"
    return SyntaxProblem(_reworded(what), place(kept[line - 2]) if 2 <= line < len(kept) + 2 else None)


def _reworded(what: str) -> str:
    if what.startswith("before: "):
        return f"syntax error before {what.removeprefix('before: ').split('(')[0]!r}"
    if "end of input" in what.lower() or not what:
        return "the file ends in the middle of a declaration or statement"
    return f"syntax error: {what[0].lower()}{what[1:]}"
