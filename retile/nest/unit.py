"""What all nests of one file share: types, and the names of each function, found once."""

from __future__ import annotations

from functools import cached_property
from typing import Any

from ..source import Source
from .scopes import Binding, FunctionNames


class Unit:
    """A source file as the nest room sees it."""

    def __init__(self, source: Source) -> None:
        self.source = source
        self.types = source.types
        self._names: dict[int, FunctionNames] = {}
        self._pure: dict[int, bool] = {}

    def names(self, function: Any) -> FunctionNames:
        """Bindings and uses of a function's names."""
        if id(function) not in self._names:
            self._names[id(function)] = FunctionNames(self.types, function)
        return self._names[id(function)]

    def function_named(self, name: str) -> Any:
        """The definition of a function of this file; None if it stands elsewhere."""
        return next((one for one in self.source.functions if one.decl.name == name), None)

    def is_pure(self, definition: Any) -> bool:
        """True if a function of the file is seen to only compute a value."""
        from .calls import body_is_pure

        key = id(definition)
        if key not in self._pure:
            self._pure[key] = False  # while it is looked at: recursion is not pure
            self._pure[key] = "weak" not in self.source.identifiers and body_is_pure(definition, self)
        return self._pure[key]

    def address_taken_in_file(self, binding: Binding) -> bool:
        """True if some function or initialiser of the file may make a pointer to a file-scope ``static``."""
        return binding.name in self._taken_globals

    @cached_property
    def _taken_globals(self) -> frozenset[str]:
        taken: set[str] = set()
        for function in self.source.functions:
            names = self.names(function)
            taken |= {b.name for b in names.bindings if b.kind == "global" and names.address_taken(b)}
        return frozenset(taken | self._named_in_initialisers())

    def _named_in_initialisers(self) -> set[str]:
        from pycparser import c_ast

        from .scopes import descendants

        found: set[str] = set()
        for node in self.source.ast.ext:
            if isinstance(node, c_ast.Decl) and node.init is not None:
                found |= {one.name for one in descendants(node.init) if isinstance(one, c_ast.ID)}
        return found
