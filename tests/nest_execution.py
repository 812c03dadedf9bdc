"""What a nest was read as, beside what really happens when its function runs (by the interpreter of ``oracle.py``).

Both are made into one set: (line, what stands there, values of the iterators, cells read, cells written).
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path

from oracle_run import Program
from retile.affine import Affine
from retile.model import Access, Nest, Storage, StorageKind
from retile.sets import Region
from retile.source import open_source

Cell = tuple[str, int]  # object, byte offset
Event = tuple[int, tuple[tuple[str, int], ...], frozenset[Cell], frozenset[Cell]]


def opened(text: str, directory: Path):
    """A C text as an open source file."""
    path = directory / "survey.c"
    path.write_text(text, encoding="utf-8")
    return open_source(str(path))


def line_of_first_for(text: str) -> int:
    """The line of the first ``for`` of a text."""
    return next(number for number, line in enumerate(text.splitlines(), 1) if re.search(r"\bfor\b", line))


def parameter_values(nest: Nest, sizes: Mapping[str, int]) -> dict[str, int]:
    """The values of the parameters: their C text computed with Python's integers, divided as C does."""
    return {p.symbol: _computed(p.text, sizes) for p in nest.parameters}


def _computed(text: str, sizes: Mapping[str, int]) -> int:
    python = re.sub(r"\((unsigned |long |int|size_t|long)+\)", "", text).replace("/", "//")
    ternary = re.fullmatch(r"\(*(.+?)\?(.+?):(.+?)\)*", python)
    if ternary:
        condition, yes, no = (part.strip().strip("()") for part in ternary.groups())
        return int(eval(yes if eval(condition, {}, dict(sizes)) else no, {}, dict(sizes)))
    return int(eval(python, {}, dict(sizes)))


def events_read(nest: Nest, sizes: Mapping[str, int]) -> set[Event]:
    """What the nest was read as, at these sizes."""
    values = parameter_values(nest, sizes)
    found: set[Event] = set()
    for statement in nest.statements:
        region = Region.where(statement.domain).at(values)
        for point in region.points(statement.loops):
            here = {**values, **dict(zip(statement.loops, point, strict=True))}
            named = tuple((nest.loop(id).iterator, value) for id, value in zip(statement.loops, point, strict=True))
            cells = [
                (access.write, _cell(nest.storage(access.storage), access, here, sizes))
                for access in statement.accesses
                if _counts(nest.storage(access.storage), access)
            ]
            found.add(
                (
                    statement.span.line,
                    named,
                    frozenset(c for w, c in cells if not w),
                    frozenset(c for w, c in cells if w),
                )
            )
    return found


def _counts(storage: Storage, access: Access) -> bool:
    return storage.kind is not StorageKind.SCALAR and storage.scope != "block"


def _cell(storage: Storage, access: Access, values: Mapping[str, int], sizes: Mapping[str, int]) -> Cell:
    if access.subscripts is None:
        return (storage.object, -1)
    subscripts = [form.evaluate(values) for form in access.subscripts]
    assert storage.element_bytes is not None
    return (storage.object, _linear(storage, subscripts, values, sizes) * storage.element_bytes)


def _linear(storage: Storage, subscripts: list[int], values: Mapping[str, int], sizes: Mapping[str, int]) -> int:
    if storage.strides:
        return sum(s * _computed(text, sizes) for s, text in zip(subscripts, storage.strides, strict=True))
    total = 0
    for subscript, extent in zip(subscripts, storage.shape, strict=True):
        total = total * (extent if isinstance(extent, Affine) else Affine()).evaluate(values) + subscript
    return total


def events_run(
    text: str, function: str, line: int, sizes: Mapping[str, int], unknown: frozenset[tuple[str, bool]], steps: int = 200_000
) -> set[Event]:
    """What really happens in the nest; branches on data are all taken.

    Cells of objects that are ``unknown`` to reads, or to writes, get offset -1 there.
    """
    machine = Program(text, nest=line).run(function, dict(sizes), may=True, steps=steps)
    found: set[Event] = set()
    for instance in machine.instances:
        cells = [
            (write, (obj.name, -1 if (obj.name, write) in unknown else offset))
            for obj, offset, write in instance.accesses
            if obj.kind in ("caller", "global")
        ]
        inside = [(loop.name, loop.value) for loop in instance.loops if loop.line >= line]
        found.add(
            (instance.line, tuple(inside), frozenset(c for w, c in cells if not w), frozenset(c for w, c in cells if w))
        )
    return found
