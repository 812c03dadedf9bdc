"""``retile rewrite``."""

from __future__ import annotations

import sys
from collections.abc import Mapping

from ..library import OpenNest
from ..model import Judgement, Verdict
from ..report.document import of_rewriting
from ..report.verdict import verdict_lines
from ..values import dataclass
from .compiling import CompilerOptions
from .opening import Facts, open_nest
from .output import look_of, print_document, say, write_bytes
from .proof import prove


@dataclass(frozen=True)
class Target:
    """Where the variant goes, and in which form."""

    file: str | None = None  # of -o; None for standard output
    in_place: bool = False
    as_diff: bool = False
    as_json: bool = False


def run(address: str, plan: str, compiling: CompilerOptions, *, facts: Facts, defaults: Mapping[str, str | None],
        trust: bool, verify: bool, target: Target) -> int:
    """Write the variant of a plan; 1, and nothing written, unless the verdict is legal and, with ``verify``, holds."""
    nest = open_nest(address, compiling, facts)
    parsed = plan if nest.refusals else nest.plan(plan, **defaults)
    judgement = nest.check(parsed)
    if judgement.verdict is not Verdict.LEGAL:
        return _refuse(nest, judgement, target)
    variant = nest.rewrite(parsed, trust=trust)
    patch = nest.diff(variant)
    proof = prove(nest, variant, trust) if verify else None
    if proof is not None and not proof.passed:
        say(f"{nest.address}: nothing was written, because the variant is not proven.")
        if target.as_json:
            print_document({**of_rewriting(nest.address, judgement, None, None), **proof.as_json()})
        return 1
    _deliver(nest, patch if target.as_diff else variant.text, target)
    if target.as_json:
        said = proof.as_json() if proof is not None else {}
        print_document({**of_rewriting(nest.address, judgement, variant.text, patch), **said})
    return 0


def _refuse(nest: OpenNest, judgement: Judgement, target: Target) -> int:
    say("\n".join(verdict_lines(nest.address, judgement, nest.place, look_of(sys.stderr))))
    if target.as_json:
        print_document(of_rewriting(nest.address, judgement, None, None))
    return 1


def _deliver(nest: OpenNest, text: str, target: Target) -> None:
    from ..source import check_unchanged, replace_file

    data = nest.source.encode(text)
    if target.in_place or target.file is not None:
        check_unchanged(nest.source.path, nest.source.encode(nest.source.text))
    if target.in_place:
        replace_file(nest.source.path, data)
    elif target.file is not None and target.file != "-":
        replace_file(target.file, data)
    elif not target.as_json:
        write_bytes(data)
