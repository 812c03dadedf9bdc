"""Nests in many styles, and the samples: what they are read as is what happens when they run.

The right side comes from the interpreter of ``oracle.py``, which knows nothing of loops as sets.
"""

from __future__ import annotations

import re

import pytest
from command_line import SAMPLES
from nest_execution import Event, events_read, events_run, line_of_first_for, opened
from nest_styles import STYLES
from retile.model import Nest
from retile.nest import read_nest, read_nests
from retile.source import open_source
from walk import holds

SIZES = {
    "beams": 5, "beams_count": 3, "cells": 6, "cols": 5, "colour": 1, "ld": 6, "ld_beams": 5, "ld_echoes": 7,
    "ld_weights": 5, "m": 5, "n": 4, "n_beams": 3, "n_phones": 5, "n_samples": 4, "phones": 4, "pings": 4,
    "profiles": 3, "readings": 4, "rows": 4, "samples": 6, "sides": 3, "steps": 3, "sweeps": 2, "terms": 3,
    "used_pings": 2, "width": 2,
}  # fmt: skip
TOO_LONG = {"filter_window", "apply_gain", "mark_window"}  # fixed sizes of a real window
OTHER_OBJECTS = {"smooth_grid", "scale_rows"}  # pointers in memory, which the interpreter names in its own way


def assumed(nest: Nest, values: dict[str, int]) -> bool:
    """True if all assumptions with a condition, and all facts, hold at these sizes."""
    conditions = [a.condition for a in nest.assumptions if a.condition is not None]
    return all(holds(formula, values) for formula in (*conditions, *nest.facts))


def unknown_objects(nest: Nest) -> frozenset[tuple[str, bool]]:
    """Objects of which some read, or some write, may be to any cell."""
    return frozenset(
        (nest.storage(a.storage).object, a.write) for s in nest.statements for a in s.accesses if a.subscripts is None
    )


def with_memory(events: set[Event]) -> set[Event]:
    """Only what touches arrays: conditions over iterators alone are no statements of a nest."""
    return {event for event in events if event[2] or event[3]}


def without_lines(events: set[Event]) -> set[Event]:
    """Events of a text with one statement per line would keep them; continued lines are told apart by their cells."""
    return {(0, *event[1:]) for event in events}


def in_structures(events: set[Event], bytes_of: dict[str, int]) -> set[Event]:
    """Cells by element instead of byte: members of one structure count as one cell."""

    def cells(found: frozenset[tuple[str, int]]) -> frozenset[tuple[str, int]]:
        return frozenset((name, offset // bytes_of.get(name, 1)) for name, offset in found)

    return {(line, iterators, cells(reads), cells(writes)) for line, iterators, reads, writes in events}


@pytest.mark.parametrize(("text", "sizes"), [style[1:] for style in STYLES], ids=[style[0] for style in STYLES])
def test_a_style_is_read_as_it_runs(text, sizes, tmp_path):
    line = line_of_first_for(text)
    found = read_nest(opened(text, tmp_path), line)
    assert found.nest is not None, found.refusals
    nest = found.nest
    bytes_of = {s.object: s.element_bytes for s in nest.storages if s.element_bytes and "." in s.name}
    run = with_memory(events_run(text, nest.function, line, sizes, unknown_objects(nest)))
    read = with_memory(events_read(nest, sizes))
    assert in_structures(without_lines(read), bytes_of) == in_structures(without_lines(run), bytes_of)
    assert run, "the sizes make the nest run"


def sample_functions() -> list[tuple[str, int]]:
    found = []
    for path in sorted(SAMPLES.glob("*.c")):
        found += [
            (path.name, f.address.line)
            for f in read_nests(open_source(str(path)))
            if f.outermost and f.nest is not None and f.function not in TOO_LONG | OTHER_OBJECTS
        ]
    return found


@pytest.mark.parametrize(("file", "line"), sample_functions())
def test_a_sample_is_read_as_it_runs(file, line):
    path = SAMPLES / file
    nest = read_nest(open_source(str(path)), line).nest
    assert nest is not None
    lines = {statement.span.line for statement in nest.statements}
    run = events_run(path.read_text(encoding="utf-8"), nest.function, line, SIZES, unknown_objects(nest))
    assert {event for event in run if event[0] in lines} == events_read(nest, SIZES)


@pytest.mark.parametrize("file", sorted({file for file, _ in sample_functions()}))
def test_facts_and_assumptions_hold_at_usual_sizes(file):
    for found in read_nests(open_source(str(SAMPLES / file))):
        if found.nest is not None and found.outermost and found.function not in OTHER_OBJECTS:
            values = {p.symbol: SIZES[p.symbol] for p in found.nest.parameters if p.symbol in SIZES}
            if len(values) == len(found.nest.parameters):
                assert assumed(found.nest, values), found.address


def test_every_style_has_a_name_of_its_own():
    names = [style[0] for style in STYLES]
    assert len(set(names)) == len(names) and all(re.fullmatch(r"[a-z0-9 ]+", name) for name in names)
