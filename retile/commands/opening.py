"""From an address that a user typed to an open nest."""

from __future__ import annotations

from ..library import OpenFile, OpenNest
from .address import parse_address
from .compiling import CompilerOptions
from .output import say


def open_nest(text: str, compiling: CompilerOptions) -> OpenNest:
    """The nest at an address; RetileError if there is none."""
    from ..source import open_source

    address = parse_address(text)
    return OpenFile(open_source(address.file, compiling.call_for(address.file))).nest(address.line, address.column)


def say_refusals(nest: OpenNest) -> None:
    """Say why a nest is refused."""
    for refusal in nest.refusals:
        say(nest.place(refusal))
