"""``retile check``."""

from __future__ import annotations

import sys
from collections.abc import Mapping

from ..model import Verdict
from ..report.document import of_judgement
from ..report.verdict import verdict_lines
from .compiling import CompilerOptions
from .opening import Facts, open_nest
from .output import look_of, print_document, print_lines


def run(address: str, plan: str, compiling: CompilerOptions, *, facts: Facts, defaults: Mapping[str, str | None],
        as_json: bool) -> int:
    """Give the verdict about a plan; 0 only if it is legal."""
    nest = open_nest(address, compiling, facts)
    judgement = nest.check(plan if nest.refusals else nest.plan(plan, **defaults))
    if as_json:
        print_document(of_judgement(nest.address, judgement))
    else:
        print_lines(verdict_lines(nest.address, judgement, nest.place, look_of(sys.stdout)))
    return 0 if judgement.verdict is Verdict.LEGAL else 1
