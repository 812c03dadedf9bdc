"""Headers that a variant needs, added where a careful reader looks for them."""

from __future__ import annotations

import re

from ..source.lex import tokenize

_INCLUDE = re.compile(r'#[ \t]*include[ \t]*([<"][^>"\n]+[>"])')


def missing(text: str, wanted: tuple[str, ...]) -> tuple[str, ...]:
    """Those of the headers that no unconditional ``#include`` of the file names."""
    present = {match[1] for match, depth, _ in _includes(text) if depth == 0}
    return tuple(header for header in wanted if header not in present)


def insertion(text: str) -> int:
    """Where a further ``#include`` goes: behind the last one outside conditionals, else above the first C token.

    ``text``: the file up to the place that needs the header.
    """
    ends = [end for _, depth, end in _includes(text) if depth == 0]
    if ends:
        return _next_line(text, ends[-1])
    head = re.match(r"\ufeff?", text)
    start = end = head.end() if head else 0
    for token in tokenize(text):
        if token.kind == "comment" and not text[end:token.start].strip("\ufeff \t\r\n") and \
                text.count("\n", end, token.start) < 2:
            end = token.end
        elif token.kind != "blank":
            break
    # the comment at the top is the file's if an empty line follows, else it speaks of what comes next
    return _next_line(text, end) if end > start and re.match(r"[ \t]*\r?\n[ \t]*\r?\n", text[end:]) else start


def _includes(text: str) -> list[tuple[re.Match[str], int, int]]:
    """Every ``#include`` between declarations, with the depth of conditionals that it stands in, and where it ends."""
    found, depth, braces, last = [], 0, 0, ";"
    for token in tokenize(text):
        if token.kind == "punct":
            braces += (token.text in "([{") - (token.text in ")]}")
        if token.kind not in ("directive", "blank", "comment"):
            last = token.text
        word = re.match(r"(?:#|%:)[ \t]*(\w+)", token.spelling) if token.kind == "directive" else None
        if word is None:
            continue
        depth += word[1] in ("if", "ifdef", "ifndef")
        depth -= word[1] == "endif"
        match = _INCLUDE.match(token.spelling)
        if match is not None and not braces and last in (";", "}"):
            found.append((match, depth, token.end))
    return found


def _next_line(text: str, offset: int) -> int:
    end = text.find("\n", offset)
    return len(text) if end < 0 else end + 1
