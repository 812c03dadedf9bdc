"""Names that mean two objects in one nest.

The rewritten loops name the sizes and iterators of the original, perhaps further in or further out than the original
does.  An inner declaration that hides such a name would give it another meaning there, so it is refused.  Other names
may be hidden: the text that uses them moves as it is.
"""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from ..model import CType, Refusal
from .refusals import refusal
from .scopes import Binding, descendants
from .setting import Setting


def hidden_names(nest: Any, setting: Setting) -> list[Refusal]:
    """A refusal for each declaration in the nest that hides an integer that the nest uses, or one of its iterators."""
    used: dict[str, dict[Binding, Any]] = {}
    for node in descendants(nest):
        binding = setting.names.of(node)
        if binding is not None and binding.is_object:
            used.setdefault(binding.name, {}).setdefault(binding, node)
    return [
        refusal(
            second,
            "hidden-name",
            f"`{name}` means two variables inside the nest, one of which its loops run over or may be bounded by; "
            "give one of them another name.",
        )
        for name, bindings in used.items()
        if (second := _clash(bindings, nest, setting)) is not None
    ]


def _clash(bindings: dict[Binding, Any], nest: Any, setting: Setting) -> Any:
    """A node of the second object of a name, if the loops may speak of the first where it is hidden."""
    if len(bindings) < 2:
        return None
    iterators = [binding for binding in bindings if setting.is_iterator(binding)]
    ahead = [b for b in bindings if not setting.is_inner(b) and isinstance(setting.type_of_binding(b), CType)]
    if ahead or len(iterators) not in (0, len(bindings)) or _nested(iterators, nest, setting):
        return list(bindings.values())[1]
    return None


def _nested(iterators: list[Binding], nest: Any, setting: Setting) -> bool:
    """True if a loop over one of the variables lies inside a loop over another."""
    loops = [
        {binding for one in descendants(loop) if (binding := setting.names.of(one)) in iterators}
        for loop in descendants(nest)
        if isinstance(loop, c_ast.For) and _over(loop, setting) in iterators
    ]
    return any(len(inside) > 1 for inside in loops)


def _over(loop: Any, setting: Setting) -> Binding | None:
    init = loop.init
    target = init.decls[0] if isinstance(init, c_ast.DeclList) else getattr(init, "lvalue", None)
    return None if target is None else setting.names.of(target)
