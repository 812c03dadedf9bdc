"""Immutable values: they do what the standard library's frozen dataclasses do."""

from __future__ import annotations

import copy
import dataclasses
import pickle
from functools import cached_property

import pytest

from retile import values
from retile.affine import Affine
from retile.values import replace

# One text, once with each decorator: the standard library's is what the other is compared with.
TEXT = '''
from __future__ import annotations

@dataclass(frozen=True)
class Chunk:
    """A loop's name, and how many of its iterations a step covers."""
    loop: str
    size: int = 64

@dataclass(frozen=True)
class Named(Chunk):
    """One field more than the class that it is made from."""
    name: str = "ROWS"

@dataclass(frozen=True)
class Nothing:
    """No field at all."""

@dataclass(frozen=True)
class Written:
    """Its text is its own."""
    what: tuple[int, ...] = ()
    def __str__(self):
        return "written"
    def __repr__(self):
        return "represented"
'''


def _classes(decorator):
    scope = {"dataclass": decorator, "__name__": __name__}
    exec(TEXT, scope)
    return {name: scope[name] for name in ("Chunk", "Named", "Nothing", "Written")}


OURS, THEIRS = _classes(values.dataclass), _classes(dataclasses.dataclass)
CALLS = [("Chunk", ("i",), {}), ("Chunk", ("i", 64), {}), ("Chunk", (), {"size": 8, "loop": "j"}),
         ("Named", ("i",), {}), ("Named", ("i", 64, "COLUMNS"), {}), ("Nothing", (), {}), ("Written", (), {}), ("Written", ((1, 2),), {})]


def _made(classes):
    return [classes[name](*given, **named) for name, given, named in CALLS]


def test_fields_and_text():
    for ours, theirs in zip(_made(OURS), _made(THEIRS), strict=True):
        assert vars(ours) == vars(theirs)
        assert (repr(ours), str(ours)) == (repr(theirs), str(theirs))
        assert type(ours).__match_args__ == type(theirs).__match_args__


def test_equality_and_hash():
    ours, theirs = _made(OURS), _made(THEIRS)
    assert [[a == b for b in ours] for a in ours] == [[a == b for b in theirs] for a in theirs]
    for a in ours:
        assert a != tuple(vars(a).values())
        assert {hash(a) for b in ours if a == b} == {hash(b) for b in ours if a == b}
    assert len(set(ours)) == len(set(theirs)) == len(CALLS) - 1


@pytest.mark.parametrize("given, named", [((), {}), (("i", 1, 2), {}), (("i",), {"loop": "j"}), (("i",), {"step": 1})])
def test_wrong_calls(given, named):
    for classes in (OURS, THEIRS):
        with pytest.raises(TypeError):
            classes["Chunk"](*given, **named)


def test_nothing_can_be_changed():
    for chunk in (OURS["Chunk"]("i"), THEIRS["Chunk"]("i")):
        for change in (lambda c: setattr(c, "size", 8), lambda c: setattr(c, "other", 8), lambda c: delattr(c, "size")):
            with pytest.raises(dataclasses.FrozenInstanceError):
                change(chunk)
        assert chunk.size == 64
        with pytest.raises(TypeError):
            hash(replace(chunk, loop=[]))


@pytest.mark.parametrize("change", [replace, dataclasses.replace])
def test_replace_leaves_the_old_value(change):
    for classes in (OURS, THEIRS):
        named = classes["Named"]("i")
        assert change(named, size=8) == classes["Named"]("i", 8)
        assert change(named) == named == classes["Named"]("i")
        with pytest.raises(TypeError):
            change(named, other=1)


def test_the_standard_library_takes_them_for_dataclasses():
    for name in OURS:
        ours, theirs = OURS[name], THEIRS[name]
        assert dataclasses.is_dataclass(ours)
        assert [(f.name, f.type, f.default) for f in dataclasses.fields(ours)] == \
            [(f.name, f.type, f.default) for f in dataclasses.fields(theirs)]
    assert dataclasses.asdict(OURS["Named"]("i")) == {"loop": "i", "size": 64, "name": "ROWS"}


def test_copies_and_pickles():
    form = Affine.of("i") * 2 + Affine.of("n").floor_div(4)
    for again in (copy.copy(form), copy.deepcopy(form), pickle.loads(pickle.dumps(form))):
        assert again == form and hash(again) == hash(form) and repr(again) == repr(form)


def test_match_by_position():
    match OURS["Named"]("i", 8):
        case object(loop=loop):
            assert loop == "i"
    chunk = OURS["Chunk"]
    match chunk("i", 8):
        case chunk(loop, size):
            assert (loop, size) == ("i", 8)


def test_what_is_computed_once_is_no_part_of_the_value():
    @values.dataclass(frozen=True)
    class Square:
        side: int

        @cached_property
        def area(self) -> int:
            return self.side * self.side

    one, other = Square(3), Square(3)
    assert one.area == 9
    assert one == other and hash(one) == hash(other) and repr(one) == repr(other)
    assert replace(one, side=4).area == 16


def test_only_immutable_values():
    with pytest.raises(TypeError):
        values.dataclass(frozen=False)
