"""An open file and its nests: what the commands do, for programs.

Each question is one method, each answer one of the values of ``model``; the rooms behind are loaded when asked.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import cached_property
from typing import TYPE_CHECKING

from .model import Address, Judgement, Nest, Plan, Refusal, RetileError, Variant, Verdict
from .values import dataclass, replace

if TYPE_CHECKING:
    from .dependence import Dependences
    from .judge import Examiner, Finding
    from .host import Host
    from .nest import Found
    from .source import Source
    from .suggest import Advice
    from .trial import Campaign, Settings, Verification
    from .trial.records import Progress


@dataclass(frozen=True)
class OpenFile:
    """A C file that has been read, preprocessed and parsed."""

    source: Source

    @property
    def path(self) -> str:
        """The file's name as it was given."""
        return self.source.path

    def nests(self, *, inner: bool = True) -> tuple[Found, ...]:
        """Every ``for`` of the file, in text order, ready or refused; without ``inner`` the outermost ones only."""
        from .nest import read_nests

        return read_nests(self.source, inner=inner)

    def nest(self, line: int, column: int | None = None, *, assume: Sequence[str] = (),
             distinct: Sequence[str] = ()) -> OpenNest:
        """The nest whose outermost ``for`` starts on a line; RetileError, naming the nearest ones, if none does.

        ``assume``: relations between sizes that hold, ``"lda >= n"``; ``distinct``: storages that do not overlap,
        ``"a,b"``, or whose rows do not, ``"rows"``.  RetileError if one is not understood or contradicts the code.
        """
        from .nest import read_nest

        found = read_nest(self.source, line, column)
        if found.nest is not None and (assume or distinct):
            from .nest.given import with_given

            found = replace(found, nest=with_given(found.nest, assume, distinct))
        return OpenNest(self.source, found)


@dataclass(frozen=True)
class OpenNest:
    """One ``for`` of an open file and all that is in it."""

    source: Source
    found: Found

    @property
    def address(self) -> Address:
        """Its ``FILE:LINE``."""
        return self.found.address

    @property
    def refusals(self) -> tuple[Refusal, ...]:
        """Why retile does not read it; empty if it does."""
        return self.found.refusals

    @property
    def nest(self) -> Nest:
        """Its loops, statements and accesses; RetileError if retile refuses it."""
        if self.found.nest is None:
            raise RetileError("\n".join(self.place(refusal) for refusal in self.refusals))
        return self.found.nest

    @cached_property
    def dependences(self) -> Dependences:
        """The pairs of statements that touch one cell, one of them writing; RetileError if the nest is refused."""
        from .dependence import analyse

        return analyse(self.nest)

    def place(self, refusal: Refusal) -> str:
        """A refusal with file, line, source line and caret."""
        return self.source.complaint(refusal.line, refusal.column, f"{refusal.reason} [{refusal.code}]", "")

    def plan(self, text: str, **defaults: str | None) -> Plan:
        """The plan that a text describes, ``terms ; options``; ``defaults`` (``remainder="peel"``) hold for the options
        that the text does not name.

        Raises RetileError, with the place in the text marked, if it is no plan for this nest.
        """
        from .plan import parse_plan

        plan = parse_plan(text, self.nest)
        options = plan.options + tuple((word, value) for word, value in defaults.items()
                                       if value is not None and word not in dict(plan.options))
        if options == plan.options:
            return plan
        written = ", ".join(f"{word} {value}" for word, value in options)
        return replace(plan, text=f"{plan.order_text}; {written}", options=options)

    def check(self, plan: str | Plan) -> Judgement:
        """The verdict about a plan, with witness, assumptions and, if there is one, a legal plan near it."""
        from .plan import judge, nearest_legal

        if self.found.nest is None:
            text = plan.text if isinstance(plan, Plan) else " ".join(plan.split())
            return Judgement(Verdict.REFUSED, Plan(text, ()), refusals=self.refusals)
        judgement = judge(self.nest, self.dependences, self._parsed(plan))
        if judgement.verdict is Verdict.LEGAL and judgement.plan.buffers:
            from .rewrite.buffered import not_written_down

            refusals = tuple(not_written_down(self.source, self.nest, judgement.plan))
            return replace(judgement, verdict=Verdict.REFUSED, refusals=refusals) if refusals else judgement
        if judgement.verdict not in (Verdict.ILLEGAL, Verdict.UNPROVEN) or judgement.instead is not None:
            return judgement
        return replace(judgement, instead=nearest_legal(self.nest, self.dependences, judgement.plan))

    def suggest(self, sizes: Mapping[str, int] | None = None, *, host: Host | None = None, most: int = 10) -> Advice:
        """Legal plans worth a trial on this host, most promising first, each with the reason; or why to leave the nest.

        ``sizes``: of the nest's parameters, by name, as far as they are known; they only rank.  ``host``: another
        machine than this one.  RetileError if the nest is refused.
        """
        from .host import describe
        from .suggest import suggest

        return suggest(self.nest, self.dependences, host or describe(), sizes, most)

    def rewrite(self, plan: str | Plan, *, trust: bool = False) -> Variant:
        """The file with this nest in the order of the plan.

        ``trust`` leaves out the test of the assumptions, and with it the original loops.  The variant carries its
        judgement.  Raises RetileError, with the reason, if the verdict is not ``legal``.
        """
        from .rewrite import rewrite

        parsed = self._parsed(plan)
        judgement = self.check(parsed)
        if judgement.verdict is not Verdict.LEGAL:
            raise RetileError(f"{self.address}: no variant for plan '{parsed.text}': it is {judgement.verdict.value}.")
        return rewrite(self.source, self.nest, self.dependences, parsed, judgement, trust=trust)

    def diff(self, variant: Variant) -> str:
        """A patch from the file to a variant, as ``git apply`` and ``patch -p1`` take it."""
        from .rewrite import diff

        return diff(self.source, variant)

    @cached_property
    def _examiner(self) -> Examiner:
        from .judge import Examiner

        return Examiner(self.source, self.address.line, self.address.column)

    def judge(self, variant: Variant, *, trust: bool = False) -> Finding:
        """What the judge says of a variant: original and variant are read again and run at small sizes on numbers that
        carry their history.

        ``trust``: only at sizes at which what the variant assumes holds.  Takes a second or two; a Finding that says so
        where the judge does not interpret something.
        """
        from .judge import task_of

        return self._examiner.examine(task_of(self.nest, variant, self.source.call.flags, trust))

    def verify(self, variant: Variant, settings: Settings | None = None) -> Verification:
        """Whether original and variant, built and run at awkward sizes, leave the same bytes.

        Raises RetileError if the nest cannot be run on its own or there is no compiler.
        """
        from .trial import Settings, verify

        return verify(self.source, self.nest, variant, settings or Settings())

    def measure(self, plans: Sequence[str | Plan], sizes: Mapping[str, int], settings: Settings | None = None, *,
                on_progress: Progress | None = None, command: str = "retile measure") -> Campaign:
        """Judge, verify and time the variants of legal plans against the original, round by round in one process.

        ``sizes`` give the nest's parameters by name.  Interrupted, it returns what was measured until then.  Raises
        RetileError if a plan is not legal, a size is missing, or the nest cannot be run on its own.
        """
        from .trial import Settings, measure

        settings = settings or Settings()
        variants = [self.rewrite(plan, trust=settings.trust) for plan in plans]
        return measure(self.source, self.nest, variants, sizes, settings, on_progress, command,
                       (lambda variant: self.judge(variant, trust=settings.trust)) if settings.verify else None)

    def search(self, sizes: Mapping[str, int], settings: Settings | None = None, *, on_progress: Progress | None = None,
               command: str = "retile measure", most: int = 25) -> Campaign | None:
        """Measure suggested plans, then neighbours of the fastest, ``most`` trials in all; None if there are none.

        What is said of ``measure`` holds.  Every trial's speedup is against the original in the same rounds.
        """
        from .suggest import neighbours
        from .trial import Settings, in_rounds

        settings = settings or Settings()
        advice = self.suggest(sizes)

        def further(fastest: str, tried: set[str], room: int) -> list[Plan]:
            return [found.plan for found in neighbours(self.nest, self.dependences, self.plan(fastest), tried, room)]

        plans = [suggestion.plan for suggestion in advice.suggestions][:most]
        return in_rounds(plans, settings, most, further, lambda some, so: self.measure(
            some, sizes, so, on_progress=on_progress, command=command)) if plans else None

    def _parsed(self, plan: str | Plan) -> Plan:
        return plan if isinstance(plan, Plan) else self.plan(plan)
