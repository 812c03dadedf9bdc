"""The user's C file: text, tokens, syntax tree and types, and a way to put text back."""

from .compiler import CompilerCall
from .kinds import ArrayOf, Declared, FunctionType, Member, PointerTo, Scope, StructType, Type, UnknownType, Void
from .lex import Token
from .source import Source, open_source
from .types import Types

__all__ = [
    "ArrayOf", "CompilerCall", "Declared", "FunctionType", "Member", "PointerTo", "Scope", "Source", "StructType",
    "Token", "Type", "Types", "UnknownType", "Void", "open_source",
]  # fmt: skip
