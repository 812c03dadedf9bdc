"""The arithmetic types of the user's compiler and their conversions (ISO/IEC 9899:2018, 6.2.5 and 6.3.1)."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from ..model import CType
from ..values import replace
from .macros import Macro


class Arithmetic:
    """Widths and conversions, read off the compiler's predefined macros (those of LP64 where it has none)."""

    def __init__(self, macros: dict[str, Macro]) -> None:
        self._macros = macros
        bits = self.number("__CHAR_BIT__", 8)
        self.char_bits = bits
        self.char_signed = "__CHAR_UNSIGNED__" not in macros
        size = {
            "short": self.number("__SIZEOF_SHORT__", 2), "int": self.number("__SIZEOF_INT__", 4),
            "long": self.number("__SIZEOF_LONG__", 8), "long long": self.number("__SIZEOF_LONG_LONG__", 8),
            "__int128": 16,
        }  # fmt: skip
        self.pointer_bytes = self.number("__SIZEOF_POINTER__", 8)
        self._types = {
            "_Bool": CType("_Bool", bits, False),
            "char": CType("char", bits, self.char_signed),
            "signed char": CType("signed char", bits, True),
            "unsigned char": CType("unsigned char", bits, False),
        }
        for name, width in size.items():
            self._types[name] = CType(name, width * bits, True)
            self._types["unsigned " + name] = CType("unsigned " + name, width * bits, False)
        floats = {
            "float": self.number("__SIZEOF_FLOAT__", 4), "double": self.number("__SIZEOF_DOUBLE__", 8),
            "long double": self.number("__SIZEOF_LONG_DOUBLE__", 16), "_Float16": 2, "__bf16": 2, "__fp16": 2,
            "_Float32": 4, "_Float64": 8, "_Float128": 16, "__float128": 16, "_Float32x": 8, "_Float64x": 16,
            "__float80": 16, "_Decimal32": 4, "_Decimal64": 8, "_Decimal128": 16,
        }  # fmt: skip
        for name, width in floats.items():
            self._types[name] = CType(name, width * bits, True, True)
            self._types[name + " _Complex"] = CType(name + " _Complex", 2 * width * bits, True, True)
        self._types["__int128_t"], self._types["__uint128_t"] = (
            self._types["__int128"],
            self._types["unsigned __int128"],
        )
        self.int = self._types["int"]
        self.double = self._types["double"]
        self.size_type = self.predefined("__SIZE_TYPE__", "unsigned long", "size_t")
        self.difference_type = self.predefined("__PTRDIFF_TYPE__", "long", "ptrdiff_t")

    def number(self, macro: str, default: int) -> int:
        """The value of a predefined macro that is a plain number."""
        found = self._macros.get(macro)
        text = found.definition.strip() if found else ""
        return int(text) if text.isdigit() else default

    def predefined(self, macro: str, default: str, spelling: str) -> CType:
        """The type that a macro such as ``__SIZE_TYPE__`` names, spelt as its typedef."""
        found = self._macros.get(macro)
        named = self.named((found.definition if found else default).split())
        return replace(named or self._types[default], spelling=spelling)

    def named(self, words: Sequence[str]) -> CType | None:
        """The type that specifiers name in any order: ``long unsigned int``; None if they name none."""
        if len(words) == 1 and words[0] in self._types:
            return self._types[words[0]]
        count = Counter(words)
        complex_ = bool(count.pop("_Complex", 0))
        unsigned, signed = bool(count.pop("unsigned", 0)), bool(count.pop("signed", 0))
        longs = count.pop("long", 0)
        if unsigned and signed:
            return None
        if complex_:
            base = "long double" if longs and count in ({}, {"double": 1}) else next(iter(count), "double")
            return self._types.get(base + " _Complex") if longs <= 1 and sum(count.values()) <= 1 else None
        if "double" in count:
            ok = sum(count.values()) == 1 and longs <= 1 and not (signed or unsigned)
            return self._types["long double" if longs else "double"] if ok else None
        if "char" in count:
            ok = sum(count.values()) == 1 and not longs
            return self._types["unsigned char" if unsigned else "signed char" if signed else "char"] if ok else None
        count.pop("int", 0)
        if "__int128" in count and not longs:
            base, extra = "__int128", count["__int128"] - 1 + sum(count.values()) - count["__int128"]
        elif "short" in count and not longs:
            base, extra = "short", sum(count.values()) - 1
        else:
            base, extra = ("int", "long", "long long")[min(longs, 2)], sum(count.values()) + max(0, longs - 2)
        if extra or not words:
            return None
        return self._types[("unsigned " if unsigned else "") + base]

    def promoted(self, type: CType) -> CType:
        """The integer promotions."""
        return self.int if not type.floating and type.bits < self.int.bits else type

    def common(self, left: CType, right: CType) -> CType:
        """The usual arithmetic conversions."""
        if left.floating or right.floating:
            return self._common_floating(left, right)
        left, right = self.promoted(left), self.promoted(right)
        if left.bits != right.bits:
            return left if left.bits > right.bits else right
        if left.signed != right.signed:
            return right if left.signed else left
        return left

    def _common_floating(self, left: CType, right: CType) -> CType:
        if not (left.floating and right.floating):
            return left if left.floating else right
        complex_ = "_Complex" in left.spelling or "_Complex" in right.spelling
        wider = max((left, right), key=self._real_bits)
        if complex_ and "_Complex" not in wider.spelling:
            return self._types.get(wider.spelling + " _Complex", left if wider is right else right)
        return wider

    @staticmethod
    def _real_bits(type: CType) -> int:
        return type.bits // (2 if "_Complex" in type.spelling else 1)

    def unsigned(self, type: CType) -> CType:
        """The unsigned type of the same width."""
        return self._types.get("unsigned " + type.spelling, replace(type, signed=False))

    def literal(self, text: str) -> tuple[int, CType] | None:
        """Value and type of an integer constant (6.4.4.1); None if it is none or fits no type."""
        digits = text.rstrip("uUlL")
        suffix = text[len(digits) :].lower()
        try:
            value = _integer(digits)
        except ValueError:
            return None
        decimal = not digits.startswith("0") or digits == "0"
        longs = suffix.count("l")
        names = ["int", "long", "long long"][longs:]
        for name in names:
            for unsigned in (False, True):
                type = self._types[("unsigned " if unsigned else "") + name]
                wanted = unsigned if "u" in suffix else (not unsigned or not decimal)
                if wanted and value <= type.largest:
                    return value, type
        return None


def _integer(digits: str) -> int:
    if digits[:2].lower() == "0x":
        return int(digits, 16)
    if digits[:2].lower() == "0b":
        return int(digits, 2)
    return int(digits, 8) if digits.startswith("0") and digits != "0" else int(digits)
