"""Tests, when the function is called, of the facts that a variant rests on.

Two storages do not overlap if one's last touched byte lies before the other's first.  The touched subscripts are
projected from the nest's instances onto the parameters (the box that they need), and addresses are compared as
integers: pointers are only converted, never moved, and sums of ``uintptr_t`` cannot be undefined.  If the nest makes no
round, it touches nothing, and either answer is right.

A box that some access reaches lies in memory, so that its addresses cannot wrap around.  One that may be larger than
what is touched (``i < n && i < m`` inside ``n``) is compared with what an address can hold, in ``double``.
"""

from __future__ import annotations

import re

from ..affine import Affine, AllOf, Constraint, Formula, formula_names
from ..model import (
    Assumption,
    AssumptionCode,
    CType,
    Nest,
    RetileError,
    Storage,
)
from ..sets import Region
from ..touched import Touched, reached, touched
from ..values import dataclass, replace
from .ahead import Ahead, address_of, conjunction, parts_of, stands_in
from .expression import UNARY, NoRoom, Scope, condition, written
from .extents import ADDRESS, Arithmetic
from .names import Names

_NAMED_TYPE = re.compile(r"(?:struct|union|enum) \w+|(?!(?:struct|union|enum|void)\b)[A-Za-z_]\w*")
# A range of fewer bytes, either way, cannot wrap around.
_SURELY_ADDRESSED = 1 << 62


@dataclass(frozen=True)
class Tests:
    """What a variant has to test: declarations ahead of the ``if``, and its conditions."""

    declarations: tuple[str, ...]
    conditions: tuple[str, ...]
    ahead: tuple[Formula, ...] = ()  # those among the conditions that say where the original reads what the others need
    fallback: bool = True  # False if the original has nothing to do where they fail


def tests_of(nest: Nest, assumptions: tuple[Assumption, ...], scope: Scope, names: Names,
             leading: tuple[Formula, ...] = ()) -> Tests:
    """The tests of some assumptions, after the ``leading`` conditions; RetileError if one cannot be tested."""
    tested = [a for a in assumptions if a.testable or not a.given]
    known = [a.condition for a in tested if a.condition is not None and not _apart(a)]
    ranges = _Ranges(nest, scope, scope.knowing(*known) if known else scope, names)
    read = [name for fact in known if not scope.implies(fact) for name in sorted(formula_names(fact))]
    for assumption in filter(_apart, tested):
        read += ranges.measure(assumption)
    ahead = (*leading, *ranges.ahead.needed(read, scope.region & Region.where(*leading)))
    first = parts_of(ahead, scope)
    scope = scope.knowing(*ahead) if ahead else scope
    conditions: list[str] = []
    for assumption in tested:
        if _apart(assumption):
            conditions.append(ranges.apart(assumption))
        elif assumption.condition is not None:
            for part in _parts(assumption):
                if not scope.implies(part):
                    conditions.append(condition(part, scope).text)
                    scope = scope.knowing(part)
    idle = all(ranges.ahead.idle_without(statement.id, ahead) for statement in nest.statements) and \
        not any(loop.iterator_live_after for loop in nest.loops) if ahead and not ranges.signs and not conditions else False
    return Tests(tuple(ranges.declarations), (*first, *ranges.signs, *dict.fromkeys(conditions)), ahead, not idle)


def _apart(assumption: Assumption) -> bool:
    return assumption.code in (AssumptionCode.NO_OVERLAP, AssumptionCode.UNCHANGED) and len(assumption.storages) == 2


def _parts(assumption: Assumption) -> tuple[Formula, ...]:
    if assumption.condition is None:
        return ()
    return assumption.condition.parts if isinstance(assumption.condition, AllOf) else (assumption.condition,)


def _name_for(text: str) -> str:
    """``g_cols`` for ``g->cols``, ``per_value`` for ``*per``."""
    words = re.findall(r"\w+", text.replace("(long long)", "").replace("(unsigned long long)", ""))
    while words and words[0][0].isdigit():
        words.pop(0)
    return "_".join(words) if len(words) > 1 else f"{words[0]}_value" if words else "value"


class _Ranges:
    def __init__(self, nest: Nest, scope: Scope, tested: Scope, names: Names) -> None:
        """``tested``: the scope where all other tests hold."""
        self._nest = nest
        self._scope = scope
        self._tested = tested
        self._names = names
        self.ahead = Ahead(nest)
        self._copied: dict[str, str] = {}  # what may not be read everywhere, by C text: the name of its copy
        self._arithmetic = Arithmetic(scope, texts=self._copied)
        self._named: dict[str, tuple[str, str]] = {}
        self.declarations: list[str] = []
        self.signs: list[str] = []

    def apart(self, assumption: Assumption) -> str:
        """The condition that two storages' touched bytes lie apart."""
        one, other = assumption.storages
        first, second = self._named[one], self._named[other]
        return f"{first[1]} <= {second[0]} || {second[1]} <= {first[0]}"

    def measure(self, assumption: Assumption) -> list[str]:
        """Declare the addresses of the first touched byte of two storages, and of the one behind the last."""
        return [name for storage in assumption.storages if storage not in self._named
                for name in self._declare(storage, assumption)]

    def _declare(self, name: str, assumption: Assumption) -> list[str]:
        """The declarations of one storage; gives the parameters and addresses that they read."""
        own = self._nest.storage(name)
        found = self._touched(own, assumption)
        read = self._copy_of(own, found)
        storage, low, high = self._extent(own, found)
        word = "_".join(re.findall(r"\w+", name)) + ("_pointer" if name.startswith("&") else "")
        begin, end = self._names.fresh(f"{word}_begin"), self._names.fresh(f"{word}_end")
        base = f"(uintptr_t){written(storage.pointer_text or name, ADDRESS).at(UNARY)}"
        size = self._size(storage)
        asked = self.ahead.of_storage(name, self._scope.region) if storage is own else ()
        if asked:  # a pointer in memory, or the address of what is in it
            pointer = self._names.fresh(f"{word}_address") if low != "0" else begin
            chosen = f"{conjunction(asked, self._scope)} ? {base} : 0"
            base, start = pointer, pointer
            if low != "0":
                self.declarations.append(f"const uintptr_t {pointer} = {chosen};")
        else:
            chosen = start = base
        start = chosen if low == "0" else f"{start} + {self._times(low, size)}"
        self.declarations += [f"const uintptr_t {begin} = {start};",
                              f"const uintptr_t {end} = {begin if low == '0' else base} + {self._times(high, size)};"]
        self._named[name] = (begin, end)
        return [*read, *([address_of(name)] if asked else [])]

    def _copy_of(self, storage: Storage, found: Touched) -> list[str]:
        """Declare copies of what a range needs and may not be read everywhere; gives the parameters that it needs."""
        extents = [extent for extent in storage.shape if extent is not None]
        symbols = {name for form in (*found.lows, *found.highs, *extents) for name in form.names()}
        texts = [p.text for p in self._nest.parameters if p.symbol in symbols] + list(storage.strides)
        read = [p for p in self._nest.parameters if any(stands_in(p.text, text) for text in texts)]
        for parameter in sorted(read, key=lambda p: -len(p.text)):
            asked = self.ahead.needed((parameter.symbol,), self._scope.region)
            if asked and any(stands_in(parameter.text, self._arithmetic.replaced(text)) for text in texts):
                name = self._names.fresh(_name_for(parameter.text))
                value = f"{conjunction(asked, self._scope)} ? {parameter.text} : 0"
                self.declarations.append(f"const {parameter.type.spelling} {name} = {value};")
                self._copied[parameter.text] = name
        return [parameter.symbol for parameter in read]

    @staticmethod
    def _times(count: str, size: str) -> str:
        if count == "1":
            return size
        return f"({count}) * {size}" if " + " in count or " - " in count else f"{count} * {size}"

    @staticmethod
    def _size(storage: Storage) -> str:
        if isinstance(storage.element, CType) and storage.element_bytes in (None, storage.element.bits // 8):
            return f"sizeof({storage.element.spelling})"
        if isinstance(storage.element, str) and re.fullmatch(_NAMED_TYPE, storage.element):
            return f"sizeof({storage.element})"
        if not storage.shape and storage.pointer_text:  # a structure without a name, a pointer
            text = storage.pointer_text
            return f"sizeof {text[1:]}" if re.fullmatch(r"&\w+", text) else f"sizeof({text[1:]})" if text.startswith("&") \
                else f"sizeof *{written(text, ADDRESS).at(UNARY)}"
        return str(storage.element_bytes)

    def _touched(self, storage: Storage, assumption: Assumption) -> Touched:
        found = touched(self._nest, storage, self._scope.region)
        if found is None:
            raise self._untestable(storage, assumption)
        return found

    def _extent(self, storage: Storage, found: Touched) -> tuple[Storage, str, str]:
        """What the range is counted in, its first touched element, and the one behind the last."""
        if not found.lows:
            extents = [extent for extent in storage.shape if extent is not None]
            return storage, "0", " * ".join(map(self._arithmetic.whole, extents)) or "1"
        lows, highs = list(found.lows), list(found.highs)
        whole = storage.whole or storage
        if storage.whole is not None and not whole.strides:  # the structures that the members lie in
            lows, highs = lows[:len(whole.shape)], highs[:len(whole.shape)]
        highs[-1] = highs[-1] + 1
        try:
            self._note_signs(whole)
            self._note_wrap(storage, found, whole, lows, highs)
            strides = self._arithmetic.strides(whole, len(lows))
            if len(lows) > 1 and self._is_extent(highs[-1], strides[-2]):  # whole rows: (n - 1) * m + m
                highs[-2:] = [highs[-2] + 1, Affine()]
            return whole, self._arithmetic.linear(lows, strides), self._arithmetic.linear(highs, strides)
        except NoRoom:
            raise RetileError(f"{self._nest.address}: the addresses that the nest touches cannot be computed without "
                              "overflow; give --trust, or declare the pointers 'restrict'.") from None

    def _is_extent(self, form: Affine, stride: str | None) -> bool:
        """True if a form is the row length that a stride's text says."""
        return stride is not None and bool(form.terms) and \
            stride in (self._arithmetic.added(form), self._arithmetic.whole(form))

    def _untestable(self, storage: Storage, assumption: Assumption) -> RetileError:
        return RetileError(f"{self._nest.address}: which cells of '{storage.name}' the nest touches is not known, so that "
                           f"'{assumption.text}' cannot be tested when the function is called.\n"
                           "Declare the pointers 'restrict', or give --distinct if you know that it holds.")

    def _note_signs(self, storage: Storage) -> None:
        """A row length must not be negative, or the first cell were the last."""
        for text in storage.strides:
            parameter = next((p for p in self._nest.parameters if p.text == text), None)
            if parameter is not None and parameter.type.signed and \
                    not self._tested.implies(Constraint(Affine.of(parameter.symbol))):
                self._note(f"{self._copied.get(text, text)} >= 0")

    def _note_wrap(self, storage: Storage, found: Touched, whole: Storage, lows: list[Affine], highs: list[Affine]) -> None:
        """A range that may be larger than what is touched must not wrap around."""
        size = whole.element_bytes or (whole.element.bits // 8 if isinstance(whole.element, CType) else 1)
        if self._reach(whole, lows, highs) * size < _SURELY_ADDRESSED or \
                reached(self._nest, storage, found, self._scope.region):
            return
        rough = replace(self._arithmetic, type="double")
        strides = rough.strides(whole, len(lows))
        for side, sign, limit in ((lows, ">", "-1e18"), (highs, "<", "1e18")):
            count = rough.linear(side, strides)
            if count != "0":
                self._note(f"{self._times(count, self._size(whole))} {sign} {limit}")

    def _reach(self, storage: Storage, lows: list[Affine], highs: list[Affine]) -> int:
        """The number of elements that the range cannot exceed, whatever the sizes."""
        spans = [self._largest(low) + self._largest(high) for low, high in zip(lows, highs, strict=True)]
        total = 0
        for at, span in enumerate(spans):
            total += span * self._stride_limit(storage, at, len(spans))
        return total

    def _largest(self, form: Affine) -> int:
        low, high = self._scope.best_range(form)
        return _SURELY_ADDRESSED if low is None or high is None else max(abs(low), abs(high))

    def _stride_limit(self, storage: Storage, at: int, dimensions: int) -> int:
        if storage.strides:
            text = storage.strides[at].strip()
            parameter = next((p for p in self._nest.parameters if p.text == text), None)
            return 1 if text in ("", "1") else self._largest(Affine.of(parameter.symbol)) if parameter else _SURELY_ADDRESSED
        limit = 1
        for extent in storage.shape[len(storage.shape) - dimensions + at + 1:]:
            limit *= _SURELY_ADDRESSED if extent is None else self._largest(extent)
        return limit

    def _note(self, test: str) -> None:
        if test not in self.signs:
            self.signs.append(test)
