"""Memory of one execution: objects with cells at byte offsets, which hold tags or, for pointers, their targets."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Mapping
from typing import Any

from .kinds import Array, Kind, Number, Pointer, Struct, TooLong, Undefined, Unsupported, alike, cells_of, element_of
from .tags import UNSET, Book

FAR = 1 << 27  # bytes; farther from its beginning no object of a test reaches: what a wrapped subscript gives
_SPACING = 1 << 32


class Object(dict[int, Any]):
    """A piece of memory of the caller, which may hold anything: a cell that is read first gets its initial value.

    The keys tell which cells were touched, ``writes`` what was written where, in order.
    """

    __slots__ = ("machine", "name", "where", "kind", "base", "writes", "log", "declared", "iterator", "shape", "single",
                 "_fractions")

    def __init__(self, machine: Machine, name: str, where: str, kind: Kind | None, declared: object = None) -> None:
        super().__init__()
        machine.bases += _SPACING
        self.machine, self.name, self.base = machine, name, machine.bases
        self.where = where  # "caller" or "global"; for memory of the program's own: "local", "block" or "heap"
        self.kind = kind  # the type of an element; None for memory that nobody has used yet
        self._fractions = kind.size if isinstance(kind, Number) and kind.floating else 0
        self.writes: Any = []
        self.log: Callable[[Any], None] = self.writes.append
        self.declared = declared or name  # the same for all executions of a declaration
        self.iterator = False
        self.single = False  # one variable, no array
        self.shape: tuple[int, ...] = ()  # lengths of its rows, outermost first, where a declaration says so

    __hash__ = object.__hash__  # type: ignore[assignment]

    def __repr__(self) -> str:
        return f"<{self.name}>"

    def __missing__(self, offset: int) -> Any:
        if self._fractions and not offset % self._fractions and -FAR < offset < FAR:  # the short way, for most cells
            value = self[offset] = self.machine.book.initial_reals[self.name, offset]
        else:
            value = self[offset] = self.machine.initial(self, offset)
        return value

    def leaf(self, offset: int) -> Kind:
        """The type of the cell at an offset."""
        kind = self.kind
        if isinstance(kind, Struct) and kind.size:
            offset %= kind.size
            if offset not in kind.flat:
                raise Unsupported(f"{self.name} is read as another type than it has")
            return kind.flat[offset][1]
        if kind is None or offset % kind.size:
            raise Unsupported(f"{self.name} is read as another type than it has")
        return kind

    def seen_as(self, kind: Kind) -> None:
        """A pointer to this memory becomes one to elements of a type; Unsupported if they are read differently."""
        kind = element_of(kind)
        if self.kind is None:
            self.kind = kind
        elif not alike(self.kind, kind):
            raise Unsupported(f"{self.name} is looked at as another type than it has")


class Own(Object):
    """Memory of the program's own: of known extent, without a value until one is written."""

    __slots__ = ("extent", "cleared", "state", "whole")

    def __init__(self, machine: Machine, name: str, where: str, kind: Kind | None, extent: int,
                 declared: object = None) -> None:
        super().__init__(machine, name, where, None if kind is None else element_of(kind), declared)
        self.whole = kind  # the type of the whole variable
        self.writes = deque(maxlen=0)
        self.log = self.writes.append
        self.extent = extent
        self.cleared = False  # of calloc
        self.state = "live"

    def __missing__(self, offset: int) -> Any:
        if self.state != "live":
            raise Undefined(f"memory of {self.name} is read after it was freed")
        if not 0 <= offset < self.extent:
            raise Undefined(f"{self.name} is read outside its {self.extent} bytes")
        if self.cleared:
            value = self[offset] = self.machine.zero(self.leaf(offset))
            return value
        raise Undefined(f"{cell_name(self, offset)} is read before it has a value")

    def __setitem__(self, offset: int, value: Any) -> None:
        if not 0 <= offset < self.extent:
            gone = "after it was freed" if self.state != "live" else f"outside its {self.extent} bytes"
            raise Undefined(f"{self.name} is written {gone}")
        dict.__setitem__(self, offset, value)

    def end(self) -> None:
        """Its lifetime ends."""
        self.clear()
        self.extent, self.state = 0, "gone"


class Null(Own):
    """Where a null pointer leads."""

    __slots__ = ()

    def __missing__(self, offset: int) -> Any:
        raise Undefined("access through a null pointer")

    def __setitem__(self, offset: int, value: Any) -> None:
        raise Undefined("access through a null pointer")

    def seen_as(self, kind: Kind) -> None:
        """A null pointer of any type."""

    def __bool__(self) -> bool:
        return False


class Machine:
    """The memory of one execution and what it may use."""

    def __init__(self, book: Book, sizes: Mapping[str, int], steps: int = 200_000, *, default: int | None = None,
                 refused: frozenset[int] | None = frozenset(), order: str = "") -> None:
        self.book, self.sizes, self.steps, self.default = book, sizes, steps, default
        self.refused = refused  # numbers of the allocations that fail; None for all of them
        self.order = order  # of the iterations of parallel loops: "", "reversed" or "shuffled"
        self.lenient = False  # also what would be undefined is run, where both branches of conditions are
        self.reached = False  # the nest that is watched was executed
        self.bases = 0
        self.objects: dict[str, Object] = {}  # those that outlive the function, by name
        self.heap: list[Own] = []
        self.allocations = 0
        self.asked: dict[str, int] = {}  # the integers by name that were looked up, and what they were
        self.null = Null(self, "a null pointer", "heap", None, 0)
        self.null.base = 0
        self.statics: dict[str, Own] = {}  # variables of functions that keep their values
        self.together: dict[str, tuple[str, int]] = {}  # pointers into another's object: (its name, bytes)

    # ------------------------------------------------------------ objects

    def outer(self, name: str, where: str, kind: Kind) -> tuple[Object, int]:
        """The object of the caller, or of the file, that a name leads to, and the offset in it."""
        if name in self.together:
            other, shift = self.together[name]
            whole, _ = self.outer(other, where, kind)
            whole.seen_as(kind)
            return whole, shift
        found = self.objects.get(name)
        if found is None:
            found = self.objects[name] = Object(self, name, where, element_of(kind))
            found.single = where == "global" and not isinstance(kind, Array)
        return found, 0

    def own(self, name: str, where: str, kind: Kind, extent: int, declared: object = None) -> Own:
        """Memory for a variable of the program."""
        return Own(self, name, where, kind, extent, declared)

    def initial(self, obj: Object, offset: int) -> Any:
        """What a cell of the caller holds that nobody wrote: sizes by name, invented data elsewhere."""
        if abs(offset) > FAR and not self.lenient:
            raise Undefined(f"a subscript of {obj.name} is far outside any object of a test")
        kind, book = obj.leaf(offset), self.book
        if isinstance(kind, Pointer):
            name = cell_name(obj, offset)
            return self.outer(name.removesuffix("[0]") if "->" in name else name, "caller", kind.to)
        if not isinstance(kind, Number):
            raise Unsupported(f"the value of {cell_name(obj, offset)}")
        place = (obj.name, offset)
        if kind.floating:
            return book.initial_reals[place]
        if offset == 0 or isinstance(obj.kind, Struct):
            value = self.size(cell_name(obj, offset), obj.single or isinstance(obj.kind, Struct))
            if value is not None:
                fitting(cell_name(obj, offset), value, kind)
                return book.integers[value]
        return book.initial_integers[place]

    def size(self, name: str, sized: bool) -> int | None:
        """The value of an integer that was given by its name; None for what nobody gave one."""
        value = self.sizes.get(name, self.default if sized else None)
        if value is not None:
            self.asked[name] = value
        return value

    def zero(self, kind: Kind) -> Any:
        """A cell with all bits zero."""
        if isinstance(kind, Pointer):
            return self.null, 0
        if not isinstance(kind, Number):
            raise Unsupported("cleared memory of this type")
        return self.book.reals[0.0] if kind.floating else self.book.integers[0]

    def check_far(self) -> None:
        """Undefined if something was written far outside any object of a test; reads say so themselves."""
        for obj in self.objects.values():
            if obj and (max(obj) > FAR or min(obj) < -FAR):
                raise Undefined(f"a subscript of {obj.name} is far outside any object of a test")

    # ------------------------------------------------------------ counting

    def spend(self, steps: int) -> None:
        """Count iterations."""
        self.steps -= steps
        if self.steps < 0:
            raise TooLong

    def tick(self) -> None:
        """Count one iteration."""
        self.steps -= 1
        if self.steps < 0:
            raise TooLong

    def values(self, low: int, stop: int, step: int, least: int, most: int) -> range:
        """The values of an iterator; they and the value after the last must fit its type."""
        found = range(low, stop, step)
        if found:
            self.steps -= len(found)
            if self.steps < 0:
                raise TooLong
            if not least <= found[-1] + step <= most:
                if least == 0:
                    raise TooLong  # it wraps around and goes on
                raise Undefined(f"{found[-1] + step} overflows the iterator's type")
        return found

    def meeting(self, low: int, stop: int, step: int, least: int, most: int) -> range:
        """The values of an iterator that runs until it meets a bound, of a loop that ends."""
        if (stop - low) % step or (stop - low) * step < 0:
            raise TooLong
        return self.values(low, stop, step, least, most)

    def unordered(self, values: range) -> Any:
        """The iterations of a loop that threads share, in an order of the machine's own."""
        if self.order == "reversed":
            return list(reversed(values))
        if self.order == "shuffled":
            return sorted(values, key=lambda value: (value * 7919 + 13) % 31)
        return values

    # ------------------------------------------------------------ the heap

    def allocate(self, size: int, cleared: bool = False) -> tuple[Own, int]:
        """Memory of ``malloc`` and its kin, or a null pointer where this allocation is to fail."""
        number = self.allocations
        self.allocations += 1
        if size < 0 or size > FAR or self.refused is None or number in self.refused:
            return self.null, 0
        obj = Own(self, f"allocated memory {number + 1}", "heap", None, size)
        obj.cleared = cleared
        self.heap.append(obj)
        return obj, 0

    def free(self, obj: Object, offset: int) -> None:
        """Give memory back."""
        if obj is self.null:
            return
        if not isinstance(obj, Own) or obj.where != "heap" or offset != 0:
            raise Undefined(f"{obj.name} is freed, which was not allocated")
        if obj.state != "live":
            raise Undefined(f"{obj.name} is freed twice")
        obj.end()

    @property
    def live(self) -> int:
        """How many pieces of allocated memory nobody gave back."""
        return sum(obj.state == "live" for obj in self.heap)

    def copy(self, target: tuple[Object, int], source: tuple[Object, int], size: int, overlap: bool) -> None:
        """``memcpy`` and ``memmove``: every cell that has a value in the source."""
        (to, at), (origin, start) = target, source
        if not size:
            return
        if to.kind is None and origin.kind is not None:
            to.kind = origin.kind
        if origin is to and not overlap and abs(at - start) < size:
            raise Undefined(f"memcpy inside {to.name} overlaps")
        cells = []
        for shift in _places(origin, start, size):
            if not isinstance(origin, Own) or start + shift in origin or origin.cleared:
                cells.append((shift, origin[start + shift]))
        for shift, value in cells:
            to[at + shift] = value
            to.log((at + shift, value))

    def clear(self, target: tuple[Object, int], size: int) -> None:
        """``memset`` to zero."""
        obj, at = target
        for shift in _places(obj, at, size):
            value = obj[at + shift] = self.zero(obj.leaf(at + shift))
            obj.log((at + shift, value))


def _places(obj: Object, start: int, size: int) -> list[int]:
    """The offsets from ``start`` of the whole cells in a piece of memory."""
    if obj.kind is None:
        raise Unsupported("memory whose elements have no type yet is copied or cleared")
    whole = obj.kind.size
    if size % whole or start % whole:
        raise Unsupported("a part of an element is copied or cleared")
    leaves = cells_of(obj.kind)
    return [at + offset for at in range(0, size, whole) for offset in leaves]


# ---------------------------------------------------------------- names


def cell_name(obj: Object, offset: int) -> str:
    """``a[3]``, ``g->n``, ``p[2].x``, ``s``: a name for a cell that does not depend on the run."""
    kind = obj.kind
    if isinstance(kind, Struct) and kind.size:
        index, rest = divmod(offset, kind.size)
        member = kind.flat[rest][0] if rest in kind.flat else f"+{rest}"
        if obj.where == "caller":
            return f"{obj.name}->{member}" if index == 0 else f"{obj.name}[{index}].{member}"
        return f"{obj.name}.{member}" if index == 0 else f"{obj.name}[{index}].{member}"
    if isinstance(kind, (Number, Pointer)):
        return obj.name + _subscripts(obj, offset // kind.size) if obj.where == "caller" or offset else obj.name
    return f"{obj.name}+{offset}" if offset else obj.name


def fitting(name: str, value: int, kind: Kind) -> None:
    """Undefined if no caller can give this value to an integer of the type."""
    if isinstance(kind, Number) and not kind.low <= value <= kind.high:
        raise Undefined(f"{name} = {value} does not fit its type")


def _subscripts(obj: Object, element: int) -> str:
    text = ""
    for length in reversed(obj.shape):
        if length < 1 or element < 0:
            break
        element, rest = divmod(element, length)
        text = f"[{rest}]{text}"
    return f"[{element}]{text}"


__all__ = ["FAR", "UNSET", "Array", "Machine", "Null", "Object", "Own", "cell_name", "fitting"]
