"""GNU and C23 spellings made palatable to a parser of C11, token by token, so that every place survives.

Spellings with a standard twin get it (``__restrict`` is ``restrict``); what says nothing about values and order
falls away
(attributes, alignment, ``__extension__``).  What the parser cannot read but may matter becomes something that stays
visible as unknown: a call of a function (``__asm__``, ``__statement_expression__``) or a type of its own
(``__typeof_3__``).  Nothing is changed that could make a meaning look simpler than it is.
"""

from __future__ import annotations

import re

from .preprocessed import Unit


class ParserText:
    """The tokens for the parser: number ``k`` stands for preprocessed tokens ``first[k]`` to ``last[k]``."""

    def __init__(self) -> None:
        self.text: list[str] = []
        self.first: list[int] = []
        self.last: list[int] = []
        # Typedef names that stand for a type of an expression or a type, with the tokens of the operand.
        self.typeof: dict[str, tuple[str, ...]] = {}
        # Dropped attributes that change a type or a layout: (number of the next token, word).
        self.dropped: list[tuple[int, str]] = []

    def add(self, text: str, first: int, last: int) -> None:
        """Append a token."""
        self.text.append(text)
        self.first.append(first)
        self.last.append(last)


STATEMENT_EXPRESSION = "__statement_expression__"
UNKNOWN_VALUE = "__unknown_value__"
ASSEMBLER = "__asm__"

LAYOUT_WORDS = frozenset({"packed", "aligned", "Alignas", "alignas", "align", "ms_struct", "gcc_struct"})
TYPE_WORDS = frozenset({"vector_size", "ext_vector_type", "mode", "address_space", "scalar_storage_order"})

# Types that compilers know by name and the parser does not; they are declared before everything else.
EXTRA_TYPES = (
    "__builtin_va_list", "_Float16", "_Float32", "_Float64", "_Float128", "_Float32x", "_Float64x", "__float128",
    "__float80", "__bf16", "__fp16", "__int128_t", "__uint128_t", "__ibm128", "_Decimal32", "_Decimal64", "_Decimal128",
)  # fmt: skip

_TWINS = {
    "__restrict": "restrict", "__restrict__": "restrict", "__inline": "inline", "__inline__": "inline",
    "__const": "const", "__const__": "const", "__volatile": "volatile", "__volatile__": "volatile",
    "__signed": "signed", "__signed__": "signed", "__complex__": "_Complex", "__complex": "_Complex",
    "__thread": "_Thread_local", "__builtin_offsetof": "offsetof", "__real__": "~", "__imag__": "~", "__real": "~",
    "__imag": "~", "<:": "[", ":>": "]", "<%": "{", "%>": "}", "__int128__": "__int128",
    "__FUNCTION__": "__func__", "__PRETTY_FUNCTION__": "__func__",
}  # fmt: skip
_TWINS_C23 = {
    "bool": "_Bool", "true": "1", "false": "0", "nullptr": "((void *)0)", "thread_local": "_Thread_local",
    "constexpr": "const", "static_assert": "_Static_assert", "alignas": "_Alignas", "alignof": "_Alignof",
}  # fmt: skip
_DROPPED = frozenset(
    {"__extension__", "_Noreturn", "_Nonnull", "_Nullable", "_Null_unspecified", "__cdecl", "__stdcall", "__fastcall"}
)
_DROPPED_WITH_GROUP = frozenset({"__attribute__", "__attribute", "__declspec", "_Alignas", "_Pragma", "_Static_assert"})
_UNKNOWN_WITH_GROUP = frozenset(
    {"__builtin_types_compatible_p", "__builtin_va_arg", "__builtin_choose_expr", "_Alignof", "__alignof__",
     "__alignof", "__builtin_has_attribute", "__builtin_convertvector"}
)  # fmt: skip
_ASM = frozenset({"asm", "__asm", "__asm__"})
_TYPEOF = frozenset({"typeof", "__typeof", "__typeof__", "typeof_unqual", "__typeof_unqual__"})
_OPERATORS = frozenset("( , = { [ ; : ? + - * / % & | ^ < > ! ~ && || == != <= >= return".split())
_NUMBER = re.compile(
    r"(?:0[xX][\da-fA-F]+|0[bB][01]+|\d+)(?:[uU]?(?:ll|LL|[lL])?|(?:ll|LL|[lL])[uU]?)"
    r"|(?:\d*\.\d+|\d+\.?)(?:[eE][+-]?\d+)?[fFlL]?"
    r"|0[xX](?:[\da-fA-F]*\.[\da-fA-F]+|[\da-fA-F]+\.?)[pP][+-]?\d+[fFlL]?"
)
_LONGEST = {"number": 1_000, "string": 20_000, "char": 1_000}  # characters
_OTHER_SUFFIX = re.compile(r"(?<=[\d.])(?:[fF]\d+x?|[qQwW]|bf16|BF16)$")


def for_parser(unit: Unit, *, c23: bool) -> ParserText:
    """The translation unit as tokens that a parser of C11 with few extensions reads."""
    return _Dialect(unit, c23).run()


class _Dialect:
    def __init__(self, unit: Unit, c23: bool) -> None:
        self.tokens = unit.tokens
        self.twins = {**_TWINS, **_TWINS_C23} if c23 else _TWINS
        self.c23 = c23
        self.out = ParserText()
        self.braces = 0

    def run(self) -> ParserText:
        index, count = 0, len(self.tokens)
        special = (
            _DROPPED | _DROPPED_WITH_GROUP | _UNKNOWN_WITH_GROUP | _ASM | _TYPEOF
            | {"__auto_type", "__label__", "goto", "&&", "(", "[", "?", "...", "enum", "auto", "{", "}", "[["}
        )  # fmt: skip
        twins, add = self.twins, self.out.add
        while index < count:
            kind, text = self.tokens[index][:2]
            text = twins.get(text, text)
            if text in special:
                index = self._special(text, index)
            else:
                add(self._literal(kind, text), index, index)
                index += 1
        return self.out

    # Each of the following adds what stands for the construct at ``index`` and gives the index after it.

    def _special(self, text: str, index: int) -> int:
        after = self._text(index + 1)
        if text in "{}":
            self.braces += 1 if text == "{" else -1
        elif text in _DROPPED:
            return index + 1
        elif text in _DROPPED_WITH_GROUP:
            return self._drop(index, self._group(index + 1) if after == "(" else index + 1)
        elif text in _UNKNOWN_WITH_GROUP and after == "(":
            return self._replace(UNKNOWN_VALUE + "()", index, self._group(index + 1))
        elif text in _ASM:
            return self._assembler(index)
        elif text in _TYPEOF and after == "(":
            return self._typeof(index, self._group(index + 1))
        elif text == "__auto_type" or (text == "auto" and self.c23 and self._text(index + 2) == "="):
            return self._typeof(index, index + 1)
        elif text == "__label__":
            return self._until(";", index)
        elif text == "goto" and after == "*":
            return self._replace("goto __computed__", index, self._until(";", index))
        elif text == "&&" and self._previous() in _OPERATORS:
            return self._replace(UNKNOWN_VALUE + "()", index, index + 2)
        elif text == "(" and after == "{":
            return self._replace(STATEMENT_EXPRESSION + "()", index, self._group(index))
        elif text == "[" and after == "[":
            return self._drop(index, self._group(index))
        elif text == "?" and after == ":":
            self.out.add("?", index, index)
            self.out.add(UNKNOWN_VALUE + "()", index, index)
            return index + 1
        elif text == "..." and self._text(index + 2) == ":":
            return index + 2  # case 1 ... 5: only the switch matters
        elif text == "enum":
            return self._enum(index)
        return self._replace(text, index, index + 1)

    def _drop(self, index: int, stop: int) -> int:
        for token in self.tokens[index:stop]:
            word = token.text.strip("_")
            if word in LAYOUT_WORDS or word in TYPE_WORDS:
                self.out.dropped.append((len(self.out.text), word))
        return stop

    def _text(self, index: int) -> str:
        return self.tokens[index].text if index < len(self.tokens) else ""

    def _previous(self) -> str:
        return self.out.text[-1] if self.out.text else ";"

    def _replace(self, text: str, index: int, stop: int) -> int:
        self.out.add(text, index, stop - 1)
        return stop

    def _group(self, index: int) -> int:
        """After the group of brackets that opens at ``index``; at the end if it does not close."""
        depth = 0
        for stop in range(index, len(self.tokens)):
            text = self.tokens[stop].text
            if text in ("(", "[", "{"):
                depth += 1
            elif text in (")", "]", "}"):
                depth -= 1
                if depth == 0:
                    return stop + 1
        return len(self.tokens)

    def _until(self, text: str, index: int) -> int:
        while index < len(self.tokens) and self.tokens[index].text != text:
            index += 1
        return index

    def _assembler(self, index: int) -> int:
        stop = index + 1
        while self._text(stop) in ("volatile", "__volatile__", "__volatile", "inline", "__inline__", "goto"):
            stop += 1
        if self._text(stop) != "(":
            return self._replace(self.tokens[index].text, index, index + 1)
        stop = self._group(stop)
        statement = self.braces > 0 and self._previous() in (";", "{", "}", ":", ")", "else", "do")
        return self._replace(ASSEMBLER + "()", index, stop) if statement else stop

    def _typeof(self, index: int, stop: int) -> int:
        name = f"__typeof_{len(self.out.typeof)}__"
        self.out.typeof[name] = tuple(token.text for token in self.tokens[index + 2 : stop - 1])
        return self._replace(name, index, stop)

    def _enum(self, index: int) -> int:
        """``enum name : type {`` of C23 loses the type."""
        stop = self._replace("enum", index, index + 1)
        if self._text(stop) not in ("{", ":", ";"):
            if self._text(stop) in _DROPPED_WITH_GROUP:
                return stop
            stop = self._replace(self._text(stop), stop, stop + 1)
        if self._text(stop) == ":":
            brace = self._until("{", stop)
            if brace - stop < 6:
                return brace
        return stop

    def _literal(self, kind: str, text: str) -> str:
        """A token as the parser can read it; it takes kilobytes for each character of a literal."""
        if len(text) > _LONGEST.get(kind, len(text)):
            return UNKNOWN_VALUE + "()"
        return self._number(text) if kind == "number" else text

    def _number(self, text: str) -> str:
        if _NUMBER.fullmatch(text):
            return text
        plain = _OTHER_SUFFIX.sub("", text.replace("'", ""))
        return plain if _NUMBER.fullmatch(plain) else UNKNOWN_VALUE + "()"
