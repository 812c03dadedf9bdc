"""What random nests and plans have to satisfy; used by test_random.py and by long runs.

A nest is read and analysed once.  For each plan

* ``legal``: no pair of instances is reversed at several small sizes; a variant computes every cell by the same operations
  (equal tags) and touches no further cell of the caller; all variants of a nest are compiled into one program, run at
  awkward sizes, with overlapping pointers too, and leave the same bits;
* ``illegal``: brute force reverses a pair too, or the witness is replayed: at its sizes both instances happen in the order
  told, they share a cell, one of them writes, the kind is right, and the plan puts them the other way round;
* a plan that is proposed instead is legal itself.
"""

from __future__ import annotations

import functools
import re
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import product

import numpy as np
from asked import Answer, ask
from many_variants import SANITIZED, Printed, Setting, problems
from oracle import Log, TooLong, Undefined, Unsupported, compare, observe
from random_choices import Choices
from random_nests import RandomNest
from random_order import Aligned, Execution, threaded
from random_plans import NAMED, LoopShape, Shape, plan
from retile.affine import Affine
from retile.model import Assumption, Instance, Judgement, RetileError, StorageKind, Verdict, Violation
from retile.plan.buffers import references
from retile.plan.options import shown
from walk import holds

STEPS = 6000
_ON_DATA = re.compile(r"if \([^\n]*\[")
_SPREAD = ((4, 5, 6), (5, 3, 4), (3, 6, 5), (6, 4, 3))
_EDGES = ((0, 3, 2), (1, 1, 1), (2, 0, 4), (3, 2, 1), (0, 0, 0), (1, 4, 3))
_LARGE = ((7, 9, 8), (9, 7, 10), (8, 8, 11), (11, 6, 7))
_CUTS = (1, 2, 3, 5)  # for chunks that have a name
_EXTREMES = (0, 1000)  # every value in a run of its own, all values in one


@dataclass(frozen=True)
class Effort:
    """How much is done for each nest."""

    plans: int = 30
    variants: int = 5  # of legal plans, that are written, judged and built
    tags: int = 2  # sizes at which tags are compared
    build: str = "gcc"  # the compiler; empty: nothing is built
    flags: tuple[str, ...] = ("-O1",)
    instead: bool = False  # ask for a plan to propose instead of the first illegal one


@dataclass
class Finding:
    """What came out about one nest and its plans."""

    counts: Counter = field(default_factory=Counter)
    problems: list[tuple[str, str]] = field(default_factory=list)  # (plan, what is wrong)


class Nest:
    """A nest that was read, and its executions."""

    def __init__(self, nest: RandomNest, seed: int) -> None:
        self.nest = nest
        self.answer: Answer = ask(nest.text, nest.line)
        self.seed = seed

    @functools.cached_property
    def shape(self) -> Shape:
        """What plans can speak of."""
        read = self.answer.opened.nest
        return Shape(tuple(LoopShape(loop.id, loop.outer) for loop in read.loops),
                     tuple((s.id, s.loops) for s in read.statements),
                     tuple((shown(s.name, subscripts) if len(references(read, s.name)) > 1 else s.name,
                            tuple(loop.id for loop in read.loops if any(loop.id in form.names() for form in subscripts)))
                           for s in read.storages if s.kind is not StorageKind.SCALAR
                           for subscripts in references(read, s.name)))

    @functools.cached_property
    def small(self) -> list[dict[str, int]]:
        """Two sizes with room for conflicts, one at the edge."""
        seed = self.seed
        chosen = [_SPREAD[seed % 4], _SPREAD[(seed + 1 + seed // 4 % 3) % 4], _EDGES[seed % 6]]
        return [dict(zip(self.nest.sizes, (*values, 1 + seed % 4), strict=False)) for values in chosen]

    @functools.cached_property
    def larger(self) -> list[dict[str, int]]:
        """Sizes at which variants run besides the small ones."""
        seed = self.seed
        chosen = [_LARGE[seed % 4], _EDGES[(seed + 1) % 6], _EDGES[(seed + 3) % 6], (1, 2, 3)]
        if re.search(r"(char|short) \w+ = ", self.nest.text) and self.nest.text.count("for (") == 1:
            chosen.append(_near_the_end(self.nest.text))
        return [dict(zip(self.nest.sizes, (*values, 2 + seed % 5), strict=False)) for values in chosen]

    @functools.lru_cache(maxsize=64)  # noqa: B019 - lives as long as the nest
    def execution(self, sizes: tuple[tuple[str, int], ...], may: bool, steps: int = STEPS, line: int = 0) -> Execution | None:
        """What runs at given sizes; None if that is undefined or too long."""
        try:
            log = observe(self.nest.text, self.nest.function, line or self.nest.line, dict(sizes), may=may, steps=steps)
        except (Undefined, TooLong):
            return None
        return Execution(log)

    def executions(self, choices: Sequence[dict[str, int]]) -> Iterator[tuple[dict[str, int], Execution]]:
        """The executions at some sizes, those on data both ways too."""
        for sizes in choices:
            for may in (False, True) if "if (" in self.nest.text else (False,):
                found = self.execution(tuple(sizes.items()), may)
                if found is not None:
                    yield sizes, found


def _near_the_end(text: str) -> tuple[int, int, int]:
    """Sizes near the largest value of a narrow iterator."""
    return (253, 251, 254) if "unsigned char" in text else (130, 127, 255)


def examine(nest: RandomNest, choose: Choices, seed: int, effort: Effort, plans: Sequence[str] = ()) -> Finding:
    """Ask about a nest with random plans, or with given ones, and check the answers."""
    finding = Finding()
    try:
        own = Nest(nest, seed)
        refusals = own.answer.opened.refusals
    except RetileError as problem:
        finding.counts[f"not read: {_short(str(problem))}"] += 1
        return finding
    if refusals:
        finding.counts.update(f"nest refused: {refusal.code}" for refusal in refusals)
        return finding
    printed: list[Printed] = []
    for at, text in enumerate(plans or dict.fromkeys(plan(choose, own.shape) for _ in range(effort.plans))):
        illegal = _examine_plan(own, text, at, effort, finding, printed)
        if illegal is not None and effort.instead and "asked for a proposal" not in finding.counts:
            _examine_proposal(own, illegal, finding, effort, printed)
    if effort.build and printed:
        _build(own, printed, effort, finding)
    return finding


def _examine_plan(own: Nest, text: str, at: int, effort: Effort, finding: Finding, printed: list[Printed]) -> Judgement | None:
    """Examine one plan; the judgement if it is illegal."""
    try:
        judgement = own.answer.check(text)
    except RetileError as problem:
        finding.counts[f"no plan: {_short(str(problem))}"] += 1
        return None
    finding.counts["pairs"] += 1
    finding.counts[judgement.verdict.value] += 1
    if judgement.verdict is Verdict.LEGAL:
        _examine_legal(own, judgement, at, effort, finding, printed)
    elif judgement.verdict is Verdict.ILLEGAL:
        _examine_illegal(own, judgement, finding)
        return judgement
    elif judgement.verdict is Verdict.REFUSED:
        finding.counts.update(f"plan refused: {refusal.code}" for refusal in judgement.refusals)
    else:
        _examine_unproven(own, judgement, finding)
    return None


def _examine_proposal(own: Nest, judgement: Judgement, finding: Finding, effort: Effort, printed: list[Printed]) -> None:
    proposed = own.answer.opened.check(judgement.plan).instead
    finding.counts["asked for a proposal"] += 1
    finding.counts["proposed"] += proposed is not None
    if proposed is not None:
        before = finding.counts["legal"]
        _examine_plan(own, proposed, 1, effort, finding, printed)
        if finding.counts["legal"] == before:
            finding.problems.append((judgement.plan.text, f"proposes {proposed}, which is not legal"))


# ---------------------------------------------------------------- legal


def _examine_legal(own: Nest, judgement: Judgement, at: int, effort: Effort, finding: Finding, printed: list[Printed]) -> None:
    if not _reassociates(judgement):
        finding.problems += [(judgement.plan.text, f"false legal {clash}") for clash in _clashes(own, judgement, finding)][:1]
    if len(printed) >= effort.variants:
        return
    trust = bool(judgement.assumptions) and (own.seed + at) % 2 == 0
    try:
        variant = own.answer.variant(judgement.plan.text, trust=trust)
    except RetileError as problem:
        finding.counts[f"legal, but no variant: {_reason(str(problem))}"] += 1
        return
    names = tuple((name, _CUTS[(own.seed + at) % 4]) for name in _named(judgement.plan.text))
    sizes = [*own.small, *own.larger]
    allowed = tuple(not trust or assumptions_hold(judgement.assumptions, s) is True for s in sizes)
    printed.append(Printed(variant.text, judgement.plan.text, names, allowed, not trust))
    if not _reassociates(judgement):
        _compare_tags(own, printed[-1], effort, finding)


def _clashes(own: Nest, judgement: Judgement, finding: Finding) -> Iterator[str]:
    """Pairs of instances that a legal plan reverses."""
    compared = False
    for sizes, execution in own.executions(own.small):
        if not assumptions_hold(judgement.assumptions, sizes):
            continue
        for cuts in _cuts(judgement.plan.text):
            try:
                around = judgement.plan.text, aligned_of(judgement, sizes), cuts
                wrong = [pair for pair in (*execution.reversed(*around), *execution.raced(*around))
                         if not _commute(own.nest.text, *(execution.log[at].line for at in execution.pairs[pair]))]
            except KeyError:  # a place told in terms of an expression of the text: the tags decide alone
                finding.counts["place not decided"] += 1
                return
            compared = True
            if len(wrong):
                yield f"at {sizes} {cuts}: {execution.told(wrong[0])}"
    finding.counts["legal, order compared"] += compared


def _commute(text: str, first: int, second: int) -> bool:
    """True if two lines only add to an array of integers that wrap around: any order gives the same bits."""
    found = set()
    for line in (text.split("\n")[number - 1] for number in (first, second)):
        match = re.fullmatch(r" *(\w+)\[.*\] ([-+^|])= (.*);", line)
        if match is None or re.search(rf"\b{match[1]}\b", match[3]) or \
                not re.search(rf"\b(unsigned|unsigned char|short) (\*(restrict )?)?{match[1]}\b", text):
            return False
        found.add((match[1], match[2].replace("-", "+")))
    return len(found) == 1


def _compare_tags(own: Nest, variant: Printed, effort: Effort, finding: Finding) -> None:
    head = "".join(f"#define {name} {value}\n" for name, value in variant.names)
    for sizes, allowed in list(zip(own.small, variant.allowed, strict=False))[:effort.tags]:
        try:
            wrong = allowed and compare(own.nest.text, head + variant.text, own.nest.function, sizes, steps=STEPS)
        except (Undefined, TooLong):
            continue
        except Unsupported as reason:
            finding.counts[f"tags not compared: {_short(str(reason))}"] += 1
            continue
        finding.counts["tags compared"] += bool(allowed)
        if wrong:
            finding.problems.append((variant.label, f"tags differ at {sizes}: {wrong[:3]}\n{variant.text}"))


def _build(own: Nest, printed: list[Printed], effort: Effort, finding: Finding) -> None:
    """Compile all variants into one program and run it."""
    settings, keep = [], []
    for at, sizes in enumerate([*own.small, *own.larger]):
        execution = own.execution(tuple(sizes.items()), True, line=own.nest.outermost)
        if execution is not None:
            settings.append(Setting(sizes, extents_of(execution.log, own.nest.text)))
            keep.append(at)
    exact = [p for p in printed if "reassociate" not in p.label or "double" not in own.nest.text and "float" not in own.nest.text]
    if not settings or not exact:
        finding.counts["nothing to run"] += 1
        return
    chosen = [Printed(p.text, p.label, p.names, tuple(p.allowed[at] for at in keep), p.shared) for p in exact]
    wrong = problems(own.nest.text, own.nest.function, chosen, settings, compiler=effort.build, flags=effort.flags)
    finding.counts["bits compared"] += len(chosen)
    finding.counts[f"bits compared, {effort.build} {' '.join(effort.flags[:1])}"
                   f"{', sanitized' if effort.flags == SANITIZED else ''}"] += len(chosen)
    for line in wrong:
        label = re.search(r"\((.*?)\)$|\((.*?)\):", line.splitlines()[0])
        finding.problems.append(((label[1] or label[2]) if label else "", f"{line} {[s.sizes for s in settings]}"))


def extents_of(log: Log, text: str) -> dict[str, tuple[int, int]]:
    """The bytes of each array of the caller that an execution may touch."""
    loose = 320 if "map[" in text or re.search(r"^(?! *for).*\?", text, re.MULTILINE) else 0
    found: dict[str, tuple[int, int]] = {}
    for instance in log:
        for obj, offset, _ in instance.accesses:
            low, high = found.get(obj.name, (offset, offset))
            found[obj.name] = min(low, offset), max(high, offset + getattr(obj.type, "size", 8))
    return {name: (low // 8 * 8 - loose, high + loose) for name, (low, high) in found.items()}


def _reassociates(judgement: Judgement) -> bool:
    return dict(judgement.plan.options).get("reassociate") == "yes"


def _named(text: str) -> list[str]:
    return [name for name in NAMED if f":{name}" in text]


def _cuts(text: str) -> list[dict[str, int]]:
    names = _named(text)
    each = [dict(zip(names, sizes, strict=True)) for sizes in product(_EXTREMES, repeat=len(names))]
    return [*(dict.fromkeys(names, size) for size in _CUTS), *each] if names else [{}]


# ---------------------------------------------------------------- what a judgement rests on


def aligned_of(judgement: Judgement, sizes: dict[str, int]) -> Aligned:
    """Where the plan puts statements among the iterations of loops they are not in."""
    return [(int(re.match(r"\d+", a.statement).group()), a.loop, functools.partial(_value_of, a.value, sizes), a.chunks_only)
            for a in judgement.plan.aligned]


def _value_of(form: Affine, sizes: dict[str, int], iterators: dict[str, int]) -> int:
    by_symbol = {name: iterators[name.partition("@")[0]] for name in form.names() if name not in sizes}
    return form.evaluate({**sizes, **by_symbol})


def assumptions_hold(assumptions: tuple[Assumption, ...], sizes: dict[str, int]) -> bool | None:
    """Whether the assumptions about sizes hold; None where one is about something else than sizes."""
    try:
        return all(holds(a.condition, sizes) for a in assumptions if a.condition is not None)
    except KeyError:
        return None


def _reason(text: str) -> str:
    """What a message says behind the place, without names and numbers of the case."""
    return re.sub(r" for .*", "", _short(text.partition(": ")[2]))


def _short(text: str) -> str:
    text = re.sub(r"(cannot \w+) \S+:|^(wrong plan:) \S+ has", r"\1\2 _:", text.splitlines()[0])
    return re.sub(r"'[^']*'|\d+|(?<=iterations of )\S+|(?<=the loop )\S+|(?<=subscript of )\S+|(?<=cells of )\S+", "_", text)[:70]


# ---------------------------------------------------------------- illegal and unproven


def _examine_illegal(own: Nest, judgement: Judgement, finding: Finding) -> None:
    confirmed = not _reassociates(judgement) and _reversed_somewhere(own, judgement)
    finding.counts["illegal, reversed by brute force"] += bool(confirmed)
    # With brute force in agreement one witness is enough to see that witnesses are right; else all must be.
    for violation in judgement.violations[:1 if confirmed else None]:
        finding.problems += [(judgement.plan.text, text) for text in witness_problems(own, judgement, violation, finding.counts)]


def _reversed_somewhere(own: Nest, judgement: Judgement) -> bool | None:
    """Whether brute force finds a pair that the plan reverses; None if there was nothing to look at."""
    seen = None
    for sizes, execution in own.executions(own.small):
        for cuts in _cuts(judgement.plan.text):
            try:
                around = judgement.plan.text, aligned_of(judgement, sizes), cuts
                if len(execution.reversed(*around)) or len(execution.raced(*around)):
                    return True
            except KeyError:
                return None
            seen = False
    return seen


def _examine_unproven(own: Nest, judgement: Judgement, finding: Finding) -> None:
    reversed_there = _reversed_somewhere(own, judgement)
    what = {True: "reversed by brute force", False: "kept at small sizes", None: "not decided"}[reversed_there]
    finding.counts.update({f"unproven, {what}: {_short(u.reason)}" for u in judgement.unproven})


def witness_problems(own: Nest, judgement: Judgement, violation: Violation, counts: Counter) -> list[str]:
    """What is wrong with a witness; empty if it happens just as told."""
    told, problem = dict(violation.parameters), ["never tried"]
    if any(name.startswith("map[") for name in told):  # the interpreter has values of its own for these
        counts["witness not replayed: it gives a value to a cell"] += 1
        return []
    for fill in (0, 3, 1, 6) if set(own.nest.sizes) - set(told) else (0,):
        sizes = {name: told.get(name, fill) for name in own.nest.sizes}
        if max(sizes.values()) > 5000:
            counts["witness too large to replay"] += 1
            return []
        try:
            execution = own.execution(tuple(sizes.items()), True, 5 * STEPS)
            if execution is None:
                observe(own.nest.text, own.nest.function, own.nest.line, sizes, may=True, steps=5 * STEPS)
            problem = _replayed(execution, judgement, violation, sizes)
        except TooLong:
            counts["witness too large to replay"] += 1
            return []
        except Undefined as reason:
            if _ON_DATA.search(own.nest.text):  # what is accessed under a condition on data proves nothing about sizes
                counts["witness outside the domain, conditions on data"] += 1
                return []
            problem = [f"the witness lies outside the domain at {sizes}: {reason}: {violation}"]
            continue
        if not problem:
            counts["witness replayed"] += 1
            return []
    if set(told) - set(own.nest.sizes) - set(_named(judgement.plan.text)):
        # an expression of the sizes that is no linear form stands for itself, so that its value may not be theirs
        counts["witness of an expression that stands for itself, not replayed"] += 1
        return []
    return problem


def _replayed(execution: Execution, judgement: Judgement, violation: Violation, sizes: dict[str, int]) -> list[str]:
    log = execution.log
    sources = [k for k, x in enumerate(log) if _is(x, violation.source)]
    targets = [k for k, x in enumerate(log) if _is(x, violation.target)]
    pairs = [(a, b) for a in sources for b in targets if log[a].run == log[b].run]
    if not pairs:
        return [f"at {sizes} the witness does not run: {violation}"]
    if not any(a < b for a, b in pairs):
        return [f"at {sizes} the witness runs in the other order: {violation}"]
    sharing = [(a, b) for a, b in pairs if a < b and _share(log[a], log[b], violation.kind)]
    if not sharing:
        return [f"at {sizes} the witness shares no cell as {violation.kind}: {violation}"]
    for cuts in _cuts(judgement.plan.text):
        times = execution.times(judgement.plan.text, aligned_of(judgement, sizes), cuts)
        level = threaded(judgement.plan.text)
        if any(tuple(times[b]) < tuple(times[a]) or
               level is not None and tuple(times[a][:level]) == tuple(times[b][:level]) and times[a][level] != times[b][level]
               for a, b in sharing):
            return []
    return [f"at {sizes} the plan keeps the order of the witness: {violation}"]


def _is(instance: object, told: Instance) -> bool:
    return instance.line == told.line and \
        all(instance.iterators.get(name.partition("@")[0]) == value for name, value in told.iterators)


def _share(first: object, second: object, kind: str) -> bool:
    wants = {"flow": (True, False), "anti": (False, True), "output": (True, True)}[kind]
    for obj, offset, writes in first.accesses:
        for other, place, also in second.accesses:
            same = obj is other or (obj.kind == other.kind == "block" and obj.declared == other.declared)
            if same and offset == place and (writes, also) == wants:
                return True
    return False


__all__ = ["Effort", "Finding", "Unsupported", "examine", "np"]
