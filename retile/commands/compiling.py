"""The compiler call that a user's options, or a compilation database, stand for."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..values import dataclass, replace

if TYPE_CHECKING:
    from ..source import CompilerCall


@dataclass(frozen=True)
class CompilerOptions:
    """What the user said about compiling."""

    cc: str | None
    flags: tuple[str, ...]  # definitions first: -U wins over -D in any order, as POSIX says of its compiler command
    database: str | None  # directory of a compile_commands.json

    def call_for(self, file: str) -> CompilerCall:
        """The compiler call for a file: the database's flags first, then the user's own.

        Raises RetileError if the database cannot be read or has no entry for the file.
        """
        from ..source import CompilerCall, flags_from_compile_commands

        if self.database is None:
            return CompilerCall(self.cc or "cc", self.flags)
        call = flags_from_compile_commands(self.database, file, self.cc)
        return replace(call, flags=(*call.flags, *self.flags))
