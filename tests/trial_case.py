"""A C text, its nest, and variants whose text the test itself writes."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from retile.model import Judgement, Nest, Plan, Term, Variant, Verdict
from retile.nest import read_nest
from retile.source import CompilerCall, Source, open_source
from retile.trial import Settings, Verification, verify, verify_all

FAST = Settings(sanitize=False)


@dataclass(frozen=True)
class Case:
    """An open file and one of its nests."""

    source: Source
    nest: Nest

    @property
    def text(self) -> str:
        """The nest as it stands."""
        return self.source.slice(self.nest.span)

    def variant(self, nest_text: str, plan: str = "", includes: tuple[str, ...] = ()) -> Variant:
        """A variant with this text; ``plan`` is only read for its chunks."""
        terms = tuple(_term(word) for word in plan.split())
        made = Plan(plan, terms)
        return Variant(made, "", Judgement(Verdict.LEGAL, made), (), nest_text, includes)

    def replaced(self, old: str, new: str, plan: str = "") -> Variant:
        """The nest with one piece of its text replaced, which must be there."""
        assert old in self.text
        return self.variant(self.text.replace(old, new), plan)

    def verify(self, variant: Variant, settings: Settings = FAST) -> Verification:
        """What verification says of a variant."""
        return verify(self.source, self.nest, variant, settings)

    def accepts(self, variant: Variant, settings: Settings = FAST) -> Verification:
        """Verification passes, at several sizes."""
        found = self.verify(variant, settings)
        assert found.verified, (found.difference, found.failure, found.notes)
        return found

    def tells_apart(self, variant: Variant, settings: Settings = FAST) -> Verification:
        """The original passes and the variant does not: the difference is the variant's."""
        same, found = verify_all(self.source, self.nest, [self.variant(self.text), variant], settings)
        assert same.verified, (same.difference, same.failure, same.notes)
        assert not found.verified
        return found


def _term(word: str) -> Term:
    loop, _, chunk = word.partition(":")
    return Term(((loop, 1),), int(chunk) if chunk else None, 0, 0)


def case(
    folder: Path, text: str, call: CompilerCall = CompilerCall(), name: str = "survey.c", skip: int = 0
) -> Case:
    """The first nest of a C text (or a later one: ``skip`` lines with ``for`` are passed over)."""
    path = folder / name
    path.write_text(text)
    return of_file(str(path), skip, call)


def of_file(path: str, skip: int = 0, call: CompilerCall = CompilerCall()) -> Case:
    """The nest of a file at its first ``for`` after ``skip`` others."""
    source = open_source(path, call)
    lines = [token.line for token in source.tokens if token.kind == "word" and token.text == "for"]
    found = read_nest(source, lines[skip])
    assert found.nest is not None, found.refusals
    return Case(source, found.nest)
