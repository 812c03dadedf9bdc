"""``retile nests``."""

from __future__ import annotations

import sys

from ..report.document import of_nests
from ..report.nests import nests_lines
from .compiling import CompilerOptions
from .output import look_of, print_document, print_lines


def run(files: tuple[str, ...], compiling: CompilerOptions, *, every: bool, as_json: bool) -> int:
    """List the nests of all files; nothing is printed unless every file can be read."""
    from ..library import OpenFile
    from ..source import open_source

    found = [one for file in files
             for one in OpenFile(open_source(file, compiling.call_for(file))).nests(inner=every or as_json)]
    if as_json:
        print_document(of_nests(found))
    else:
        print_lines(nests_lines(found, look_of(sys.stdout)))
    return 0
