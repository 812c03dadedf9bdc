"""Orders of the loops, ranked by how they walk through memory; what to unroll and to cut in a good one.

The innermost loop decides most: a step of it costs the part of a cache line by which each array moves on, nothing for
an array that stays (loop interchange by memory order: Carr, McKinley & Tseng, "Compiler optimizations for improving
data locality", 1994), and waiting where the step needs the result of the one before.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations, permutations
from math import prod

from .idea import Idea, amount, listed, order_text, with_room
from .view import Reference, View

# In cache lines per step: waiting for the last addition, about 4 cycles where a line takes 16 or more.
_WAIT = 0.25
_OVERHEAD = 0.5  # of starting the innermost loop once
_MOST_LOOPS = 6  # permuted; beyond that each loop is tried innermost
_JAMMED = (4, 8)  # iterations of an outer loop that run inside the innermost one


def ways(view: View, waiting: bool = False) -> tuple[Reference, ...]:
    """The references that move differently: neighbours in a grid count as one.

    ``waiting``: with private scalars that are summed into, which wait in an array if another loop runs outside theirs.
    """
    found: dict[object, Reference] = {}
    for reference in (*view.references, *(view.sums if waiting else ())):
        key = reference.storage, reference.strides
        if key not in found or reference.write:
            found[key] = reference
    return tuple(found.values())


def cost(view: View, order: tuple[str, ...]) -> tuple[float, float, int]:
    """What a step of an order costs, in cache lines; then the same for the next loop out, and how far it is from the
    original order."""
    price = sum(_price(view, reference, order[-1]) for reference in ways(view, True))
    price += _WAIT * (order[-1] in view.serial) + _OVERHEAD / view.trips[order[-1]]
    further = sum(view.bytes_of(reference) * (reference.stride(order[-2]) != 0) for reference in ways(view)) \
        if len(order) > 1 else 0
    places = {loop: at for at, loop in enumerate(view.loops)}
    return round(price, 4), further, sum(places[a] > places[b] for a, b in combinations(order, 2))


def _price(view: View, reference: Reference, loop: str) -> float:
    stride = reference.stride(loop)
    if view.bytes_of(reference) <= view.machine.first // 2:
        stride = min(stride, reference.element)  # it stays in the first cache, however it is walked through
    part = min(stride, view.machine.line) / view.machine.line
    return part * (1.5 if stride >= view.machine.page else 1) * (2 if reference.write else 1)


def ranked(view: View) -> list[tuple[str, ...]]:
    """The orders of the main loops from the cheapest on."""
    loops = view.loops
    if len(loops) <= _MOST_LOOPS:
        several = list(permutations(loops))
    else:
        several = [loops, *((*(x for x in loops if x != last), last) for last in loops)]
    return sorted(dict.fromkeys(several), key=lambda order: cost(view, order))


def orders(view: View) -> Iterator[Idea]:
    """Other orders that cost clearly less than the original."""
    mine = cost(view, view.loops)[0]
    for order in ranked(view)[:24]:
        price = cost(view, order)[0]
        if price < 0.9 * mine and order != view.loops:
            text = order_text(with_room(view, list(order)))
            yield Idea("order", text, _why_order(view, order), _gain(mine, price) - 0.01 * cost(view, order)[2])


def _gain(before: float, after: float) -> float:
    return min(10.0, before / max(after, 0.05))


def _why_order(view: View, order: tuple[str, ...]) -> str:
    inner, outer = order[-1], view.loops[-1]
    along = [r.storage for r in ways(view) if 0 < r.stride(inner) <= r.element]
    stays = [r.storage for r in ways(view) if r.stride(inner) == 0]
    jumps = [f"{r.storage} by {amount(r.stride(outer))}" for r in ways(view) if r.stride(outer) > r.element
             and r.stride(inner) < r.stride(outer)]
    parts = [f"{inner} innermost" + (f" runs along the rows of {listed(along)}" if along else "")]
    if stays:
        parts[0] += (" and" if along else "") + f" leaves {listed(stays)} in place"
    if inner != outer and jumps:
        parts.append(f"the original's steps of {outer} move {listed(jumps)}")
    if outer in view.serial and inner not in view.serial:
        parts.append(f"steps of {inner} do not wait for each other, those of {outer} do")
    return "; ".join(parts)


# ---------------------------------------------------------------- unroll and jam

def jammed(view: View) -> Iterator[Idea]:
    """A few iterations of an outer loop inside a good innermost one, for arrays that the outer loop leaves in place."""
    mine = cost(view, view.loops)[0]
    best = [order for order in ranked(view)[:4] if cost(view, order)[0] <= mine]
    own = [view.loops] if best and mine <= 1.5 * cost(view, best[0])[0] else []
    for order in dict.fromkeys((*best[:2], *own)):
        inner = order[-1]
        for loop in order[:-1]:
            kept = [r for r in ways(view, True) if r.stride(loop) == 0 and r.stride(inner) != 0]
            moved = [r for r in ways(view, True) if r.stride(loop) != 0 and r.stride(inner) != 0]
            waits = inner in view.serial and loop not in view.serial
            if not (kept or waits) or view.trips[loop] < 4 * _JAMMED[0] or view.trips[inner] < 16:
                continue
            yield from _jam(view, order, loop, kept, moved)


def _jam(view: View, order: tuple[str, ...], loop: str, kept: list[Reference],
         moved: list[Reference]) -> Iterator[Idea]:
    inner, mine = order[-1], cost(view, view.loops)[0]
    steps = sum(2 if r.write else 1 for r in kept)
    for number, count in enumerate(_JAMMED):
        outer = [other for other in order[:-1] if other != loop]
        terms = with_room(view, [*outer, f"{loop}:{count}", inner, loop])
        gain = _gain(mine, cost(view, order)[0]) * (1.25 + 0.1 * min(steps, 3) - 0.02 * number - 0.05 * len(moved))
        if inner in view.serial and loop not in view.serial:
            gain *= 1.5  # the sums of several iterations run side by side
        if any(statement.loops != view.loops for statement in view.nest.statements) and not view.sums:
            gain *= 0.4  # statements between the loops have to find a place among the copies
        why = f"{count} iterations of {loop} at a time: " + (
            f"each step of {inner} uses {listed(r.storage for r in kept)} {count} times once it is loaded" if kept else
            f"they do not wait for each other, as steps of {inner} do")
        yield Idea("unroll and jam", order_text(terms, f"unroll {loop}"), why, gain)


# ---------------------------------------------------------------- chunks for a cache

def chunked(view: View) -> Iterator[Idea]:
    """Chunks of an inner loop that let what an outer loop uses again stay in a cache."""
    mine = cost(view, view.loops)[0]
    for number, order in enumerate(order for order in ranked(view)[:6] if cost(view, order)[0] <= mine):
        for at, outer in enumerate(order[:-1]):
            inside = order[at + 1:]
            for reference in ways(view):
                size = view.bytes_of(reference, {loop: view.trips[loop] for loop in inside})
                if reference.stride(outer) == 0 and size > view.machine.second // 2 and view.trips[outer] > 4:
                    yield from _cut(view, order, outer, inside, reference, size, 0.1 * number)


def _cut(view: View, order: tuple[str, ...], outer: str, inside: tuple[str, ...], reference: Reference, size: int,
         less: float) -> Iterator[Idea]:
    used = [loop for loop in inside if reference.stride(loop)]
    cut = max(used, key=lambda loop: (reference.stride(loop), view.trips[loop]))
    rest = reference.element * prod(view.trips[loop] for loop in used if loop != cut)
    base = _gain(cost(view, view.loops)[0], cost(view, order)[0]) * 1.1 - less
    rooms = ((view.machine.second // 2, "second", 0.0), (view.machine.first // 2, "first", 0.2))
    for room, place, minus in rooms:
        chunk = _power(room // max(1, rest))
        if 8 <= chunk < view.trips[cut]:
            why = (f"{outer} uses {reference.storage} again and again, {amount(size)} of it; chunks of {chunk} {cut} "
                   f"take {amount(chunk * rest)}, which fits in half of the {place} cache")
            terms = with_room(view, [f"{cut}:{chunk}", *order])
            yield Idea("chunks", order_text(terms), why, base - minus)
    if len(used) > 1 and size > 4 * view.machine.second:
        second = max((loop for loop in used if loop != cut), key=lambda loop: view.trips[loop])
        chunks = 64, _power(max(64, view.machine.second // 2 // (64 * reference.element)))
        if all(chunk < view.trips[loop] for chunk, loop in zip(chunks, (cut, second))):
            block = f"{chunks[0]} {cut} by {chunks[1]} {second}"
            why = f"a block of {block} of {reference.storage} stays in the second cache"
            terms = with_room(view, [f"{cut}:{chunks[0]}", f"{second}:{chunks[1]}", *order])
            yield Idea("chunks", order_text(terms), why, base - 0.3)


def _power(number: int) -> int:
    """The largest power of two up to a number, 0 for none."""
    return 1 << number.bit_length() - 1 if number > 0 else 0
