"""The proof of one variant before it is handed out: what the judge says, and what building and running it says."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ..library import OpenNest
from ..model import RetileError, Variant
from .output import say

if TYPE_CHECKING:
    from ..judge import Finding
    from ..trial import Verification


@dataclass(frozen=True)
class Proof:
    """What was found out about a variant."""

    finding: Finding
    verification: Verification | None  # None: the nest cannot be run on its own
    reason: str = ""  # why not

    @property
    def verified(self) -> bool | None:
        """What building and running the variant says; None if it could not be done."""
        return self.verification.verified if self.verification is not None else None

    @property
    def passed(self) -> bool:
        """True if nothing speaks against the variant and at least one of both speaks for it."""
        answers = (self.finding.judged, self.verified)
        return False not in answers and True in answers

    def as_json(self) -> dict[str, Any]:
        """The fields for a JSON document."""
        verification = self.verification
        return {"judged": self.finding.judged, "verified": self.verified, "judge": self.finding.as_json(),
                "verification": None if verification is None else {
                    "cases": [dict(case) for case in verification.cases], "sanitized": verification.sanitized,
                    "difference": str(verification.difference) if verification.difference else None,
                    "failure": verification.failure, "notes": list(verification.notes)},
                "verification_reason": self.reason or None}


def prove(nest: OpenNest, variant: Variant, trust: bool) -> Proof:
    """Judge a variant, build it and run it unless the judge finds it wrong.

    What speaks against it, or could not be done, goes to standard error.
    """
    finding = nest.judge(variant, trust=trust)
    if finding.judged is False:
        proof = Proof(finding, None, "the judge found it wrong")
    else:
        proof = Proof(finding, *_run(nest, variant, trust))
    for line in _objections(proof):
        say(f"{nest.address}: {line}")
    return proof


def _run(nest: OpenNest, variant: Variant, trust: bool) -> tuple[Verification | None, str]:
    """What building and running a variant says; or why that cannot be done."""
    from ..trial import Settings

    say(f"Building and running the loops of {nest.address} and of its variant.")
    try:
        return nest.verify(variant, Settings(trust=trust)), ""
    except RetileError as problem:
        return None, str(problem)


def _objections(proof: Proof) -> list[str]:
    lines = []
    if proof.finding.judged is False:
        lines.append(f"the variant computes something else: {proof.finding.reason}")
    elif proof.finding.judged is None:
        lines.append(f"not judged: {proof.finding.reason}")
    found = proof.verification
    if found is None:
        lines.append(f"not built and run: {proof.reason}")
    elif not found.verified:
        lines.append(f"not verified: {found.difference or found.failure or 'no reason was recorded'}")
    return lines
