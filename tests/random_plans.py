"""Random plans for a nest: orders, up to three levels of chunks, named chunks, skewed terms, options."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from random_choices import Choices

NAMED = {"T_CHUNK": "t", "I_CHUNK": "i", "J_CHUNK": "j", "K_CHUNK": "k", "ROWS": "x"}
_SIZES = (2, 2, 2, 3, 3, 3, 4, 4, 5, 5, 1, 7, 64)


@dataclass(frozen=True)
class LoopShape:
    """A loop by the name that plans give it, and the loops around it."""

    id: str
    outer: tuple[str, ...]


@dataclass(frozen=True)
class Shape:
    """What a plan can speak of: loops in text order, and the statements with the loops around each."""

    loops: tuple[LoopShape, ...]
    statements: tuple[tuple[str, tuple[str, ...]], ...] = ()
    arrays: tuple[tuple[str, tuple[str, ...]], ...] = ()  # as options name them, with the loops that their subscripts use


def plan(choose: Choices, shape: Shape) -> str:
    """A random plan that names a set of loops closed towards the outside."""
    named: list[str] = []
    for loop in shape.loops:
        if not loop.outer or (set(loop.outer) <= set(named) and choose.chance(88)):
            named.append(loop.id)
    terms = list(named)
    if not choose.chance(30):
        rest, terms = list(named), []
        while rest:
            terms.append(rest.pop(choose.between(0, len(rest) - 1)))
    for loop in named:
        _insert_chunks(choose, terms, loop)
    chains = [loop for loop in shape.loops if loop.id in named and loop.outer]
    if chains and choose.chance(20):
        inner = choose.pick(chains)
        _skew(choose, terms, choose.pick(inner.outer), inner.id)
    options = [*_options(choose, shape, named), *_storage_options(choose, shape, terms)]
    return " ".join(terms) + ("; " + ", ".join(options) if options else "")


def _insert_chunks(choose: Choices, terms: list[str], loop: str) -> None:
    at = 0
    for chunk in _chunks(choose, loop):
        at = choose.between(at, terms.index(loop))
        terms.insert(at, f"{loop}:{chunk}")
        at += 1


def _chunks(choose: Choices, loop: str) -> Sequence[int | str]:
    if not choose.chance(50):
        return []
    if choose.chance(12):
        return choose.pick([[6, 2], [5, 2], [4, 2], [6, 4, 2], [5, 3, 1]])
    if choose.chance(8):
        return [next((name for name, of in NAMED.items() if of == loop.partition("@")[0]), "ROWS")]
    return [choose.pick(_SIZES)]


def _skew(choose: Choices, terms: list[str], first: str, second: str) -> None:
    """Put in a skewed term, beside the bare loops or instead of one."""
    form = choose.pick([f"({first}+{second})", f"(2*{first}+{second})", f"({second}-{first})", f"({first}-{second})",
                        f"({first}+2*{second})"])
    if choose.chance(60):
        at = min(terms.index(first), terms.index(second))
        terms.insert(choose.between(0, at), f"{form}:{choose.pick([2, 3, 4])}")
    else:
        terms[terms.index(second)] = form
        for term in [term for term in terms if term.startswith(second + ":")]:
            terms.remove(term)


def _options(choose: Choices, shape: Shape, named: list[str]) -> list[str]:
    options = ["remainder peel"] if choose.chance(35) else []
    if choose.chance(5):
        options.append("reassociate yes")
    outside = [(id, loops, loop) for id, loops in shape.statements for loop in named if loop not in loops]
    if outside and choose.chance(8):
        id, loops, loop = choose.pick(outside)
        own = [name for name in loops if name in named]
        value = choose.pick([*own, *own, "0", "1", "n"])
        shift = choose.pick(["", "", " + 1", " - 1"]) if value in own else ""
        options.append(f"place {id} {choose.pick(['at', 'at', 'with'])} {loop} = {value}{shift}")
    return options


def _storage_options(choose: Choices, shape: Shape, terms: list[str]) -> list[str]:
    """What is written out, held, packed and shared among threads."""
    options = []
    bare = [term for term in terms if ":" not in term and "(" not in term]
    chunks = [term for term in terms if ":" in term and "(" not in term and term.rpartition(":")[2].isdecimal()]
    short = [loop for loop in bare if any(f"{loop}:{size}" in chunks for size in (2, 3, 4, 5))]
    if short and choose.chance(30):
        options.append(f"unroll {choose.pick(short)}")
    for word, where, odds in (("hold", bare, 60), ("pack", chunks, 40)):
        fitting = [(name, term) for name, loops in shape.arrays for term in where
                   if _covered(terms, terms.index(term) + (word == "pack"), loops)]
        free = [(name, term) for name, term in fitting if not any(f" {name} " in option for option in options)]
        if free and choose.chance(odds):
            options.append("{} {} {} {}".format(word, *_between(choose.pick(free), "across" if word == "hold" else "at")))
    if bare and choose.chance(6):
        options.append(f"threads at {choose.pick([*bare, *chunks])}")
    return options


def _between(pair: tuple[str, str], word: str) -> tuple[str, str, str]:
    return pair[0], word, pair[1]


def _covered(terms: list[str], level: int, loops: tuple[str, ...]) -> bool:
    """True if chunks outside a place bound how many iterations of these loops there are inside."""
    for loop in loops:
        inside = any(term.partition(":")[0] == loop for term in terms[level:])
        outside = any(term.partition(":")[0] == loop and ":" in term for term in terms[:level])
        if loop not in terms or inside and not outside:
            return False
    return True
