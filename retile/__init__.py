"""Loop tiling for C sources: exact verdicts, remainder-correct code, proof of equal results and timings.

    import retile

    code = retile.open_file("samples_c/beamform.c")
    nest = code.nest(14)
    judgement = nest.check("k:64 i k j")
    if judgement.verdict.value == "legal":
        print(nest.diff(nest.rewrite("k:64 i k j")))

Everything is loaded when it is first used, so that importing this package costs next to nothing.
"""

from __future__ import annotations

from collections.abc import Sequence
from os import PathLike
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .host import Host
    from .library import OpenFile
    from .model import RetileError as RetileError

__version__ = "0.1.0"
__all__ = ["RetileError", "describe_host", "open_file"]


def open_file(path: str | PathLike[str], *, cc: str = "cc", flags: Sequence[str] = ()) -> OpenFile:
    """Read a C file; ``flags`` are those that the preprocessor needs (``-DN=4``, ``-Iinclude``, ``-std=c11``).

    Raises RetileError, whose text is the whole message, if the file cannot be read, preprocessed or parsed.
    """
    from .library import OpenFile
    from .source import CompilerCall, open_source

    return OpenFile(open_source(str(path), CompilerCall(cc, tuple(flags))))


def describe_host() -> Host:
    """What can be found out about this machine: caches, compilers, clock; each fact with its origin."""
    from .host import describe

    return describe()


def __getattr__(name: str) -> object:
    if name == "RetileError":
        from .model import RetileError

        return RetileError
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
