"""``NAME=VALUE``, as options take it."""

from __future__ import annotations

from collections.abc import Iterable

from ..model import Nest, RetileError


def named_value(text: str) -> tuple[str, str]:
    """Name and value; RetileError if one of them is missing."""
    name, equals, value = text.partition("=")
    if not (name.strip() and equals and value.strip()):
        raise RetileError(f"'{text}' is not of the form NAME=VALUE.")
    return name.strip(), value.strip()


def named_sizes(texts: Iterable[str]) -> dict[str, int]:
    """The sizes of ``--set``; RetileError if one is no whole number."""
    return {name: _whole(value, name) for name, value in map(named_value, texts)}


def known_sizes(texts: Iterable[str], nest: Nest) -> dict[str, int]:
    """The sizes of ``--set`` for a nest, not necessarily all; RetileError if it has no size of a name."""
    sizes = named_sizes(texts)
    names = [parameter.text for parameter in nest.parameters]
    unknown = [name for name in sizes if name not in names and name not in {p.symbol for p in nest.parameters}]
    if unknown:
        raise RetileError(f"{nest.address}: the nest has no size {unknown[0]}; "
                          f"{'it has ' + ', '.join(names) if names else 'it has none'}.")
    return sizes


def _whole(text: str, name: str) -> int:
    try:
        return int(text)
    except ValueError:
        raise RetileError(f"--set {name}={text}: '{text}' is not a whole number.") from None
