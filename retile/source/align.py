"""Which piece of the user's text became which tokens of the preprocessed text.

The tokens of the user's file that the compiler saw (comments, directives and inactive ``#if`` branches left out) and
the
tokens it gave for that file run in the same order: a token that is no macro stands for itself, a macro call for its
expansion, which we work out with the macros that the compiler reports.  Where the two do not agree, all up to the next
line on which they surely meet is left without an origin: the answer there is "unknown", never a guess.
"""

from __future__ import annotations

from bisect import bisect_left
from collections import defaultdict
from typing import NamedTuple

from ..values import dataclass
from .lex import SKIPPED, Token
from .macros import ANY, DYNAMIC, CannotExpand, Expander, Macro, Piece
from .preprocessed import MacroEvent, Unit


class Origin(NamedTuple):
    """A token or a macro call of the user's text and the run of preprocessed tokens that it became."""

    first: int  # index into Alignment.live
    stop: int
    pfirst: int  # index into the preprocessed tokens
    pstop: int
    plain: bool  # a token that stands for itself
    pragma: bool = False  # the call gave a pragma


@dataclass(frozen=True)
class Alignment:
    """The two texts side by side."""

    live: tuple[Token, ...]  # the tokens of the user's text that the compiler saw
    origins: tuple[Origin, ...]
    of: dict[int, int]  # preprocessed token index -> index into origins


def align(tokens: tuple[Token, ...], unit: Unit) -> Alignment:
    """Put the original tokens beside the preprocessed ones of the user's file."""
    own = [index for index, token in enumerate(unit.tokens) if token.file == 0]
    live = live_tokens(tokens, sorted({unit.tokens[index].line for index in own}))
    return _Aligner(live, unit, own).run()


def live_tokens(tokens: tuple[Token, ...], lines: list[int]) -> tuple[Token, ...]:
    """The tokens outside inactive branches; a branch is active if the compiler gave a token for one of its lines."""
    live: list[Token] = []
    marks: list[tuple[int, int]] = []  # open groups: where the branch starts in ``live``, its first line

    def end_branch(line: int) -> None:
        position, first = marks.pop()
        found = bisect_left(lines, first)
        if found == len(lines) or lines[found] >= line:
            del live[position:]

    for token in tokens:
        if token.kind == "directive":
            word = directive_word(token)
            if word in _BRANCH_ENDS and marks:
                end_branch(token.line)
            if word in _BRANCH_STARTS:
                marks.append((len(live), token.last_line + 1))
        elif token.kind not in SKIPPED:
            live.append(token)
    return tuple(live)


_BRANCH_ENDS = frozenset({"elif", "elifdef", "elifndef", "else", "endif"})
_BRANCH_STARTS = frozenset({"if", "ifdef", "ifndef", "elif", "elifdef", "elifndef", "else"})


def directive_word(token: Token) -> str:
    """The name of a directive: ``if``, ``define``, ``pragma``."""
    rest = token.spelling.lstrip("#%: \t\f\v")
    length = 0
    while length < len(rest) and (rest[length].isalnum() or rest[length] == "_"):
        length += 1
    return rest[:length]


class _Aligner:
    def __init__(self, live: tuple[Token, ...], unit: Unit, own: list[int]) -> None:
        self.live, self.unit, self.own = live, unit, own
        self.events = iter(unit.events)
        self.next_event: MacroEvent | None = next(self.events, None)
        self.macros: dict[str, Macro] = {}
        self.expander = Expander(self.macros)
        self.origins: list[Origin] = []
        self.of: dict[int, int] = {}
        self.starts: dict[int, int] | None = None  # line -> position in ``own`` of its first token, made when needed

    def run(self) -> Alignment:
        index = position = 0
        while index < len(self.live):
            token = self.live[index]
            self._advance_macros(token.line)
            origin = self._origin(index, position)
            if origin is None:
                index, position = self._meet_again(index, position)
                continue
            self.origins.append(origin)
            for offset in range(position, position + origin.pstop - origin.pfirst):
                self.of[self.own[offset]] = len(self.origins) - 1
            index, position = origin.stop, position + origin.pstop - origin.pfirst
        return Alignment(self.live, tuple(self.origins), self.of)

    def _advance_macros(self, line: int) -> None:
        while self.next_event and self.next_event.line < line:
            name, definition = self.next_event.name, self.next_event.definition
            if definition is None:
                self.macros.pop(name, None)
            else:
                self.macros[name] = Macro(name, definition)
            self.next_event = next(self.events, None)

    def _origin(self, index: int, position: int) -> Origin | None:
        """The origin that starts with a token, if the preprocessed text from ``position`` on agrees."""
        token = self.live[index]
        if token.kind == "word":
            stop = self._call_end(index, token.spelling)
            if stop is None:
                return None
            if stop > index:
                return self._call(index, stop, position)
        if position >= len(self.own) or self.unit.tokens[self.own[position]].text != token.spelling:
            return None
        place = self.own[position]
        return Origin(index, index + 1, place, place + 1, True)

    def _call_end(self, index: int, name: str) -> int | None:
        """Where the macro call that starts here ends; ``index`` if there is none, None if it does not end."""
        if name in DYNAMIC:
            return index + 1
        macro = self.macros.get(name)
        if macro is None and name != "_Pragma":
            return index
        if macro is not None and macro.parameters is None:
            return index + 1
        return self._group_end(index + 1) if self._text(index + 1) == "(" else index

    def _text(self, index: int) -> str:
        return self.live[index].text if index < len(self.live) else ""

    def _group_end(self, index: int) -> int | None:
        """After the ``)`` of the ``(`` at ``index``."""
        depth = 0
        for stop in range(index, len(self.live)):
            text = self.live[stop].text
            depth += (text == "(") - (text == ")")
            if depth == 0:
                return stop + 1
        return None

    def _expanded(self, index: int, stop: int) -> tuple[list[Piece], int] | None:
        """The expansion of the call at ``index`` and its end: an expansion may take its arguments from behind."""
        for _ in range(8):
            try:
                expansion = self.expander.expand_call(
                    [Piece(token.kind, token.spelling) for token in self.live[index:stop]]
                )
            except (CannotExpand, RecursionError):
                return None
            if not (expansion and self._text(stop) == "(" and self._takes_arguments(expansion[-1])):
                return expansion, stop
            longer = self._group_end(stop)
            if longer is None:
                return None
            stop = longer
        return None

    def _call(self, index: int, stop: int, position: int) -> Origin | None:
        found = self._expanded(index, stop)
        if found is None:
            return None
        expansion, stop = found
        pieces = [Piece(token.kind, token.spelling) for token in self.live[index:stop]]
        places = self.own[position : position + len(expansion)]
        if len(places) < len(expansion) or (places and places[-1] - places[0] >= len(places)):
            return None
        for piece, place in zip(expansion, places):
            if piece is not ANY and piece.text != self.unit.tokens[place].text:
                return None
        first = places[0] if places else (self.own[position] if position < len(self.own) else len(self.unit.tokens))
        pragma = any(piece.text == "_Pragma" for piece in pieces) or self._gives_pragma(pieces)
        return Origin(index, stop, first, places[-1] + 1 if places else first, False, pragma)

    def _takes_arguments(self, piece: Piece) -> bool:
        macro = self.macros.get(piece.text)
        return macro is not None and macro.parameters is not None and piece.text not in piece.hidden

    def _gives_pragma(self, pieces: list[Piece]) -> bool:
        """True if a macro named in the call mentions ``_Pragma``, itself or through others."""
        seen: set[str] = set()
        waiting: list[Piece] = pieces
        while waiting:
            names = {piece.text for piece in waiting if piece.kind == "word" and piece.text in self.macros} - seen
            if any("_Pragma" in self.macros[name].definition for name in names):
                return True
            seen |= names
            waiting = [piece for name in names for piece in self.macros[name].body]
        return False

    def _meet_again(self, index: int, position: int) -> tuple[int, int]:
        """The next line that starts with a token that is no macro, on which both texts agree."""
        if self.starts is None:
            starts: dict[int, int] = defaultdict(int)
            for place in range(len(self.own) - 1, -1, -1):
                starts[self.unit.tokens[self.own[place]].line] = place
            self.starts = dict(starts)
        line = self.live[index].line
        for later in range(index + 1, len(self.live)):
            token = self.live[later]
            if token.line == line:
                continue
            line = token.line
            place = self.starts.get(line, -1)
            if place < position or place < 0:
                continue
            self._advance_macros(line)
            if token.spelling in self.macros or token.spelling in DYNAMIC:
                continue
            if self.unit.tokens[self.own[place]].text == token.spelling:
                return later, place
        return len(self.live), len(self.own)
