"""From an address that a user typed to an open nest."""

from __future__ import annotations

from ..library import OpenFile, OpenNest
from ..values import dataclass
from .address import parse_address
from .compiling import CompilerOptions
from .output import say


@dataclass(frozen=True)
class Facts:
    """What the user says of sizes and arrays, and that the code does not."""

    relations: tuple[str, ...] = ()  # ``lda >= n``
    distinct: tuple[str, ...] = ()  # ``a,b``


def open_nest(text: str, compiling: CompilerOptions, facts: Facts = Facts()) -> OpenNest:
    """The nest at an address; RetileError if there is none, or if the facts do not fit it."""
    from ..source import open_source

    address = parse_address(text)
    return OpenFile(open_source(address.file, compiling.call_for(address.file))).nest(
        address.line, address.column, assume=facts.relations, distinct=facts.distinct)


def say_refusals(nest: OpenNest) -> None:
    """Say why a nest is refused."""
    for refusal in nest.refusals:
        say(nest.place(refusal))
