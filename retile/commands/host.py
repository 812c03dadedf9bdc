"""``retile host``."""

from __future__ import annotations

import sys

from ..host import describe
from ..report.host import host_lines
from .output import look_of, print_document, print_lines


def run(*, as_json: bool) -> int:
    """Show what was found out about this machine."""
    host = describe()
    if as_json:
        print_document(host.as_json())
    else:
        print_lines(host_lines(host, look_of(sys.stdout)))
    return 0
