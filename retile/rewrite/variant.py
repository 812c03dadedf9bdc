"""From a legal plan to the file with the variant in place of the nest.

The driver reads as the way goes: the tree of the plan, its remainder style, both questions, the text, the file.
Nothing of the file changes but the nest's span and, where the tests of assumptions need them, ``#include`` lines.
"""

from __future__ import annotations

import os
import shlex
import textwrap
from collections.abc import Iterable
from typing import TYPE_CHECKING

from ..affine import Affine, AllOf, Formula, at_most, bound_names, formula_names
from ..model import Assumption, AssumptionCode, Judgement, Nest, Plan, Variant
from ..sets import Region
from ..tree import Loop, Node, Role, Verbatim, children, loops_of
from ..values import dataclass, replace
from .after import restored
from .ahead import Ahead
from .assumed import Tests, tests_of
from .buffered import Heap
from .chunks import Loops
from .constants import Constants, is_old
from .expression import INT, Expression, NoRoom, Scope, written
from .includes import insertion, missing
from .layout import InternalError, NestText
from .loops import Place
from .names import Names
from .patch import unified
from .peel import peeled
from .printer import Printer
from .style import WIDTH, Style, read_style
from .unroll import unrolled

if TYPE_CHECKING:
    from ..dependence import Dependences
    from ..source import Source

# Sizes up to here leave room for every sum of a few of them in 64 bits.
_ROOM = 10 ** 12


def rewrite(source: Source, nest: Nest, dependences: Dependences, plan: Plan, judgement: Judgement, *,
            remainder: str | None = None, trust: bool = False) -> Variant:
    """The variant of a plan whose verdict is ``legal``.

    ``remainder``: ``clamp`` or ``peel``, unless the plan says.  ``trust``: leave out the tests of assumptions and the
    original loops.  Raises InternalError if the finished tree fails one of the two questions, and RetileError if an
    assumption cannot be tested.
    """
    original = source.text[nest.span.start:nest.span.end]
    if remainder is None or "remainder" in dict(plan.options) or plan.unrolled:
        remainder = plan.remainder
    if is_original_order(nest, plan):
        return Variant(plan, source.text, judgement, nest.tree, original)
    tree = finished_tree(nest, dependences, judgement.plan, remainder)
    order = _Order(source, nest, plan, judgement, tree, remainder, trust)
    nest_text, headers = order.text()
    includes = missing(source.text[:nest.span.start], headers)
    text = _whole_file(source.text, nest, nest_text, includes, order.style.eol)
    return Variant(plan, text, judgement, tree, nest_text, includes)  # type: ignore[arg-type]


def diff(source: Source, variant: Variant) -> str:
    """A patch from the file to the variant that ``git apply`` and ``patch -p1`` take; empty if nothing changes."""
    return unified(source.path, source.text, variant.text)


def is_original_order(nest: Nest, plan: Plan) -> bool:
    """True if the plan names loops in the order in which they stand, and cuts none."""
    names = [term.loop for term in plan.terms if len(term.form) == 1 and term.chunk is None and term.form[0][1] == 1]
    if len(names) < len(plan.terms) or plan.buffers or plan.threaded is not None:
        return False
    order = {loop.id: at for at, loop in enumerate(nest.loops)}
    return [order[name] for name in names] == sorted(order[name] for name in names)


def finished_tree(nest: Nest, dependences: Dependences, plan: Plan, remainder: str) -> tuple[Node, ...]:
    """The tree that will be printed; raises InternalError if it does not do what the nest does."""
    from ..plan import MOST_UNROLLED, build_tree

    tree = build_tree(nest, plan)
    if remainder == "peel":
        long = "remainder" in dict(plan.options) or not (plan.unrolled or plan.buffers)
        tree = peeled(tree, dependences.context, None if long else MOST_UNROLLED)
    tree = unrolled(tree, plan.unrolled, MOST_UNROLLED)
    check(tree, nest, dependences, plan)
    return tree


def check(tree: tuple[Node, ...], nest: Nest, dependences: Dependences, plan: Plan) -> None:
    """Ask the questions of a finished tree; InternalError, with the first flaw, if the answer to one is no."""
    from ..plan import binding_edges, copied_scalars, moved_conditions
    from ..questions import free_of_races, order_kept, same_instances, values_arrive
    from ..reached import cells_reached

    context = dependences.context
    moved = moved_conditions(nest, plan)
    repeatable = moved | set(plan.copied)
    flaws = [*same_instances(tree, nest, context, repeatable),
             *order_kept(tree, dependences, binding_edges(nest, dependences, plan), map(nest.statement, moved)),
             *values_arrive(tree, nest, context, plan.copied),
             *cells_reached(tree, nest, context),
             *free_of_races(tree, dependences, copied_scalars(nest, plan))]
    if flaws:
        raise InternalError(f"{nest.address}: the loops made for this plan are wrong, so nothing was written: {flaws[0]}.\n"
                            "This is a defect of retile; please report it with the nest and the plan.")


def _whole_file(text: str, nest: Nest, nest_text: str, includes: tuple[str, ...], eol: str) -> str:
    changed = text[:nest.span.start] + nest_text + text[nest.span.end:]
    if not includes:
        return changed
    at = insertion(text[:nest.span.start])
    lines = "".join(f"#include {header}{eol}" for header in includes)
    if at and text[at - 1] != "\n":
        lines = eol + lines
    return changed[:at] + lines + changed[at:]


@dataclass(frozen=True)
class _Order:
    """A plan on its way to text."""

    source: Source
    nest: Nest
    plan: Plan
    judgement: Judgement
    tree: tuple[Node, ...]
    remainder: str
    trust: bool

    @property
    def layout(self) -> NestText:
        return NestText(self.source.text, self.nest, self.tree)

    @property
    def style(self) -> Style:
        return read_style(self.source.text, self.nest, self.layout)

    def text(self) -> tuple[str, tuple[str, ...]]:
        """The variant's text and the headers that it needs; asks for smaller sizes if arithmetic has no room."""
        steps = step_assumptions(self.nest, self.tree) if self.plan.buffers or self.plan.unrolled else ()
        try:
            return self._text(steps)
        except NoRoom:
            pass
        try:
            return self._text(room_assumptions(self.nest, self.tree, self._assumptions()))
        except NoRoom as error:
            raise InternalError(f"{self.nest.address}: no integer type of C is wide enough for {error}") from error

    def _text(self, room: tuple[Assumption, ...]) -> tuple[str, tuple[str, ...]]:
        before = outer_scope(self.nest, self.tree)
        assumptions = (*room, *self._assumptions())
        layout, style = self.layout, self.style
        names = Names(self.nest.names_in_scope | {"uintptr_t", "size_t"})
        facts = tuple(a.condition for a in assumptions if a.condition is not None)
        indent = layout.indentation(self.nest.span.start)
        known = before.knowing(*facts) if facts else before
        leading = Ahead(self.nest).leading(self.tree, known.region, _is_c90(self.source.call.flags))
        tests = tests_of(self.nest, () if self.trust else assumptions, before, names, leading)
        heap = Heap(self.nest, self.tree, names, self.source.call.flags)
        guarded = bool(tests.conditions or heap)
        inner = indent + style.braced_step if guarded else indent
        scope = known.knowing(*tests.ahead) if tests.ahead else known
        lines, homeless = self._loops(layout, style, names, scope, inner, heap)
        kept = restored(self.nest, layout, style, scope, names, inner)
        lines = [*kept.ahead, *lines, *kept.behind]
        remark = style.remark(self._remark(assumptions, bool(tests.conditions) and not self.trust), indent)
        remark += [indent + text for text in homeless]
        if guarded:
            lines = self._guarded(tests, heap, lines, style, indent)
        headers = [*(["<stdint.h>"] if tests.declarations else []), *(["<stdlib.h>"] if heap else [])]
        return self._joined(remark, lines, style, indent), tuple(headers)

    def _loops(self, layout: NestText, style: Style, names: Names, scope: Scope, indent: str, heap: Heap) \
            -> tuple[list[str], list[str]]:
        constants = Constants(self.tree, names, is_old(self.source.call.flags))
        scope = constants.written(scope)
        loops = Loops(self.nest, layout, names, self.tree, constants, _is_c90(self.source.call.flags))
        kept = frozenset(loop.symbol for loop in _printed(self.tree)
                         if loop.symbol in {one.id for one in self.nest.loops} and loops.unchanged(loop))
        printer = Printer(self.source, self.nest, layout, style, loops, kept, heap)
        declared = [indent + line for line in constants.declarations()]
        if not printer.declarations(layout.tree, Place(scope)):
            return [*declared, *printer.nodes(layout.tree, Place(scope), indent)], printer.homeless
        # what the nest declares stays in a block of its own
        lines = printer.nodes(layout.tree, Place(scope), indent + style.braced_step)
        return [*declared, f"{indent}{{", *lines, f"{indent}}}"], printer.homeless

    def _assumptions(self) -> tuple[Assumption, ...]:
        """What the verdict rests on, and what the loops' bounds were worked out under."""
        needed = self.judgement.assumptions
        other = [a for a in self.nest.assumptions if a.condition is not None and a not in needed
                 and a.code is not AssumptionCode.ROW_BOUND]
        return (*needed, *other)

    def _guarded(self, tests: Tests, heap: Heap, lines: list[str], style: Style, indent: str) -> list[str]:
        """The variant where the tests hold, else the original, which only moves to the right by whole lines."""
        inner = indent + style.braced_step
        conditions = (*heap.conditions(), *tests.conditions)
        parts = [f"({part})" if " || " in part and len(conditions) > 1 else part for part in conditions]
        head = " && ".join(parts)
        if len(indent) + len(head) > WIDTH:
            head = f"{style.eol}{indent}{style.step}&& ".join(parts)
        block = style.block(f"if ({head})", lines, indent)
        if tests.fallback or heap:
            original = inner + self.layout.moved((self.nest.span.start, self.nest.span.end), inner)
            block = style.otherwise(block, [original], indent)
        return [*(indent + line for line in (*tests.declarations, *heap.declarations())), *block,
                *(indent + line for line in heap.releases())]

    def _joined(self, remark: list[str], lines: list[str], style: Style, indent: str) -> str:
        """One text in place of the nest: a block of its own where the nest is not one statement among others."""
        if not self._among_statements() and self._several(lines, indent):
            lines = [indent + "{", *(style.step + line if line else line for line in lines), indent + "}"]
        return style.eol.join([*remark, *lines])[len(indent):]

    def _among_statements(self) -> bool:
        before = [token for token in self.source.tokens if token.end <= self.nest.span.start
                  and token.kind not in ("blank", "comment", "directive")]
        return bool(before) and before[-1].text in ("{", "}", ";")

    def _several(self, lines: list[str], indent: str) -> bool:
        """True if the lines are more than one statement: one whose first word is no ``for`` or ``if``, or two heads."""
        heads = [line for line in lines if line.startswith(indent) and not line[len(indent):len(indent) + 1].isspace()]
        words = [head.strip().split("(")[0].strip() for head in heads]
        return sum(word not in ("{", "}", "} else {", "else") for word in words) != 1

    def _remark(self, assumptions: tuple[Assumption, ...], tested: bool) -> list[str]:
        """The comment above the variant: plan, options, assumptions, and how to make it again."""
        lines = [f"Loops reordered by retile: {self._line}"]
        if dict(self.plan.options).get("reassociate") == "yes":
            lines.append("Updates x = x op e run in another order, so that they may round differently.")
        for word, wanted in (("Tested here", True), ("Assumed", False)):
            facts = dict.fromkeys(a.text.rstrip(".") for a in assumptions if (tested and a.testable) == wanted)
            if facts:
                lines += textwrap.wrap(f"{word}: {'; '.join(facts)}.", WIDTH, break_long_words=False, break_on_hyphens=False)
        return [*lines, f"Made by: {self._command(assumptions)}"]

    @property
    def _line(self) -> str:
        """The variant's one line: the plan with all options that are not the default."""
        options = self.plan.options
        if "remainder" not in dict(options) and self.remainder != self.plan.remainder:
            options = (("remainder", self.remainder), *options)
        named = [f"{word} {value}" for word, value in options if value not in ("clamp", "no")]
        return self.plan.order_text + (f"; {', '.join(named)}" if named else "")

    def _command(self, assumptions: tuple[Assumption, ...]) -> str:
        file = self.nest.address.file
        if os.path.isabs(file) or file.startswith(".."):
            file = os.path.basename(file)
        words = ["retile", "rewrite", str(replace(self.nest.address, file=file)), self._line]
        for given in (a for a in self.nest.assumptions if a.given):
            names = ",".join(name.removesuffix("[]") for name in given.storages)
            words += ["--distinct", names] if names else ["--assume", given.text]
        if self.trust and assumptions:
            words.append("--trust")
        return shlex.join([*words, *self.source.call.flags])


def _is_c90(flags: tuple[str, ...]) -> bool:
    """True if the flags choose the C of 1990, whose headers of loops declare nothing."""
    standards = [flag for flag in flags if flag.startswith("-std=") or flag == "-ansi"]
    return bool(standards) and standards[-1].removeprefix("-std=") in \
        ("-ansi", "c89", "c90", "gnu89", "gnu90", "iso9899:1990", "iso9899:199409")


def _printed(nodes: tuple[Node, ...]) -> Iterable[Loop]:
    """The loops whose headers are printed."""
    for node in nodes:
        if isinstance(node, Loop):
            yield node
        if not isinstance(node, Verbatim):
            yield from _printed(children(node))


def outer_scope(nest: Nest, tree: tuple[Node, ...]) -> Scope:
    """What is known ahead of the nest: its parameters, their types' ranges, and its facts."""
    operands: dict[str, Expression] = {}
    facts: list[Formula] = list(nest.facts)
    for parameter in nest.parameters:
        operands[parameter.symbol] = written(parameter.text, parameter.type)
        facts += _in_range(parameter.symbol, parameter.type.smallest, parameter.type.largest)
    for loop in loops_of(tree):
        if loop.named is not None and loop.named not in operands:
            operands[loop.named] = Expression(loop.named, INT)
            facts += _in_range(loop.named, 1, INT.largest)
    return Scope(Region.where(*facts), operands)


def _in_range(symbol: str, low: int, high: int) -> list[Formula]:
    return [at_most(low, Affine.of(symbol)), at_most(Affine.of(symbol), high)]


def step_assumptions(nest: Nest, tree: tuple[Node, ...]) -> tuple[Assumption, ...]:
    """That bounds leave room for the last steps from chunk to chunk, so that these count in the iterators' own types.

    Compilers know little of a distance between values of different types, on which the speed of short loops depends.
    """
    chunks = [loop for loop in loops_of(tree) if loop.role is Role.CHUNK and loop.named is None]
    names = frozenset().union(*(bound_names(bound) for loop in chunks for bound in (loop.lower, loop.upper)))
    room = 2 * max((abs(loop.step) for loop in chunks), default=0)
    weight = 1 + sum(abs(factor) for loop in chunks if loop.cut is not None and len(loop.cut.terms) > 1
                     for _, factor in loop.cut.terms)  # of the largest sum of sizes that a skewed loop counts to
    found = []
    for parameter in nest.parameters:
        type = parameter.type
        if INT.bits <= type.bits < 64 and parameter.symbol in names:
            high = type.largest // weight - room
            downward = type.signed and any(loop.step < 0 for loop in chunks)
            least = type.smallest // weight + room if downward else type.smallest
            condition = AllOf(tuple(_in_range(parameter.symbol, least, high)))
            if not Region.where(*nest.facts).implies(condition):
                found.append(Assumption(AssumptionCode.RELATION, f"{parameter.text} is at most {high}",
                                        Region.where(condition).relative_to(Region.where(*nest.facts)).formula()))
    return tuple(found)


def room_assumptions(nest: Nest, tree: tuple[Node, ...], others: tuple[Assumption, ...]) -> tuple[Assumption, ...]:
    """That bounds of 64 bits are small enough for sums of them: nobody has larger ones, but a test says it."""
    names = frozenset().union(*(bound_names(bound) for loop in loops_of(tree) for bound in (loop.lower, loop.upper)),
                              *(formula_names(other.condition) for other in others if other.condition is not None))
    found = []
    for parameter in nest.parameters:
        if parameter.type.bits >= 64 and parameter.symbol in names:
            low = -_ROOM if parameter.type.signed else 0
            found.append(Assumption(AssumptionCode.RELATION, f"{parameter.text} is at most {_ROOM}",
                                    AllOf(tuple(_in_range(parameter.symbol, low, _ROOM)))))
    return tuple(found)


__all__ = ["InternalError", "diff", "rewrite"]
