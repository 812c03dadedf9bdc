"""Nests with their C text, put together by hand: what the rewrite room needs of a file, without the rooms before it."""

from __future__ import annotations

from dataclasses import dataclass, field

from retile.affine import Affine, AllOf, Bound, Formula, bound_names
from retile.dependence import analyse
from retile.model import (Access, Address, Assumption, CType, Judgement, LoopText, Nest, Parameter, Span, Statement,
                          Storage, StorageKind, Variant, Verdict)
from retile.plan import judge, parse_plan
from retile.rewrite import rewrite
from retile.source.lex import Token, tokenize
from retile.source.structure import Shape, compound
from retile.tree import Leaf, Loop, Node

A = Affine.of
INT = CType("int", 32, True)
DOUBLE = CType("double", 64, True, True)
TYPES = {"int": INT, "long": CType("long", 64, True), "size_t": CType("size_t", 64, False),
         "unsigned": CType("unsigned", 32, False), "unsigned char": CType("unsigned char", 8, False),
         "short": CType("short", 16, True), "long long": CType("long long", 64, True),
         "unsigned long": CType("unsigned long", 64, False)}


@dataclass(frozen=True)
class Call:
    """The flags of a file that nobody compiles here."""

    flags: tuple[str, ...] = ()


@dataclass(frozen=True)
class Text:
    """A file's text, as much of a source as the rewrite room asks for."""

    text: str
    path: str = "survey.c"
    call: Call = Call()

    @property
    def tokens(self) -> tuple[Token, ...]:
        """The tokens of the text."""
        return tokenize(self.text)


@dataclass(frozen=True)
class ByHand:
    """What the nest room would find out about a loop: first, last (inclusive), step, relation, texts, type."""

    id: str
    first: Bound
    last: Bound
    bound_text: str
    relation: str = "<"
    step: int = 1
    type: str = "int"
    first_text: str = "0"
    live: bool = False


@dataclass(frozen=True)
class Given:
    """A file with a nest."""

    source: Text
    nest: Nest

    def variant(self, plan: str, **options: object) -> Variant:
        """The variant of a plan, which must be legal."""
        dependences = analyse(self.nest)
        parsed = parse_plan(plan, self.nest)
        judgement = judge(self.nest, dependences, parsed)
        assert judgement.verdict is Verdict.LEGAL, judgement
        return rewrite(self.source, self.nest, dependences, parsed, judgement, **options)  # type: ignore[arg-type]


def by_hand(text: str, loops: list[ByHand], accesses: list[tuple[str, bool, tuple]], parameters: dict[str, str], *,
            facts: tuple[Formula, ...] = (), assumptions: tuple[Assumption, ...] = (),
            storages: tuple[Storage, ...] | None = None) -> Given:
    """A perfect nest around one statement, from the first ``for`` of a text on."""
    source = Text(text)
    solid = [token for token in source.tokens if token.kind not in ("blank", "comment", "directive")]
    at = next(number for number, token in enumerate(solid) if token.text == "for")
    root = compound([token.spelling for token in solid], at)
    shapes = [shape for shape in _walk(root) if shape.kind == "for"]
    made = tuple(_loop(loop, shape, solid, loops, depth) for depth, (loop, shape) in enumerate(zip(loops, shapes)))
    ids = tuple(loop.id for loop in loops)
    inner = next(shape for shape in _walk(shapes[len(loops) - 1].children[0]) if shape.kind in ("simple", "if"))
    here = _span(solid, inner.start, inner.end)
    line = str(here.line)
    body: tuple[Node, ...] = (Leaf(line, tuple((id, A(id)) for id in ids)),)
    domain: list[Formula] = []
    for loop in reversed(loops):
        lower, upper = (loop.first, loop.last) if loop.step > 0 else (loop.last, loop.first)
        tree = Loop(loop.id, lower, upper, loop.step, loop.first if isinstance(loop.first, Affine) else A(0), body, loop.id)
        domain.append(tree.constraints())
        body = (tree,)
    statement = Statement(line, "…", here, ids, AllOf(tuple(domain)),
                          tuple(Access(name, write, tuple(A(s) for s in subscripts), True, here)
                                for name, write, subscripts in accesses))
    if storages is None:
        storages = tuple(Storage(name, name, StorageKind.ARRAY, DOUBLE, 8, ())
                         for name in dict.fromkeys(name for name, _, _ in accesses))
    nest = Nest(Address("survey.c", made[0].span.line), "survey", made[0].span, body, made, (statement,),  # type: ignore
                tuple(Parameter(name, name, TYPES[type], "argument") for name, type in parameters.items()), storages,
                facts, assumptions, frozenset(token.spelling for token in solid if token.kind == "word"))
    return Given(source, nest)


def _walk(shape: Shape):
    yield shape
    for child in shape.children:
        yield from _walk(child)


def _span(solid: list[Token], start: int, end: int) -> Span:
    return Span(solid[start].start, solid[end].end, solid[start].line, solid[start].column)


def _loop(loop: ByHand, shape: Shape, solid: list[Token], loops: list[ByHand], depth: int) -> LoopText:
    declared = solid[shape.marks[1] + 2].kind == "word"
    outer = tuple(one.id for one in loops[:depth])
    independent = not bound_names(loop.first) & set(outer)
    return LoopText(loop.id, loop.id.split("@")[0], TYPES[loop.type], declared, loop.first, loop.last, loop.step,
                    _span(solid, shape.start, shape.end), _span(solid, shape.start, shape.marks[-1]),
                    _span(solid, shape.children[0].start, shape.children[0].end), loop.first_text, loop.bound_text,
                    loop.relation, outer, loop.live, independent)


__all__ = ["A", "ByHand", "Given", "TYPES", "Text", "by_hand", "field", "Judgement"]
