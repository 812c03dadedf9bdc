"""Sizes to verify at: awkward ones, at which the nest is defined and its assumptions hold."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence

from ..affine import Affine, Formula, bound_names
from ..model import Nest, Plan, RetileError
from ..sets import Region
from .layout import Bench, names_needed

_SMALL = (0, 1, 2, 3, 7)
_UNEQUAL = (5, 7, 11, 13, 3, 17)  # primes, so that no size divides another
_WORK_OF_ALL = 40_000_000  # executions of statements, all cases together
_WORK_OF_ONE = 20_000_000
_CASES = 40
_BREAKING = 4  # cases that break an assumption


def verification_sizes(bench: Bench, plans: Iterable[Plan], trust: bool = False) -> list[dict[str, int]]:
    """Sizes (by symbol, hidden integers by name), those with little work first.

    For every size that bounds a chunked loop: 0, 1, 2, a prime, and the chunk less one, exact, plus one, and twice the
    chunk plus one, once with all sizes alike and once with the others different.  What would take too long is left out.
    Unless variants are trusted to be called only where their assumptions hold, a few sizes break the assumptions.
    """
    chunks = chunks_of_sizes(bench, plans)
    good = defined_region(bench.nest)
    chosen: dict[tuple[tuple[str, int], ...], int] = {}  # sizes -> work
    _take(bench, good, _wishes(bench, chunks), _CASES, chosen)
    if not chosen:  # fixed sizes can be large; one case there must be
        wishes = (fitted(bench, good, wish) for wish in _wishes(bench, {}))
        dear = {tuple(sizes.items()): bench.work(sizes) for sizes in wishes if sizes is not None}
        chosen |= {sizes: dear[sizes] for sizes in sorted(dear, key=lambda sizes: dear[sizes])[:1]}
    if not trust:
        _take(bench, Region.where(*bench.nest.facts) - good, _wishes(bench, {}), _BREAKING, chosen)
    return [dict(sizes) for sizes in sorted(chosen, key=lambda sizes: chosen[sizes])]


def _take(
    bench: Bench,
    region: Region,
    wishes: Iterable[Mapping[str, int]],
    most: int,
    chosen: dict[tuple[tuple[str, int], ...], int],
) -> None:
    """Add up to ``most`` sizes of a region that come near to the wishes and do not take too long."""
    taken = 0
    for wish in wishes if not region.is_empty() else ():
        sizes = fitted(bench, region, wish)
        if taken == most or sizes is None or tuple(sizes.items()) in chosen:
            continue
        work = bench.work(sizes)
        if work <= min(_WORK_OF_ONE, _WORK_OF_ALL - sum(chosen.values())):
            chosen[tuple(sizes.items())] = work
            taken += 1


def chunks_of_sizes(bench: Bench, plans: Iterable[Plan]) -> dict[str, tuple[int, ...]]:
    """For each parameter that bounds a chunked loop, the chunks of those loops, falling."""
    nest = bench.nest
    found: dict[str, set[int]] = {}
    for plan in plans:
        for term in plan.terms:
            chunk = bench.constant(term.chunk) if isinstance(term.chunk, str) else term.chunk
            for loop_id, _ in term.form if chunk else ():
                loop = nest.loop(loop_id)
                step = max(1, abs(loop.step))
                for name in bound_names(loop.first) | bound_names(loop.last):
                    found.setdefault(name, set()).add((chunk or 1) * step)
    symbols = {parameter.symbol for parameter in nest.parameters}
    return {name: tuple(sorted(sizes, reverse=True)) for name, sizes in found.items() if name in symbols}


def uncovered(bench: Bench, plans: Iterable[Plan], cases: Sequence[Mapping[str, int]]) -> list[str]:
    """Chunks that no case exceeds, in words; empty if every chunked loop was cut at least once."""
    missing = []
    for name, sizes in chunks_of_sizes(bench, plans).items():
        largest = max((case.get(name, 0) for case in cases), default=0)
        missing += [f"no verified {name} exceeds the chunk of {size}" for size in sizes if largest <= size]
    return missing


def defined_region(nest: Nest) -> Region:
    """Where the nest is defined and its testable assumptions hold."""
    conditions: list[Formula] = [a.condition for a in nest.assumptions if a.condition is not None]
    return Region.where(*nest.facts, *conditions)


def _interesting(chunks: Sequence[int]) -> list[int]:
    """Values around the chunks, those that tell most first."""
    values = [0, 1, 7]
    for chunk in chunks:
        values += [chunk + 1, chunk, chunk - 1]
    values += [2 * chunk + 1 for chunk in chunks]
    values += [2, 3, 13]
    return [value for value in dict.fromkeys(values) if value >= 0]


def _wishes(bench: Bench, chunks: Mapping[str, Sequence[int]]) -> Iterator[dict[str, int]]:
    """Values to come near to, for every name that needs one."""
    names = names_needed(bench)
    bounds = {name for loop in bench.nest.loops for name in bound_names(loop.first) | bound_names(loop.last)}
    every = sorted({chunk for sizes in chunks.values() for chunk in sizes}, reverse=True)

    outer = {parameter.symbol for parameter in bench.direct if parameter.kind == "outer iterator"}

    def completed(wish: Mapping[str, int], turn: int) -> dict[str, int]:
        """Names outside all loop bounds are no sizes: small values in turn, and one that leaves gaps between rows.

        Declared lengths of arrays have room for all others.  Outer iterators are small, or nothing would be left to do
        where a loop begins at one.
        """
        largest = max(wish.values(), default=0)
        other = (0, 1, 2, largest + 3)[turn % 4]
        inside = (0, 1, 2, largest // 2)[turn % 4]
        chosen = {
            name: inside if name in outer else wish[name] if name in bounds or name in bench.hidden else other
            for name in names
        }
        return {
            name: largest + turn % 3 if name in bench.lengths - bounds else value for name, value in chosen.items()
        }

    turn = 0
    unequal = {name: _UNEQUAL[at % len(_UNEQUAL)] for at, name in enumerate(names)}
    yield completed(unequal, 0)
    yield completed(unequal, 1)
    yield completed(dict(zip(names, reversed(unequal.values()))), 2)
    for value in _interesting(every):
        turn += 1
        yield completed(dict.fromkeys(names, value), turn)
    for name, sizes in chunks.items():
        for value in _interesting(sizes):
            turn += 1
            yield completed({**unequal, name: value}, turn)
    for name in sorted(bounds & set(names)):
        turn += 1
        yield completed({**dict.fromkeys(names, 2), name: 13}, turn)
    for value in (*_SMALL, -2):
        turn += 1
        yield completed({name: value + at % 3 for at, name in enumerate(names)}, turn)


def fitted(bench: Bench, region: Region, wish: Mapping[str, int]) -> dict[str, int] | None:
    """Values in the region, each as near to its wish as those before it allow; None if there are none."""
    sizes = {name: wish[name] for name in bench.hidden}
    left = region
    for name in _loop_bounds_first(bench):
        value = _nearest(left, name, wish.get(name, 1))
        if value is None:
            return None
        sizes[name] = value
        left = left.at({name: value})
    try:
        _, symbols = bench.values(sizes)
    except RetileError:
        return None
    return sizes if not region.at(symbols).is_empty() else None


def _loop_bounds_first(bench: Bench) -> list[str]:
    bounds = {name for loop in bench.nest.loops for name in bound_names(loop.first) | bound_names(loop.last)}
    symbols = [parameter.symbol for parameter in bench.direct]
    return sorted(symbols, key=lambda symbol: symbol not in bounds)


def _nearest(region: Region, name: str, wish: int) -> int | None:
    low = region.extreme(Affine.of(name), largest=False)
    high = region.extreme(Affine.of(name), largest=True)
    value = wish if low is None else max(low, wish)
    value = value if high is None else min(high, value)
    for away in range(9):  # regions may have holes (strides)
        for near in (value + away, value - away):
            if not region.at({name: near}).is_empty():
                return near
    point = region.sample([name])
    return point[name] if point else None


def checked(bench: Bench, sizes: Mapping[str, int], command: str) -> dict[str, int]:
    """The sizes of a measurement by symbol; RetileError that names what is missing, unknown or not allowed."""
    names = names_needed(bench)
    given = dict(sizes)
    for parameter in bench.direct:  # the name as typed may differ from the symbol
        if parameter.text in given and parameter.symbol not in given:
            given[parameter.symbol] = given.pop(parameter.text)
    strange = [name for name in given if name not in names and bench.kernel.memory.cell(name) is None]
    if strange:
        raise RetileError(
            f"{bench.nest.address}: the nest has no size {', '.join(strange)}; it has {', '.join(names) or 'none'}"
        )
    missing = [name for name in names if name not in given]
    if missing:
        settings = " ".join(
            f"--set '{name}={given.get(name, 1000)}'" if ">" in name else f"--set {name}={given.get(name, 1000)}"
            for name in names
        )
        raise RetileError(
            f"{bench.nest.address}: no value for {', '.join(missing)}; type, for example: {command} {settings}"
        )
    _, symbols = bench.values(given)
    if Region.where(*bench.nest.facts).at(symbols).is_empty():
        raise RetileError(
            f"{bench.nest.address}: the original is not defined at these sizes "
            f"({', '.join(f'{name} = {given[name]}' for name in names)}); choose others"
        )
    return {**{name: given[name] for name in names}, **given}
