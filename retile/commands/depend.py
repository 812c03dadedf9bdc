"""``retile depend``."""

from __future__ import annotations

import sys

from ..report import document
from ..report.dependences import dependences_lines
from .compiling import CompilerOptions
from .opening import Facts, open_nest, say_refusals
from .output import look_of, print_document, print_lines
from .pictures import Pictures, draw


def run(address: str, compiling: CompilerOptions, *, facts: Facts, dot: bool, pictures: Pictures, as_json: bool) -> int:
    """Show the dependences of a nest, as pictures where they are wanted; 1 if it is refused."""
    pictures.check_names()
    nest = open_nest(address, compiling, facts)
    if nest.refusals:
        say_refusals(nest)
        if as_json:
            print_document(document.of_refused_dependences(nest.address, nest.refusals))
        return 1
    drawn = draw(nest, pictures) if pictures.wanted else []
    if as_json:
        print_document({**document.of_dependences(nest.nest, nest.dependences), "pictures": drawn})
    elif dot:
        from ..report.graph import graph_dot

        print_lines(graph_dot(nest.nest, nest.dependences).splitlines())
    elif not drawn:
        print_lines(dependences_lines(nest.nest, nest.dependences, look_of(sys.stdout)))
    return 0
