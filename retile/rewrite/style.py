"""The user's way of writing: indentation, braces, line ends, comments, read off the nest and, failing that, the file."""

from __future__ import annotations

import re

from ..model import Nest
from ..values import dataclass
from .expression import AND, Expression
from .layout import NestText

# Generated conditions are broken beyond this many columns.
WIDTH = 100


@dataclass(frozen=True)
class Style:
    """How loops are laid out."""

    eol: str
    step: str  # what a body is indented by
    braced_step: str  # what a body in braces is indented by, which differs where braces are indented themselves
    brace: str  # ``end``: on the header's line; ``own``: on a line of its own
    brace_step: str  # what a brace on a line of its own is indented by
    line_comments: bool  # remarks are written with ``//``

    def remark(self, lines: list[str], indent: str) -> list[str]:
        """A comment of these lines, every line with its indentation."""
        lines = [line.replace("*/", "* /").replace("/*", "/ *").rstrip("\\") for line in lines]
        if self.line_comments:
            return [f"{indent}// {line}" for line in lines]
        start = [f"{indent}/* {lines[0]}", *(f"{indent}   {line}" for line in lines[1:])]
        return [*start[:-1], start[-1] + " */"]

    def wrapped(self, condition: Expression, before: str) -> str:
        """A condition behind this text, in several lines if one would be too long."""
        if len(before) + len(condition.text) <= WIDTH or condition.level != AND:
            return condition.text
        indent = before[:len(before) - len(before.lstrip())] + self.step
        return condition.text.replace(" && ", f"{self.eol}{indent}&& ")

    def block(self, header: str, body: list[str], indent: str, braced: bool = True, behind: str = "") -> list[str]:
        """A header with its body, whose lines are indented already; ``behind`` follows the header on its line."""
        if not braced:
            return [indent + header + behind, *body]
        if self.brace == "end":
            return [f"{indent}{header} {{{behind}", *body, indent + "}"]
        inner = indent + self.brace_step
        return [indent + header + behind, inner + "{", *body, inner + "}"]

    def otherwise(self, lines: list[str], body: list[str], indent: str) -> list[str]:
        """A braced block with an ``else`` behind it."""
        if self.brace == "end":
            return [*lines[:-1], indent + "} else {", *body, indent + "}"]
        inner = indent + self.brace_step
        return [*lines, indent + "else", inner + "{", *body, inner + "}"]


def read_style(text: str, nest: Nest, layout: NestText) -> Style:
    """The style of a nest in its file."""
    brace, brace_step = _braces(text, nest, layout)
    start = nest.span.start
    crlf = text.count("\r\n")
    eol = "\r\n" if crlf and crlf * 2 > text.count("\n") else "\n"
    plain, braced = (_step(nest, layout, braces) for braces in (False, True))
    if brace_step:
        plain = plain or brace_step
        braced = braced or plain + brace_step
    step = plain or braced or _own_step(nest, layout)
    return Style(eol, step, braced or step, brace, brace_step, _line_comments(text, start))


def _step(nest: Nest, layout: NestText, braced: bool) -> str:
    """The indentation of a body, in braces or not, against its header; empty if the nest shows none."""
    for loop in nest.loops:
        if layout.braced(loop) is not braced:
            continue
        outer, start = layout.indentation(loop.span.start), layout.first_inside(loop)
        inner = layout.indentation(start)
        if "\n" in layout.text[loop.header.end:start] and inner.startswith(outer) and len(inner) > len(outer):
            return inner[len(outer):]
    return ""


def _own_step(nest: Nest, layout: NestText) -> str:
    """The indentation of the nest itself, taken for one level."""
    own = layout.indentation(nest.span.start)
    return "\t" if own.startswith("\t") else " " * (min(len(own), 8) or 4)


_BRACE = re.compile(r"\)[ \t]*(\r?\n([ \t]*))?\{")


def _braces(text: str, nest: Nest, layout: NestText) -> tuple[str, str]:
    """Where an opening brace goes, and how far it is indented on a line of its own."""
    for loop in nest.loops:
        if layout.braced(loop):
            gap = text[loop.header.end:loop.body.start]
            if "\n" not in gap:
                return "end", ""
            return "own", _beyond(layout.indentation(loop.body.start), layout.indentation(loop.span.start))
    after = [match for match in re.finditer(r"\b(?:for|if|while)\b[^;{}\n]*(?:;[^;{}\n]*;[^;{}\n]*)?" + _BRACE.pattern,
                                            text)]
    if after:
        match = after[0]
        if match[1] is None:
            return "end", ""
        return "own", _beyond(match[2], layout.indentation(match.start()))
    # no braced statement in the file: the body of a function shows the style least, since many put its brace apart
    return "end", ""


def _beyond(indent: str, outer: str) -> str:
    return indent[len(outer):] if indent.startswith(outer) else ""


def _line_comments(text: str, start: int) -> bool:
    """True if the file's own comments are ``//`` ones for the most part."""
    lines = len(re.findall(r"^[ \t]*//", text, re.MULTILINE))
    blocks = len(re.findall(r"^[ \t]*/\*", text, re.MULTILINE))
    return lines > blocks
