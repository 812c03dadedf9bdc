"""Chunk sizes that are constants of the program, as numbers that a variant can count with.

    enum { k_chunk = K_CHUNK };
    _Static_assert(k_chunk >= 1 && k_chunk <= 2147483647, "K_CHUNK is the number of iterations of a chunk");

Whatever the constant is written like (``64u``, ``4096 / sizeof(double)``, ``N + 1`` without parentheses), an enumerator
is one operand, and of type int if its value fits (ISO/IEC 9899:2018, 6.4.4.3); as it stands an unsigned constant would
make comparisons with negative iterators wrong.  What is no constant, or none that a loop can step by, does not compile.
"""

from __future__ import annotations

from ..tree import Node, loops_of
from .expression import INT, Expression, Scope
from .names import Names


class Constants:
    """The named chunk sizes of one tree, each with a name of the variant's own."""

    def __init__(self, tree: tuple[Node, ...], names: Names, old: bool) -> None:
        """``old``: whether the user's standard is one from before static assertions, C99 or C90."""
        self._old = old
        self.names = {loop.named: "" for loop in loops_of(tree) if loop.named is not None}
        for constant in self.names:
            lower = constant.lower()
            self.names[constant] = names.fresh(lower if lower != constant else f"{constant}_size")

    def declarations(self) -> list[str]:
        """The lines that declare and check them."""
        return [line for constant, name in self.names.items() for line in self._declared(constant, name)]

    def _declared(self, constant: str, name: str) -> list[str]:
        fits = f"{name} >= 1 && {name} <= {INT.largest}"
        if self._old:  # no value, and so an error with this name, where the condition is 0
            return [f"enum {{ {name} = {constant}, {name}_is_at_least_1 = 1 / ({fits}) }};"]
        return [f"enum {{ {name} = {constant} }};",
                f'_Static_assert({fits}, "{constant} is the number of iterations of a chunk");']

    def written(self, scope: Scope) -> Scope:
        """The scope with the constants under their new names."""
        operands = {constant: Expression(name, INT) for constant, name in self.names.items()}
        return scope.written_otherwise(operands) if operands else scope

    def length(self, constant: str, steps: int) -> str:
        """How far a step over a chunk goes, as C text that cannot overflow."""
        name = self.names[constant]
        return name if steps == 1 else f"{steps}LL * {name}"


def is_old(flags: tuple[str, ...]) -> bool:
    """True if the flags choose a C from before 2011."""
    standards = [flag for flag in flags if flag.startswith("-std=") or flag == "-ansi"]
    return bool(standards) and standards[-1].removeprefix("-std=") in (
        "-ansi", "c89", "c90", "gnu89", "gnu90", "iso9899:1990", "iso9899:199409", "c99", "gnu99", "c9x", "gnu9x",
        "iso9899:1999")
