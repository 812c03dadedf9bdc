"""``retile depend``."""

from __future__ import annotations

import sys

from ..report import document
from ..report.dependences import dependences_dot, dependences_lines
from .compiling import CompilerOptions
from .opening import open_nest, say_refusals
from .output import look_of, print_document, print_lines


def run(address: str, compiling: CompilerOptions, *, dot: bool, as_json: bool) -> int:
    """Show the dependences of a nest; 1 if it is refused."""
    nest = open_nest(address, compiling)
    if nest.refusals:
        say_refusals(nest)
        if as_json:
            print_document(document.of_refused_dependences(nest.address, nest.refusals))
        return 1
    if as_json:
        print_document(document.of_dependences(nest.nest, nest.dependences))
    elif dot:
        print_lines(dependences_dot(nest.nest, nest.dependences))
    else:
        print_lines(dependences_lines(nest.nest, nest.dependences, look_of(sys.stdout)))
    return 0
