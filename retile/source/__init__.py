"""The user's C file: text, tokens, syntax tree and types, and a way to put text back."""

from .commands import flags_from_compile_commands
from .compiler import CompilerCall
from .edit import replace_file, splice
from .kinds import ArrayOf, Declared, FunctionType, Member, PointerTo, Scope, StructType, Type, UnknownType, Void
from .lex import Token
from .messages import complaint
from .source import Source, open_source
from .types import Types

__all__ = [
    "ArrayOf", "CompilerCall", "Declared", "FunctionType", "Member", "PointerTo", "Scope", "Source", "StructType",
    "Token", "Type", "Types", "UnknownType", "Void", "complaint", "flags_from_compile_commands", "open_source",
    "replace_file", "splice",
]  # fmt: skip
