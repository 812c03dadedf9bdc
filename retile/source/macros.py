"""What a macro call turns into: expansion as the C standard has it, to find out which tokens of the preprocessed text
stand for which piece of the user's text.

The algorithm is Dave Prosser's (X3J11/86-196, also in "The C Preprocessor", GCC internals): every token carries the
set of
macros it must not be taken for again.  The result is only ever compared with what the compiler wrote; where spacing
matters (``#``) or the place (``__LINE__``) a token is ANY, which equals whatever stands there.
"""

from __future__ import annotations

import re
from functools import cached_property
from typing import NamedTuple

from ..values import dataclass
from .lex import spellings


class Piece(NamedTuple):
    """A token on its way through expansion."""

    kind: str
    text: str
    hidden: frozenset[str] = frozenset()


ANY = Piece("any", "")  # one token, whatever it is
PLACEMARKER = Piece("placemarker", "")

# Macros without a definition that the compiler writes down; each gives one token.
DYNAMIC = frozenset(
    {"__LINE__", "__FILE__", "__COUNTER__", "__DATE__", "__TIME__", "__TIMESTAMP__", "__BASE_FILE__"}
    | {"__INCLUDE_LEVEL__", "__FILE_NAME__"}
)
_FUNCTION_LIKE = re.compile(r"\(([^)]*)\)")


class CannotExpand(Exception):
    """The call is beyond this module (or ill-formed)."""


@dataclass(frozen=True)
class Macro:
    """A macro with its definition: ``(x,y) ((x)+(y))`` for a function-like one, else `` 42``."""

    name: str
    definition: str

    @cached_property
    def parameters(self) -> tuple[str, ...] | None:
        """Names of the parameters, a variadic one last; None for an object-like macro."""
        match = _FUNCTION_LIKE.match(self.definition)
        if match is None:
            return None
        names = [name.strip() for name in match[1].split(",")] if match[1].strip() else []
        if names and names[-1].endswith("..."):
            names[-1] = names[-1][:-3].strip() or "__VA_ARGS__"
        return tuple(names)

    @cached_property
    def variadic(self) -> bool:
        """True if the last parameter takes the rest of the arguments."""
        match = _FUNCTION_LIKE.match(self.definition)
        return match is not None and match[1].strip().endswith("...")

    @cached_property
    def body(self) -> tuple[Piece, ...]:
        """The replacement list."""
        match = _FUNCTION_LIKE.match(self.definition)
        rest = self.definition[match.end() :] if match else self.definition
        return tuple(Piece(kind, text) for kind, text in spellings(rest))


class Expander:
    """Expands macro calls with the macros that hold at one place."""

    LARGEST = 20_000  # tokens of one expansion; more is beyond this module

    def __init__(self, macros: dict[str, Macro]) -> None:
        self.macros = macros
        self.steps = 0

    def expand_call(self, pieces: list[Piece]) -> list[Piece]:
        """The full expansion of a complete macro call; CannotExpand if this module does not know."""
        self.steps = 0
        return [piece for piece in self._expand(pieces) if piece.kind != "placemarker"]

    def _expand(self, pieces: list[Piece]) -> list[Piece]:
        done: list[Piece] = []
        rest = pieces[::-1]  # the next token is the last one
        while rest:
            self.steps += 1
            if self.steps > self.LARGEST:
                raise CannotExpand
            piece = rest.pop()
            if piece.kind != "word" or piece.text in piece.hidden:
                done.append(piece)
            elif piece.text in DYNAMIC:
                done.append(ANY)
            elif piece.text in ("_Pragma", "__has_include", "__pragma"):
                if piece.text != "_Pragma":
                    raise CannotExpand
                _skip_group(rest)
            else:
                self._replace(piece, rest, done)
        return done

    def _replace(self, piece: Piece, rest: list[Piece], done: list[Piece]) -> None:
        macro = self.macros.get(piece.text)
        if macro is None:
            done.append(piece)
        elif macro.parameters is None:
            rest.extend(reversed(self._substitute(macro, {}, piece.hidden | {piece.text})))
        elif rest and rest[-1].text == "(" and rest[-1].kind == "punct":
            arguments, closing = _take_arguments(rest)
            bound = _bind(macro, arguments)
            hidden = (piece.hidden & closing.hidden) | {piece.text}
            rest.extend(reversed(self._substitute(macro, bound, hidden)))
        else:
            done.append(piece)

    def _substitute(self, macro: Macro, bound: dict[str, list[Piece]], hidden: frozenset[str]) -> list[Piece]:
        body, result, index = macro.body, [], 0
        while index < len(body):
            piece = body[index]
            following = body[index + 1].text if index + 1 < len(body) else ""
            if piece.text == "#" and macro.parameters is not None and following in bound:
                result.append(ANY)
                index += 2
            elif piece.text in ("##", "%:%:") and result and index + 1 < len(body):
                index += 1
                self._paste(result, body[index], bound, body[index - 2])
                index += 1
            elif piece.text == "__VA_OPT__":
                raise CannotExpand
            elif piece.kind == "word" and piece.text in bound:
                argument = bound[piece.text]
                pasted = following in ("##", "%:%:")
                result.extend((argument or [PLACEMARKER]) if pasted else self._expand(argument))
                index += 1
            else:
                result.append(piece)
                index += 1
        return [p if p is ANY or p.kind == "placemarker" else p._replace(hidden=p.hidden | hidden) for p in result]

    @staticmethod
    def _paste(result: list[Piece], right: Piece, bound: dict[str, list[Piece]], before: Piece) -> None:
        """``left ## right`` at the end of ``result``."""
        pieces = bound[right.text] if right.kind == "word" and right.text in bound else [right]
        if right.text == "#":
            raise CannotExpand
        left = result[-1]
        if left.text == "," and left.kind == "punct":
            # GNU: a comma pasted to absent or present variable arguments.
            if not pieces:
                result.pop()
            result.extend(pieces)
            return
        if not pieces:
            return
        result.pop()
        if left.kind == "placemarker":
            result.extend(pieces)
            return
        if left is ANY or pieces[0] is ANY:
            joined = [ANY]
        else:
            joined = [
                Piece(kind, text, left.hidden & pieces[0].hidden)
                for kind, text in spellings(left.text + pieces[0].text)
            ]
        if len(joined) != 1:
            raise CannotExpand
        result.extend(joined)
        result.extend(pieces[1:])


def _take_arguments(rest: list[Piece]) -> tuple[list[list[Piece]], Piece]:
    """The arguments of a call whose ``(`` comes next, and its ``)``."""
    rest.pop()
    arguments: list[list[Piece]] = [[]]
    depth = 0
    while rest:
        piece = rest.pop()
        if piece.kind == "punct":
            if piece.text == ")" and depth == 0:
                return arguments, piece
            if piece.text == "," and depth == 0:
                arguments.append([])
                continue
            depth += (piece.text == "(") - (piece.text == ")")
        arguments[-1].append(piece)
    raise CannotExpand


def _bind(macro: Macro, arguments: list[list[Piece]]) -> dict[str, list[Piece]]:
    names = macro.parameters or ()
    if not names and arguments == [[]]:
        return {}
    if macro.variadic:
        fixed = len(names) - 1
        if len(arguments) < fixed:
            raise CannotExpand
        tail: list[Piece] = []
        for position, argument in enumerate(arguments[fixed:]):
            if position:
                tail.append(Piece("punct", ","))
            tail.extend(argument)
        return {**dict(zip(names, arguments[:fixed])), names[-1]: tail}
    if len(arguments) != len(names):
        raise CannotExpand
    return dict(zip(names, arguments))


def _skip_group(rest: list[Piece]) -> None:
    """Drop ``( … )``."""
    depth = 0
    while rest:
        piece = rest.pop()
        depth += (piece.text == "(") - (piece.text == ")")
        if depth == 0:
            return
    raise CannotExpand
