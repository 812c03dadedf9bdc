"""A nest as a function of its own, for functions that cannot be run as a whole.

What the nest uses of the function around it becomes parameters, what it leaves in variables that may be read later goes
out through pointers::

    void survey(FILE *log, int n) {                     void survey(int n, double z[n], double *sum_after, double sum) {
        double z[n], sum = 0;                 ->            for (int i = 0; i < n; i++)
        ...                                                     sum += z[i];
        for (int i = 0; i < n; i++)                         *sum_after = sum;
            sum += z[i];                                }
        fprintf(log, "%g", sum);
    }

The variant's piece is what stands in the same place: between the statements that stood before and after the nest.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

from .kinds import Unsupported
from .later import read_later

_AFTER = "_after_the_nest"


@dataclass(frozen=True)
class Spot:
    """Where a nest stands in a function: steps from the body to it, and what follows it there."""

    function: str
    steps: tuple[Any, ...]  # a number of an item of a block, or the name of a part
    following: int  # items of its own block behind it; -1 if it is the only statement of another


def spot_of(tree: c_ast.FileAST, line: int, column: int | None = None) -> Spot:
    """The outermost ``for`` that begins on a line (in a column); Unsupported if there is none."""
    for function in tree.ext:
        if isinstance(function, c_ast.FuncDef) and function.body is not None:
            for node, steps, following in _walk(function.body, (), -1):
                if isinstance(node, c_ast.For) and node.coord is not None and node.coord.line == line and \
                        (column is None or node.coord.column in (None, column)):
                    return Spot(function.decl.name, steps, following)
    raise Unsupported(f"no loop begins in line {line}")


def _walk(node: Any, steps: tuple[Any, ...], following: int) -> Iterator[tuple[Any, tuple[Any, ...], int]]:
    """Every statement with the way to it, outer ones first."""
    yield node, steps, following
    if isinstance(node, c_ast.Compound):
        items = node.block_items or []
        for number, item in enumerate(items):
            yield from _walk(item, (*steps, number), len(items) - number - 1)
    for part in ("iftrue", "iffalse", "stmt"):
        inner = getattr(node, part, None)
        if inner is not None:
            yield from _walk(inner, (*steps, part), -1)


def piece_of(tree: c_ast.FileAST, spot: Spot, original: c_ast.FileAST | None = None) -> c_ast.FileAST:
    """The unit with a function that is only what stands at a spot.

    ``original``: the unit that says which variables go in and out, where this one is a variant of it.
    """
    function = _function(tree, spot.function)
    model = _function(original or tree, spot.function)
    chain = _chain(function, spot.steps[:-1])
    items = _items(chain[-1], spot)
    if original is not None:
        there = _items(_chain(model, spot.steps[:-1])[-1], spot)
    else:
        there = items
    declared = _declared(model, spot)
    used = _used(declared, there)
    outs = [name for name in used if _goes_out(declared[name], name, there, model, spot)]
    parameters = [_plain(declared[name]) for name in declared if name in used]
    parameters += [_out(declared[name]) for name in outs]
    after = [c_ast.Assignment("=", c_ast.UnaryOp("*", c_ast.ID(name + _AFTER)), c_ast.ID(name)) for name in outs]
    made = _made(function, spot.function, parameters, [*items, *after])
    return c_ast.FileAST([made if node is function else node for node in tree.ext])


def _function(tree: c_ast.FileAST, name: str) -> Any:
    for node in tree.ext:
        if isinstance(node, c_ast.FuncDef) and node.decl.name == name:
            return node
    raise Unsupported(f"the function {name}, which is not in this file")


def _chain(function: Any, steps: tuple[Any, ...]) -> list[Any]:
    """The statements along a way, the function's body first."""
    found = [function.body]
    for step in steps:
        node = found[-1]
        inner = (node.block_items or [])[step] if isinstance(step, int) else getattr(node, step, None)
        if inner is None:
            raise Unsupported("a variant whose function has another shape around the nest")
        found.append(inner)
    return found


def _items(parent: Any, spot: Spot) -> list[Any]:
    """What stands at the spot."""
    last = spot.steps[-1]
    if isinstance(last, int):
        items = parent.block_items or []
        return list(items[last : len(items) - spot.following])
    inner = getattr(parent, last)
    return [inner] if inner is not None else []


def _declared(function: Any, spot: Spot) -> dict[str, c_ast.Decl]:
    """The variables of the function that can be named at the spot, in their order."""
    arguments = function.decl.type.args
    found = {p.name: p for p in (arguments.params if arguments else ()) if isinstance(p, c_ast.Decl) and p.name}
    for node, step in zip(_chain(function, spot.steps[:-1]), spot.steps, strict=True):
        if isinstance(node, c_ast.Compound):
            before = (node.block_items or [])[:step]
        else:
            before = node.init.decls if isinstance(node, c_ast.For) and isinstance(node.init, c_ast.DeclList) else []
        for item in before:
            for decl in item.decls if isinstance(item, c_ast.DeclList) else [item]:
                if isinstance(decl, c_ast.Decl) and decl.name:
                    found.pop(decl.name, None)
                    found[decl.name] = decl
    return found


def _used(declared: dict[str, c_ast.Decl], items: list[Any]) -> set[str]:
    """Those variables that the items name, and those that their declarations name."""
    used: set[str] = set()
    waiting = list(items)
    while waiting:
        node = waiting.pop()
        if isinstance(node, c_ast.ID) and node.name in declared and node.name not in used:
            used.add(node.name)
            waiting.append(declared[node.name].type)
        waiting += [child for _, child in node.children()]
    return used


def _goes_out(decl: c_ast.Decl, name: str, items: list[Any], function: Any, spot: Spot) -> bool:
    """True for a number that the items set and that may be read later."""
    if not isinstance(decl.type, c_ast.TypeDecl) or isinstance(decl.type.type, c_ast.Struct):
        return False
    if name not in _set_in(items):
        return False
    chain = _chain(function, spot.steps[:-1])
    after = []
    for node, step in zip(chain, spot.steps, strict=True):
        behind = (node.block_items or [])[step + 1 :] if isinstance(node, c_ast.Compound) else []
        after.append(behind)
    return "static" in decl.storage or read_later(name, chain[::-1], after[::-1])


def _set_in(items: list[Any]) -> set[str]:
    from .headers import assigned_in

    return set().union(*(assigned_in(item) for item in items))


def _plain(decl: c_ast.Decl) -> c_ast.Decl:
    """A variable as a parameter."""
    return c_ast.Decl(decl.name, decl.quals, decl.align, [], decl.funcspec, decl.type, None, None, decl.coord)


def _out(decl: c_ast.Decl) -> c_ast.Decl:
    name = decl.name + _AFTER
    inner = c_ast.TypeDecl(name, [], None, decl.type.type)
    return c_ast.Decl(name, [], [], [], [], c_ast.PtrDecl([], inner), None, None, decl.coord)


def _made(function: Any, name: str, parameters: list[c_ast.Decl], items: list[Any]) -> c_ast.FuncDef:
    void = c_ast.TypeDecl(name, [], None, c_ast.IdentifierType(["void"]))
    type = c_ast.FuncDecl(c_ast.ParamList(parameters), void)
    decl = c_ast.Decl(name, [], [], [], [], type, None, None, function.coord)
    return c_ast.FuncDef(decl, None, c_ast.Compound(items), function.coord)
