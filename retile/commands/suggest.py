"""``retile suggest``."""

from __future__ import annotations

import sys

from ..report.suggestions import of_advice, of_refused_advice, suggestion_lines
from .compiling import CompilerOptions
from .opening import Facts, open_nest, say_refusals
from .output import look_of, print_document, print_lines
from .sizes import known_sizes


def run(address: str, sizes: tuple[str, ...], compiling: CompilerOptions, *, facts: Facts, most: int,
        as_json: bool) -> int:
    """Show legal plans worth a trial on this host; 1 if the nest is refused."""
    nest = open_nest(address, compiling, facts)
    if nest.refusals:
        say_refusals(nest)
        if as_json:
            print_document(of_refused_advice(nest.address, nest.refusals))
        return 1
    known = known_sizes(sizes, nest.nest)
    advice = nest.suggest(known, most=most)
    if as_json:
        print_document(of_advice(nest.address, advice))
    else:
        print_lines(suggestion_lines(nest.address, nest.nest, known, advice, look_of(sys.stdout)))
    return 0
