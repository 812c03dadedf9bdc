"""The user's C file: text, tokens, syntax tree and types, and a way to put text back.

``open_source`` is at hand at once, so that the compiler can work while the rest of the room is loaded.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

from .compiler import CompilerCall
from .opening import open_source

if TYPE_CHECKING:
    from .commands import flags_from_compile_commands
    from .edit import check_unchanged, replace_file, splice
    from .kinds import ArrayOf, Declared, FunctionType, Member, PointerTo, Scope, StructType, Type, UnknownType, Void
    from .lex import Token
    from .messages import complaint
    from .source import Source
    from .types import Types

__all__ = [
    "ArrayOf", "CompilerCall", "Declared", "FunctionType", "Member", "PointerTo", "Scope", "Source", "StructType",
    "Token", "Type", "Types", "UnknownType", "Void", "check_unchanged", "complaint", "flags_from_compile_commands",
    "open_source", "replace_file", "splice",
]  # fmt: skip

_MODULES = {"flags_from_compile_commands": "commands", "replace_file": "edit", "check_unchanged": "edit",
            "splice": "edit", "Token": "lex",
            "complaint": "messages", "Source": "source", "Types": "types"}


def __getattr__(name: str) -> object:
    if name not in __all__:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULES.get(name, 'kinds')}", __name__), name)
