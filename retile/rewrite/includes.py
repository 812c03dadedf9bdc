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
    """Where a further ``#include`` goes: behind the last one outside conditionals, else before the first C token."""
    ends = [end for _, depth, end in _includes(text) if depth == 0]
    if ends:
        return _next_line(text, ends[-1])
    for token in tokenize(text):
        if token.kind == "directive" or token.kind not in ("blank", "comment"):
            return text.rfind("\n", 0, token.start) + 1 if not text[text.rfind("\n", 0, token.start) + 1:token.start] \
                .strip() else token.start
    return len(text)


def _includes(text: str) -> list[tuple[re.Match[str], int, int]]:
    """Every ``#include`` with the depth of conditionals that it stands in, and where it ends."""
    found, depth = [], 0
    for token in tokenize(text):
        if token.kind != "directive":
            continue
        word = re.match(r"(?:#|%:)[ \t]*(\w+)", token.spelling)
        if word is None:
            continue
        depth += word[1] in ("if", "ifdef", "ifndef")
        depth -= word[1] == "endif"
        match = _INCLUDE.match(token.spelling)
        if match is not None:
            found.append((match, depth, token.end))
    return found if depth == 0 else []


def _next_line(text: str, offset: int) -> int:
    end = text.find("\n", offset)
    return len(text) if end < 0 else end + 1
