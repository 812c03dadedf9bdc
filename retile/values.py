"""Immutable values: what ``dataclasses`` does with ``frozen=True``, without making code when a module is loaded.

``dataclasses.dataclass`` writes and compiles six methods for every class, whether or not a call ever makes an instance;
over all rooms that took longer than the answer to most questions.  Here only ``__init__`` is compiled, for a class with
more than a few instances, and the other methods are shared by all classes::

    @dataclass(frozen=True)
    class Chunk:
        loop: str
        size: int = 64

    Chunk("i") == Chunk("i", 64)                       # compared, hashed and printed by the fields
    replace(Chunk("i"), size=8)                        # a new value; the old one stays
    Chunk("i").size = 8                                # dataclasses.FrozenInstanceError

The classes are dataclasses to all who ask: ``dataclasses.fields``, ``replace`` and ``asdict`` take them, and so do
pickling, copying and ``match``.  Not supported, as nothing here needs it: ``field()`` and ``__post_init__``.
"""

from __future__ import annotations

from functools import cached_property
from operator import attrgetter
from typing import TYPE_CHECKING, Any

_FEW = 8  # instances that take about as long to make in a general way as compiling does

if TYPE_CHECKING:  # for the type checker these are the originals
    from dataclasses import dataclass as dataclass
    from dataclasses import replace as replace
else:
    def dataclass(*, frozen: bool) -> Any:
        """Make a class with annotated fields an immutable value; those with a value in the class have it as default."""
        if not frozen:
            raise TypeError("only for immutable values; dataclasses.dataclass makes the others")
        return _completed

    def replace(instance: Any, /, **changes: Any) -> Any:
        """A new value of the same class with some fields changed; TypeError if it has no such field."""
        given = instance.__dict__
        return instance.__class__(**{name: given[name] for name in instance.__match_args__} | changes)


def _completed(cls: Any) -> Any:
    annotations = cls.__dict__.get("__annotations__", {})
    own = (name for name, kind in annotations.items() if not str(kind).startswith("ClassVar"))
    inherited = (name for base in reversed(cls.__mro__[1:]) for name in base.__dict__.get("__match_args__", ()))
    names = tuple(dict.fromkeys((*inherited, *own)))
    setattr(cls, "__match_args__", names)
    cls.__dataclass_fields__ = _Fields()
    caches = any(isinstance(part, cached_property) for base in cls.__mro__ for part in base.__dict__.values())
    if caches:
        cls._values = attrgetter(*names)
    for name, method in (*_SHARED, *(_BESIDE_CACHES if caches else _ALONE)):
        if name not in cls.__dict__:
            setattr(cls, name, method)
    cls.__init__ = _init_of(cls)
    return cls


def _fields_setter(cls: Any) -> Any:
    """Sets all fields at once, in half the time of an ``object.__setattr__`` for each."""
    owner = next(base for base in cls.__mro__ if "__dict__" in base.__dict__)
    return owner.__dict__["__dict__"].__set__


def _init_of(cls: Any) -> Any:
    """For the first few instances; then, or where a call looks wrong, the compiled one takes its place."""
    names, set_fields, calls = cls.__match_args__, _fields_setter(cls), 0
    defaults = {name: getattr(cls, name) for name in names if hasattr(cls, name)}

    def __init__(self: Any, *given: Any, **named: Any) -> None:
        nonlocal calls
        calls += 1
        later = names[len(given):]
        known = {**defaults, **named}
        if calls > _FEW or len(given) > len(names) or not known.keys() >= set(later) >= named.keys():
            cls.__init__ = _compiled_init(cls, defaults, set_fields)
            cls.__init__(self, *given, **named)
        else:
            set_fields(self, dict(zip(names, given)) | {name: known[name] for name in later})
    return __init__


def _compiled_init(cls: Any, defaults: dict[str, Any], set_fields: Any) -> Any:
    names = cls.__match_args__
    parameters = ["self", *(f"{name}=default_{name}" if name in defaults else name for name in names)]
    fields = ", ".join(f"{name!r}: {name}" for name in names)
    scope: dict[str, Any] = {f"default_{name}": value for name, value in defaults.items()}
    scope |= {"set_fields": set_fields, "__name__": cls.__module__}
    exec(f"def __init__({', '.join(parameters)}):\n    set_fields(self, {{{fields}}})", scope)
    init = scope["__init__"]
    init.__qualname__ = f"{cls.__qualname__}.__init__"
    return init


class _Fields:
    """``__dataclass_fields__``, for those who look: made by the standard library when first asked for."""

    def __get__(self, instance: object, owner: Any) -> Any:
        from dataclasses import field, make_dataclass

        annotations = {name: kind for base in reversed(owner.__mro__)
                       for name, kind in base.__dict__.get("__annotations__", {}).items()}
        plain: Any = make_dataclass(owner.__name__, [
            (name, annotations[name], field(default=getattr(owner, name)) if hasattr(owner, name) else field())
            for name in owner.__match_args__])
        owner.__dataclass_fields__ = plain.__dataclass_fields__
        return owner.__dataclass_fields__


# ---------------------------------------------------------------- the methods that all classes share

def _equal(self: Any, other: Any) -> Any:
    return self.__dict__ == other.__dict__ if other.__class__ is self.__class__ else NotImplemented


def _hash(self: Any) -> int:
    return hash(tuple(self.__dict__.values()))


def _equal_fields(self: Any, other: Any) -> Any:
    return self._values(self) == other._values(other) if other.__class__ is self.__class__ else NotImplemented


def _hash_fields(self: Any) -> int:
    return hash(self._values(self))


def _repr(self: Any) -> str:
    fields = ", ".join(f"{name}={getattr(self, name)!r}" for name in self.__match_args__)
    return f"{self.__class__.__qualname__}({fields})"


def _fixed(self: Any, name: str, *value: object) -> None:
    from dataclasses import FrozenInstanceError

    raise FrozenInstanceError(f"cannot change field {name!r}")


_SHARED = (("__repr__", _repr), ("__setattr__", _fixed), ("__delattr__", _fixed))
_ALONE = (("__eq__", _equal), ("__hash__", _hash))
_BESIDE_CACHES = (("__eq__", _equal_fields), ("__hash__", _hash_fields))  # an instance holds more than its fields
