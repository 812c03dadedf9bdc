"""Two executions side by side: the cells that outlive them, what became of them, and who touched what."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from operator import itemgetter
from typing import Any

from .history import Histories
from .kinds import Number, Struct
from .memory import Machine, Object, cell_name
from .normal import Forms
from .tags import UNSET, Book


@dataclass(frozen=True)
class Outcome:
    """One execution that came to its end."""

    machine: Machine
    result: Any  # of the function: a tag, a plain integer, a target or None


@dataclass
class Rules:
    """What has to be equal."""

    book: Book
    every_write: bool = False  # all values that a cell ever holds, in order, not only the last
    reassociate: bool = False  # accumulations may be done in another order
    excepted: set[str] = field(default_factory=set)  # cells that were equal only up to the order of accumulations
    forms: Forms = field(init=False)

    def __post_init__(self) -> None:
        self.forms = Forms(self.book, self.reassociate)

    def equal(self, a: Any, b: Any) -> bool:
        """Whether two values of cells have the same history."""
        return a == b or (type(a) is int and type(b) is int and self.forms.form(a) == self.forms.form(b))


def differences(before: Outcome, after: Outcome, rules: Rules) -> Iterator[str]:
    """What the second execution does otherwise than the first, in words; nothing if it is as good."""
    ours, theirs = before.machine, after.machine
    for name in sorted(theirs.objects.keys() | ours.objects.keys()):
        first, second = ours.objects.get(name), theirs.objects.get(name)
        if second is not None:
            yield from _touched(first, second)
    for name in sorted(theirs.objects.keys() | ours.objects.keys()):
        first, second = ours.objects.get(name), theirs.objects.get(name)
        if first is not None or second is not None:
            yield from _left(first, second, before, after, rules)
    for name in sorted(ours.statics.keys() & theirs.statics.keys()):
        yield from _static(ours.statics[name], theirs.statics[name], rules)
    if not rules.equal(_canonical(before.result), _canonical(after.result)):
        yield "the function returns another value"
    if theirs.live > ours.live:
        yield "memory that it allocates is never freed"


def _touched(first: Object | None, second: Object) -> Iterator[str]:
    """Cells of the caller that only the variant reads or writes."""
    known: Any = first if first is not None else {}
    written = dict(first.writes).keys() if first is not None else set()
    writes = dict(second.writes).keys()
    for offset in sorted(second.keys() - known.keys()):
        if offset not in writes and _beside(first, second, offset):
            continue
        word = "writes" if offset in writes else "reads"
        yield f"it {word} {cell_name(second, offset)}, which the original does not touch"
    for offset in sorted(writes - written):
        if offset in known:
            yield f"it writes {cell_name(second, offset)}, which the original only reads"


def _beside(first: Object | None, second: Object, offset: int) -> bool:
    """True for what is there whoever looks: a variable of the file, a member of a structure that is read anyway."""
    kind = second.kind
    if second.single:
        return True
    if first is None or not isinstance(kind, Struct) or not kind.size:
        return False
    return any(at // kind.size == offset // kind.size for at in first)


def _left(first: Object | None, second: Object | None, before: Outcome, after: Outcome, rules: Rules) -> Iterator[str]:
    """Cells that end with another value, or, if every write counts, hold others on the way."""
    if first is not None and second is not None and _surely_alike(first, second, rules):
        return
    ours, theirs = _sequences(first), _sequences(second)
    for offset in sorted(ours.keys() | theirs.keys()):
        obj = first if first is not None else second
        assert obj is not None
        name = cell_name(obj, offset)
        if offset not in theirs:
            if not rules.every_write and second is not None and offset in second and \
                    rules.equal(ours[offset][-1], _canonical(second[offset])):
                continue
            yield f"{name} is never written; the original leaves {_shown(ours[offset][-1], before, rules)} there"
            continue
        if offset not in ours:
            continue  # told as a cell that the original does not write
        yield from _cell(name, ours[offset], theirs[offset], obj, (before, after), rules)


def _surely_alike(first: Object, second: Object, rules: Rules) -> bool:
    """The quick answer for most objects: the same values written to each cell, in the same order or at last."""
    if not isinstance(first.kind, Number):
        return False
    ours, theirs = dict(first.writes), dict(second.writes)
    if ours != theirs or any(value is UNSET for value in theirs.values()):
        return False
    if not rules.every_write or len(first.writes) == len(second.writes) == len(ours):
        return True
    cell = itemgetter(0)
    return sorted(first.writes, key=cell) == sorted(second.writes, key=cell)


def _cell(name: str, ours: list[Any], theirs: list[Any], obj: Object, both: tuple[Outcome, Outcome],
          rules: Rules) -> Iterator[str]:
    if theirs[-1] is UNSET:
        yield f"{name} ends with a value that was never set"
        return
    if ours[-1] != theirs[-1]:
        if not rules.equal(ours[-1], theirs[-1]):
            yield _told(name, ours[-1], theirs[-1], both, rules)
            return
        rules.excepted.add(name)
    elif rules.every_write and ours != theirs and not _wraps(obj) and not rules.reassociate:
        yield f"{name} ends alike, but is written {_way(ours, theirs)}"


def _way(ours: list[Any], theirs: list[Any]) -> str:
    if len(ours) != len(theirs):
        return f"{len(theirs)} times, the original writes it {len(ours)} times"
    return "in another order on the way"


def _wraps(obj: Object) -> bool:
    """Updates of unsigned cells may run in any order."""
    return isinstance(obj.kind, Number) and not obj.kind.floating


def _told(name: str, expected: Any, found: Any, both: tuple[Outcome, Outcome], rules: Rules) -> str:
    if type(expected) is not int or type(found) is not int:
        return f"{name} ends as {_shown(found, both[1], rules)}, the original leaves {_shown(expected, both[0], rules)}"
    ours, theirs = Histories(rules.book, lambda *cell: _initial(both[0], both[1], *cell)).pair(expected, found)
    return f"{name} ends with another value; in the original comes {ours}, in the variant {theirs}"


def _initial(before: Outcome, after: Outcome, name: str, offset: int) -> str:
    obj = before.machine.objects.get(name) or after.machine.objects.get(name)
    return cell_name(obj, offset) if obj is not None else f"{name}+{offset}"


def _shown(value: Any, outcome: Outcome, rules: Rules) -> str:
    if type(value) is int:
        return Histories(rules.book, lambda *cell: _initial(outcome, outcome, *cell)).text(value)
    return "no value" if value is UNSET else f"the address of {value[1]}"


def _sequences(obj: Object | None) -> dict[int, list[Any]]:
    """What was written to each cell, in order."""
    found: dict[int, list[Any]] = {}
    for offset, value in obj.writes if obj is not None else ():
        found.setdefault(offset, []).append(_canonical(value))
    return found


def _canonical(value: Any) -> Any:
    """A value that does not depend on the run."""
    return ("pointer", value[0].name, value[1]) if type(value) is tuple else value


def _static(first: Object, second: Object, rules: Rules) -> Iterator[str]:
    for offset in sorted(first.keys() | second.keys()):
        if not rules.equal(_canonical(first.get(offset)), _canonical(second.get(offset))):
            yield f"{cell_name(second, offset)} ends with another value"


__all__ = ["Outcome", "Rules", "differences"]
