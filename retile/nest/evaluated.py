"""Where the original reads the memory that sizes and addresses come from, so that a variant reads it no sooner.

    for (int i = 0; i < n; i++)
        for (int k = 0; k < g->cols; k++)      reads *g where n > 0

A loop over chunks of k that stands outermost would read ``g->cols`` also for n = 0, where g may be a null pointer.  The
same goes for what may trap or overflow, ``m / per``.  Each such text is looked for in all that the nest evaluates, in
the order of C, with the loops and conditions around it; projected onto the sizes, these say where it surely is
evaluated.  A structure is one object: where one of its members is read, all of them can be.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from pycparser import c_ast

from ..affine import AllOf, AnyOf, Formula, formula_names
from ..model import CType, Parameter, StorageKind, Storage
from ..sets import Region
from ..source.kinds import ArrayOf, PointerTo, StructType
from ..values import dataclass, replace
from .calls import is_pure_call
from .conditions import Conditions
from .context import Context
from .places import Index, Member, Place
from .polynomial import Poly
from .scopes import descendants
from .setting import Setting, c_text

NEVER: Formula = AnyOf()


@dataclass(frozen=True)
class Evaluated:
    """An expression of the nest that is evaluated in a context."""

    node: Any
    context: Context


def with_readable(setting: Setting, evaluated: Iterable[Evaluated], parameters: Iterable[Parameter],
                  storages: Iterable[Storage], held_in: Mapping[str, str]) -> tuple[tuple[Parameter, ...], tuple[Storage, ...]]:
    """The parameters and storages, each with the condition under which its text may be evaluated ahead of the nest.

    ``held_in``: addresses that may be computed where something else may be read.
    """
    known, stored = tuple(parameters), tuple(storages)
    finder = _Finder(setting, {s.pointer_text: s.object for s in stored if s.kind is StorageKind.POINTER
                               and "->" in s.pointer_text and s.pointer_text != s.object and s.whole is None})
    if not finder.wanted:
        return known, stored
    for one in finder.ahead():
        finder.visit(one, Context())
    for each in evaluated:
        finder.visit(each.node, each.context)
    found = finder.conditions()
    found |= {address: found[text] for address, text in held_in.items() if text in found}
    return (tuple(replace(p, readable=_all(found, p.text)) for p in known),
            tuple(replace(s, readable=_all(found, s.pointer_text)) for s in stored))


def _all(conditions: dict[str, Formula], text: str) -> Formula:
    """What must hold for each part of a text that is not always safe."""
    needed = tuple(dict.fromkeys(formula for part, formula in conditions.items() if _stands_in(part, text)))
    if NEVER in needed:
        return NEVER
    return needed[0] if len(needed) == 1 else AllOf(needed)


def _stands_in(part: str, text: str) -> bool:
    return part in text and re.search(rf"(?<![\w.>]){re.escape(part)}(?!\w)", text) is not None


_Key = tuple[Any, ...] | str


class _Finder:
    def __init__(self, setting: Setting, addresses: dict[str, str]) -> None:
        """``addresses``: by C text, the pointer to a structure with the member whose address that is."""
        self._setting = setting
        self._conditions = Conditions(setting)
        self._cells: dict[str, _Key] = {}  # by C text
        for text, place in setting.held.items():
            if not self._always_there(place):
                self._cells[text] = self._object(place)
        self._cells |= {text: (pointer, Poly()) for text, pointer in addresses.items() if text not in self._cells}
        self._texts = {symbol for symbol, node in setting.opaque.items() if self._may_fail(node)}
        self.wanted = {*self._cells.values(), *self._texts}
        self._sites: dict[_Key, list[Formula]] = {key: [] for key in self.wanted}
        self._always: set[_Key] = set()  # evaluated before the nest

    def conditions(self) -> dict[str, Formula]:
        """By text, the condition in sizes under which the nest surely evaluates it."""
        found: dict[_Key, Formula] = {key: AllOf() for key in self._always}
        keys = {**self._cells, **{text: text for text in self._texts}}
        while True:
            known = {key: formula for key, sites in self._sites.items() if key not in found
                     and (formula := self._union(sites, keys, found)) is not None}
            if not known:
                return {text: found.get(key, NEVER) for text, key in keys.items() if found.get(key) != AllOf()}
            found.update(known)

    def _union(self, sites: list[Formula], keys: dict[str, _Key], found: dict[_Key, Formula]) -> Formula | None:
        """Where one of the sites is reached whose conditions can be asked before; None if there is none."""
        usable = [site for site in sites if all(keys[text] in found for name in formula_names(site) for text in keys
                                                if _stands_in(text, self._text(name)))]
        if not usable:
            return None
        region = Region.union(Region.where(site) for site in usable).coalesced()
        plain = [fact for fact in self._setting.knowledge.facts if formula_names(fact) <= set(region.names())]
        return self._sorted(region.relative_to(Region.where(*plain)).formula())

    def _sorted(self, formula: Formula) -> Formula:
        """The conditions in the order in which the nest reads what is in them, outer loops first."""
        order = {name: at for at, name in enumerate(self._setting.knowledge.parameters)}
        if not isinstance(formula, AllOf):
            return formula
        return AllOf(tuple(sorted(formula.parts, key=lambda part: max((order[name] for name in formula_names(part)), default=0))))

    def _text(self, symbol: str) -> str:
        parameter = self._setting.knowledge.parameters.get(symbol)
        return symbol if parameter is None else parameter.text

    # ------------------------------------------------------------ what is looked for

    def _always_there(self, place: Place) -> bool:
        """True for a cell of a declared object, within its constant extents."""
        return place.root.kind is not StorageKind.POINTER and all(map(self._within, place.indices))

    def _within(self, index: Index) -> bool:
        at = None if index.poly is None else index.poly.constant
        extent = None if index.extent is None else self._setting.constant(index.extent)
        return at is not None and extent is not None and 0 <= at < extent

    def _object(self, place: Place) -> _Key:
        """What must be there as a whole: a structure, or a single cell."""
        inside = all(self._within(step) for step in place.steps[_structure(place):] if isinstance(step, Index))
        return _key(place, _structure(place) if inside else len(place.steps))

    def _may_fail(self, node: Any) -> bool:
        """True if evaluating an expression can trap or overflow."""
        match node:
            case c_ast.BinaryOp(op="/" | "%"):
                divisor = self._setting.constant(node.right)
                risky = divisor is None or divisor in (0, -1)
            case c_ast.BinaryOp(op="<<" | ">>"):
                risky = True
            case c_ast.BinaryOp(op="+" | "-" | "*") | c_ast.UnaryOp(op="-"):
                type_ = self._setting.type_of(node)
                risky = isinstance(type_, CType) and type_.signed and self._setting.constant(node) is None
            case _:
                risky = False
        return risky or any(self._may_fail(child) for _, child in node.children())

    # ------------------------------------------------------------ in the order of C

    def visit(self, node: Any, context: Context) -> None:
        """Note what the evaluation of an expression surely evaluates."""
        if node is None or not context.certain:
            return
        if self._texts and isinstance(node, (c_ast.BinaryOp, c_ast.UnaryOp, c_ast.TernaryOp, c_ast.FuncCall, c_ast.Cast)):
            if (text := c_text(node)) in self._texts:
                self._note(text, context)
        match node:
            case c_ast.ArrayRef() | c_ast.StructRef() | c_ast.UnaryOp(op="*"):
                self._cell(node, context)
                self._beneath(node, context)
            case c_ast.UnaryOp(op="&"):
                self._beneath(node.expr, context)
            case c_ast.UnaryOp(op="sizeof" | "_Alignof"):
                return
            case c_ast.BinaryOp(op="&&" | "||"):
                self.visit(node.left, context)
                self.visit(node.right, self._where(node.left, node.op == "&&", context))
            case c_ast.TernaryOp():
                self.visit(node.cond, context)
                self.visit(node.iftrue, self._where(node.cond, True, context))
                self.visit(node.iffalse, self._where(node.cond, False, context))
            case c_ast.Cast():
                self.visit(node.expr, context)
            case _:
                for _, child in node.children():
                    self.visit(child, context)

    def _where(self, condition: Any, holds: bool, context: Context) -> Context:
        mark = self._setting.mark()
        formula = self._conditions.known(condition, context)
        self._setting.rewind(mark)
        if formula is None:
            return context.uncertain()
        return context.where(formula if holds else Conditions.opposite(formula))

    def _beneath(self, node: Any, context: Context) -> None:
        """What is evaluated to find a cell."""
        base = node.expr if isinstance(node, c_ast.UnaryOp) else getattr(node, "name", None)
        if isinstance(node, c_ast.ArrayRef):
            self.visit(node.subscript, context)
        if base is None or isinstance(base, str):
            return
        if isinstance(self._setting.type_of(base), (ArrayOf, StructType)):
            self._beneath(base, context)
        else:
            self.visit(base, context)

    def _cell(self, node: Any, context: Context) -> None:
        if not self._cells or not isinstance(self._setting.type_of(node), (CType, PointerTo)):
            return
        mark = self._setting.mark()
        place = self._setting.places.attempt(node, context)
        self._setting.rewind(mark)
        if place is not None:
            for key in {_key(place, _structure(place)), _key(place, len(place.steps))} & self.wanted:
                self._note(key, context)

    def _note(self, key: _Key, context: Context) -> None:
        if not context.constraints:
            self._always.add(key)
        elif key not in self._always:
            self._sites[key].append(Region.where(context.formula).without(context.loops).formula())

    # ------------------------------------------------------------ before the nest

    def ahead(self) -> Iterator[Any]:
        """What was evaluated just before the nest, of pointers that stay: back to the first call, which may free memory."""
        setting = self._setting
        if setting.names.has_jumps:
            return
        node = setting.within
        for parent in setting.names.ancestors(node):
            if isinstance(parent, c_ast.Compound):
                for sibling in reversed(list(_before(parent, node))):
                    if not self._calm(sibling):
                        return
                    yield from self._stable(_surely(sibling))
            elif isinstance(parent, (c_ast.If, c_ast.For, c_ast.While)):
                if parent.cond is not None:
                    if not self._calm(parent.cond):
                        return
                    yield from self._stable([parent.cond])
            elif not isinstance(parent, (c_ast.DoWhile, c_ast.FuncDef)):
                return
            node = parent

    def _calm(self, node: Any) -> bool:
        """True if nothing in a piece of the function is called, jumped to or left."""
        return not any(isinstance(one, (c_ast.Label, c_ast.Case, c_ast.Default, c_ast.Switch)) or
                       isinstance(one, c_ast.FuncCall) and not is_pure_call(one, self._setting) for one in descendants(node))

    def _stable(self, nodes: Iterable[Any]) -> Iterator[Any]:
        """The expressions all of whose variables have one value in the whole call."""
        names = self._setting.names
        for node in nodes:
            bindings = [names.of(one) for one in descendants(node) if isinstance(one, c_ast.ID)]
            if all(b is not None and (not b.is_object or b.automatic and not names.address_taken(b) and
                                      len(names.assignments.get(b, ())) <= (b.kind == "local")) for b in bindings):
                yield node


def _structure(place: Place) -> int:
    """The number of steps to the structure that a member lies in; all of them for other cells."""
    return next((at for at, step in enumerate(place.steps) if isinstance(step, Member)), len(place.steps))


def _key(place: Place, steps: int) -> _Key:
    return (place.root.key, *(step.poly if isinstance(step, Index) else step.name for step in place.steps[:steps]))


def _before(block: Any, node: Any) -> Iterator[Any]:
    for item in block.block_items or ():
        if item is node:
            return
        yield item


def _surely(node: Any) -> list[Any]:
    """The expressions that a statement evaluates at least once."""
    match node:
        case c_ast.Decl():
            return [node.init] if node.init is not None and not isinstance(node.init, c_ast.InitList) else []
        case c_ast.If() | c_ast.For() | c_ast.While():
            return [node.cond] if node.cond is not None and not isinstance(node, c_ast.For) else []
        case c_ast.Assignment():
            return [node.rvalue]
        case c_ast.UnaryOp() | c_ast.BinaryOp() | c_ast.TernaryOp():
            return [node]
    return []
