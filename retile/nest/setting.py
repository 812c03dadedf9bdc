"""What the readers of one nest share: names, types, parameters, definitions and obligations.

The one mutable object of the room.  It lives while one nest is read, and what it has gathered becomes the nest.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from ..affine import Affine, Formula, Symbol, negate
from ..model import AssumptionCode, CType, Parameter
from ..source.kinds import ArrayOf
from ..values import dataclass
from .calls import is_pure_call
from .context import Context
from .knowledge import Knowledge, Obligation
from .polynomial import Monomial, Poly, symbol_names
from .scopes import Binding, FunctionNames, assigned_target, descendants
from .unit import Unit
from .written import c_text

if TYPE_CHECKING:
    from .expressions import Expressions
    from .places import Place, Places


@dataclass(frozen=True)
class Definition:
    """The expression that gives a local the value that it has from there on, and where it stands."""

    expression: Any  # None: not known any more
    context: Context
    before: dict[Binding, Definition]  # what held where it stands


class Setting:
    """Everything that depends on which piece of the function is being read.

    ``within`` is the piece during which parameters must not change.  A strict setting proves or gives up; one that is
    not strict turns what it cannot prove into obligations, to be settled when all facts are known.
    """

    expressions: Expressions
    places: Places

    def __init__(self, unit: Unit, names: FunctionNames, within: Any, knowledge: Knowledge, strict: bool) -> None:
        self.unit, self.names, self.within, self.knowledge, self.strict = unit, names, within, knowledge, strict
        self.types = unit.types
        self.obligations: dict[Obligation, None] = {}
        self.definitions: dict[Binding, Definition] = {}
        self.held: dict[str, Place] = {}  # cells in memory that must keep their values, by C text
        self.opaque: dict[str, Any] = {}  # expressions that are parameters, by symbol
        self.held_variables: dict[Binding, None] = {}  # variables that must, and that a pointer might reach
        self.factors: dict[Symbol, Poly] = {}  # sums of parameters kept whole, such as the ``m + 1`` of a row
        # Products in fewer bits than an address has, with their types and where they stand.
        self.narrow: dict[tuple[Poly, CType, Context, Any], None] = {}
        self.loop_ids: set[str] = set()
        self.loop_iterators: set[Binding] = set()
        self.outer_iterators: dict[Binding, Any] = {}  # iterators of the loops around the nest, with these loops
        self._stored_texts: frozenset[str] | None = None
        self._inside = frozenset(id(node) for node in descendants(within))
        self._assigned = {
            binding: [node for node in nodes if id(node) in self._inside]
            for binding, nodes in names.assignments.items()
        }

    # ------------------------------------------------------------ objects

    def type_of(self, node: Any) -> Any:
        """The C type of an expression."""
        return self.names.type_of(node)

    def constant(self, node: Any) -> int | None:
        """The value of a constant expression; None if it is none."""
        return self.types.constant(node, self.types.scope(self.names.function, node))

    def constant_of(self, binding: Binding) -> int | None:
        """The value of a variable that has one constant value wherever it can be named; None for any other.

        ``const int rows = 4;``, and locals that get such a value and never another.
        """
        decl = binding.decl
        if not isinstance(decl, c_ast.Decl) or decl.init is None or not binding.is_object or self.is_inner(binding):
            return None
        quals = self.qualifiers(binding)
        once = self.names.assignments.get(binding) == [decl] and binding.automatic and not self.names.address_taken(binding)
        if "volatile" in quals or not ("const" in quals or once) or (binding.automatic and self.names.may_skip_declarations):
            return None
        scope = self.types.file_scope if binding.kind == "global" else self.types.scope(self.names.function, decl)
        return None if isinstance(decl.init, c_ast.InitList) else self.types.constant(decl.init, scope)

    def written_type(self, node: Any) -> Any:
        """The type that a type name in the function stands for."""
        return self.types.of(node, self.types.scope(self.names.function, node))

    def qualifiers(self, binding: Binding) -> frozenset[str]:
        """The qualifiers of a declared object."""
        if binding.decl is None:
            return frozenset()
        return self.types.qualifiers(binding.decl, self.types.scope(self.names.function, binding.decl))

    def size_of(self, type_: Any) -> int | None:
        """Bytes of a type, whose extents may name what the function declares; None if it is not known."""
        return self.types.size_of(type_, self.types.scope(self.names.function))

    def type_of_binding(self, binding: Binding) -> Any:
        """The C type of a declared object."""
        return self.names.type_of_binding(binding)

    def assigned(self, binding: Binding) -> list[Any]:
        """The nodes inside the piece that give the object a value."""
        return self._assigned.get(binding, [])

    def is_frozen(self, binding: Binding) -> bool:
        """True if the object is there before the piece and no statement of the piece names it as its target."""
        return (
            binding.is_object
            and not self.assigned(binding)
            and not self.is_inner(binding)
            and not self.qualifiers(binding) & {"volatile", "_Atomic"}
            and self.is_visible(binding)
        )

    def is_visible(self, binding: Binding) -> bool:
        """True if the object's name means it ahead of the nest: an inner declaration may hide it there."""
        start = self.knowledge.nest
        if start is None or not binding.automatic:
            return start is None or self.names.means(binding.name, start) in (binding, None)
        return self.names.means(binding.name, start) is binding

    def is_inner(self, binding: Binding) -> bool:
        """True if the object is declared inside the piece: its name means nothing ahead of it."""
        return id(binding.decl) in self._inside

    def means_the_same_ahead(self, node: Any) -> bool:
        """True if the text of an expression may stand ahead of the piece: all its names are known there and stay."""
        bindings = (self.names.of(one) for one in descendants(node) if isinstance(one, c_ast.ID))
        return all(b is not None and (not b.is_object or self.is_frozen(b)) for b in bindings)

    def is_iterator(self, binding: Binding) -> bool:
        """True if some loop of the nest runs over the variable."""
        return binding in self.loop_iterators

    def reachable(self, binding: Binding) -> bool:
        """True if some pointer may lead to the object."""
        if binding.kind == "global" and not binding.file_static:
            return True
        if binding.file_static or binding.kind == "global":
            return self.unit.address_taken_in_file(binding)
        return self.names.address_taken(binding)

    def define(
        self, binding: Binding, expression: Any, context: Context, before: dict[Binding, Definition] | None = None
    ) -> None:
        """Note what a local is from here on; ``before``: the definitions that hold where the expression is evaluated."""
        if not self._may_define(binding):
            return
        now, self.definitions = self.definitions, self.definitions if before is None else before
        known = all(self._known_before(one, context) for one in descendants(expression) if isinstance(one, c_ast.ID))
        before, self.definitions = dict(self.definitions), now
        if known:
            self.definitions[binding] = Definition(expression, context, before)
        elif binding in self.definitions:
            self.definitions[binding] = Definition(None, context, before)

    def _may_define(self, binding: Binding) -> bool:
        """True if what the last assignment in the text gives is what every use behind it sees, wherever it is covered.

        So no loop may lie around one assignment and not around another that it could follow: ``hi = n; for (k) { ...;
        hi = k; }``.
        """
        nodes = self.assigned(binding)
        if not binding.automatic or self.names.address_taken(binding):
            return False
        if len(nodes) == 1:
            return True
        around = {tuple(self._loops_around(node)) for node in nodes}
        longer = any(one != other and one == other[: len(one)] for one in around for other in around)
        return not longer and all(self._is_statement(node) for node in nodes)

    def _loops_around(self, node: Any) -> list[int]:
        """The loops of the piece around a node, outermost first."""
        above = self.names.ancestors(node)
        return [id(one) for one in above if isinstance(one, c_ast.For) and id(one) in self._inside][::-1]

    def _is_statement(self, node: Any) -> bool:
        """True for a declaration or a plain assignment that is a statement of its own."""
        if isinstance(node, c_ast.Decl):
            return isinstance(self.names.parent(node), c_ast.Compound)
        above = self.names.parent(node)
        plain = isinstance(node, c_ast.Assignment) and node.op == "="
        body = isinstance(above, c_ast.For) and above.stmt is node or isinstance(above, (c_ast.Compound, c_ast.If))
        return plain and body

    @contextmanager
    def at(self, definition: Definition) -> Iterator[None]:
        """While this is open, names mean what they meant where the definition stands."""
        now, self.definitions = self.definitions, definition.before
        try:
            yield
        finally:
            self.definitions = now

    def _known_before(self, node: Any, context: Context) -> bool:
        """True if a name in a definition is an iterator, never changes, or was defined before."""
        binding, above = self.names.of(node), self.names.parent(node)
        if isinstance(above, c_ast.UnaryOp) and above.op == "&" or isinstance(self.type_of(node), ArrayOf):
            return True  # only where the object lies matters
        return (
            binding is None
            or not binding.is_object
            or context.iterator(binding) is not None
            or self.is_frozen(binding)
            or self.definition(binding, context) is not None
        )

    def definition(self, binding: Binding, context: Context) -> Definition | None:
        """The definition that every use here sees; None if there is no such."""
        found = self.definitions.get(binding)
        return found if found is not None and found.expression is not None and found.context.covers(context) else None

    # ------------------------------------------------------------ parameters

    def parameter_of(self, binding: Binding, type_: CType) -> str:
        """The parameter for an integer variable that keeps its value."""
        if not self.strict and self.reachable(binding):
            self.held_variables[binding] = None
        kind = "outer iterator" if binding in self.outer_iterators else binding.kind
        kind = {"static": "local", "global": "global"}.get(kind, kind)
        return self.knowledge.add_parameter(Parameter(binding.name, binding.name, type_, kind))

    def frozen_load(self, node: Any, type_: CType, context: Context) -> str | None:
        """The parameter for an integer in memory that keeps its value; None if it is none."""
        if self.strict:
            return None
        place = self.places.attempt(node, context)
        if place is None or place.union is not None or not place.is_fixed(self.loop_ids):
            return None
        text = self.places.text_of(place, node)
        self.held[text] = place
        return self.knowledge.add_parameter(
            Parameter(text, text, type_, "member" if "." in text or "->" in text else "expression")
        )

    def reads_stored(self, node: Any) -> bool:
        """True if the expression reads a place that the piece writes under the same text: that is data, not a size."""
        if self._stored_texts is None:
            targets = (assigned_target(one) for one in descendants(self.within))
            self._stored_texts = frozenset(
                c_text(one) for one in targets if isinstance(one, (c_ast.ArrayRef, c_ast.StructRef))
            )
        return bool(self._stored_texts) and any(
            isinstance(one, (c_ast.ArrayRef, c_ast.StructRef)) and c_text(one) in self._stored_texts
            for one in descendants(node)
        )

    def expression_parameter(self, node: Any, type_: CType) -> str:
        """The parameter for an expression that keeps its value."""
        text = c_text(node)
        self.opaque[text] = node
        plain = text if text.replace("_", "a").isalnum() else f"({text})"
        return self.knowledge.add_parameter(Parameter(text, plain, type_, "expression"))

    def frozen_expression(self, node: Any, context: Context) -> bool:
        """True if nothing in the expression changes while the piece runs; notes the memory that it reads."""
        return self.means_the_same_ahead(node) and self._is_frozen_part(node, context)

    def _is_frozen_part(self, node: Any, context: Context) -> bool:
        match node:
            case c_ast.Constant():
                return True
            case c_ast.ID():
                return self._frozen_name(node, context)
            case c_ast.UnaryOp() if node.op == "sizeof":
                return self.constant(node) is not None
            case c_ast.UnaryOp() if node.op in ("+", "-", "~", "!"):
                return self._is_frozen_part(node.expr, context)
            case c_ast.BinaryOp():
                return self._is_frozen_part(node.left, context) and self._is_frozen_part(node.right, context)
            case c_ast.TernaryOp():
                return all(self._is_frozen_part(part, context) for part in (node.cond, node.iftrue, node.iffalse))
            case c_ast.Cast():
                return isinstance(self.written_type(node.to_type), CType) and self._is_frozen_part(node.expr, context)
            case c_ast.FuncCall():
                return is_pure_call(node, self) and all(
                    self._is_frozen_part(one, context) for one in (node.args.exprs if node.args else ())
                )
            case c_ast.ArrayRef() | c_ast.StructRef() | c_ast.UnaryOp(op="*"):
                return self._frozen_memory(node, context)
        return False

    def _frozen_name(self, node: Any, context: Context) -> bool:
        binding = self.names.of(node)
        if binding is None or context.iterator(binding) is not None:
            return False
        if binding.kind == "enumerator":
            return True
        if not self.is_frozen(binding) or not isinstance(self.type_of(node), CType):
            return False
        if not self.strict and self.reachable(binding):
            self.held_variables[binding] = None
        return not (self.strict and self.reachable(binding))

    def _frozen_memory(self, node: Any, context: Context) -> bool:
        if self.strict or not isinstance(self.type_of(node), CType):
            return False
        place = self.places.attempt(node, context)
        if place is None or place.union is not None or not place.is_fixed(self.loop_ids):
            return False
        self.held[self.places.text_of(place, node)] = place
        return True

    # ------------------------------------------------------------ polynomials

    def is_parameter_poly(self, poly: Poly) -> bool:
        """True if no iterator of the nest occurs."""
        return not poly.names() & self.loop_ids

    def product(self, left: Poly, right: Poly) -> Poly:
        """The product; a sum of parameters that multiplies something else stays whole, as the length of a row does."""
        return self._whole(left, right) * self._whole(right, left)

    def _whole(self, poly: Poly, other: Poly) -> Poly:
        if len(poly.terms) < 2 or other.constant is not None or not self.is_parameter_poly(poly):
            return poly
        symbol = f"({self.poly_text(poly)})"
        self.factors[symbol] = poly
        return Poly.of(symbol)

    def expanded(self, poly: Poly) -> Poly:
        """The polynomial with all sums that were kept whole multiplied out."""
        while any(name in self.factors for name in poly.names()):
            poly = poly.replace({**self.factors})
        return poly

    def affine(self, poly: Poly) -> Affine | None:
        """The polynomial as an affine form; products of parameters become parameters; None if iterators multiply."""
        total = Poly()
        for factors, coefficient in self.expanded(poly).terms:
            if len(factors) > 1:
                if any(symbol_names(factor) & self.loop_ids for factor in factors):
                    return None
                factors = (self.product_parameter(factors),)
            total = total + Poly(((factors, coefficient),))
        return total.affine()

    def product_parameter(self, factors: Monomial) -> str:
        """The parameter for a product of parameters, computed in a wide type."""
        texts = [self.poly_text(Poly.of(factor)) for factor in factors]
        types = [self.knowledge.parameters[f].type for f in factors if isinstance(f, str)]
        wide = next((t for t in types if t.bits >= 64), None)
        cast = ""
        if wide is None:  # narrower factors are multiplied in 64 bits
            unsigned = types and not any(t.signed for t in types)
            wide = self.types.arithmetic.named(("unsigned", "long", "long") if unsigned else ("long", "long"))
            assert wide is not None
            cast = "(unsigned long long)" if unsigned else "(long long)"
        symbol = " * ".join(texts)
        return self.knowledge.add_parameter(Parameter(symbol, f"({cast}{symbol})", wide, "expression"))

    def wide_parameter(self, symbol: str, text: str, type_: CType) -> str:
        """A parameter with a text of its own."""
        return self.knowledge.add_parameter(Parameter(symbol, text, type_, "expression"))

    def stable_form(self, node: Any) -> Affine | None:
        """An expression of variables that have one value in the whole call, as extents of parameters are read."""
        for one in descendants(node):
            binding = self.names.of(one) if isinstance(one, c_ast.ID) else None
            if isinstance(one, c_ast.ID) and binding is None:
                return None
            if (
                binding is not None
                and binding.is_object
                and (
                    not binding.automatic
                    or self.names.address_taken(binding)
                    or len(self.names.assignments.get(binding, ())) > (binding.kind == "local")
                )
            ):
                return None
        strict, self.strict = self.strict, True
        try:
            return self.expressions.affine(node, Context())
        finally:
            self.strict = strict

    def poly_text(self, poly: Poly) -> str:
        """A polynomial as C text."""
        from .readable import form_text

        parts = []
        for factors, coefficient in sorted(poly.terms, key=lambda term: (term[1] < 0, len(term[0]) == 0)):
            texts = [form_text(Affine.of(f), self.texts()) for f in factors]
            if abs(coefficient) != 1 or not texts:
                texts.insert(0, str(abs(coefficient)))
            parts.append(("- " if coefficient < 0 else "+ ") + " * ".join(texts))
        text = " ".join(parts) or "0"
        return text[2:] if text.startswith("+ ") else text.replace("- ", "-", 1)

    def texts(self) -> dict[str, str]:
        """The C text of each parameter and each sum that was kept whole."""
        known = {symbol: parameter.text for symbol, parameter in self.knowledge.parameters.items()}
        return known | {symbol: symbol for symbol in self.factors if isinstance(symbol, str)}

    # ------------------------------------------------------------ trying

    def mark(self) -> tuple[int, ...]:
        """How much has been gathered; for ``rewind``."""
        return tuple(len(part) for part in self._gathered())

    def needs_nothing_since(self, mark: tuple[int, ...]) -> bool:
        """True if nothing was gathered since a mark that must hold or keep its value; parameters may have been."""
        return self.mark()[:4] == mark[:4]

    def failures_since(self, mark: tuple[int, ...]) -> tuple[Formula, ...]:
        """Where what was required since a mark does not hold, one formula each; it is required no longer."""
        taken_back = list(self.obligations)[mark[0] :]
        for obligation in taken_back:
            del self.obligations[obligation]
        conditions = [self.knowledge.condition(obligation) for obligation in taken_back]
        return tuple(dict.fromkeys(negate(condition) for condition in conditions if condition is not None))

    def rewind(self, mark: tuple[int, ...]) -> None:
        """Forget what was gathered since a mark, because what it was for came to nothing."""
        if len(self.knowledge.facts) > mark[-1]:
            self.knowledge.forget_conditions()
        for part, length in zip(self._gathered(), mark, strict=True):
            while len(part) > length:
                part.popitem()

    def _gathered(self) -> tuple[dict[Any, Any], ...]:
        knowledge = self.knowledge
        return (self.obligations, self.held, self.held_variables, self.narrow, knowledge.parameters, knowledge.facts)

    # ------------------------------------------------------------ facts and obligations

    def add_fact(self, formula: Formula, context: Context, node: Any) -> None:
        """Note what holds wherever this place is reached: of the sizes at which it is not, it says nothing."""
        condition = self.knowledge.exact_condition(
            Obligation(AssumptionCode.OTHER, formula, context.formula, context.loops, node)
        )
        if condition is not None:
            self.knowledge.add_choice(condition)

    def require(
        self, code: AssumptionCode, formula: Formula, context: Context, node: Any, storages: tuple[str, ...] = ()
    ) -> bool:
        """Note that a formula must hold here; False if that is hopeless."""
        if self.strict:
            return self.knowledge.proves(context.formula, formula)
        self.obligations.setdefault(
            Obligation(code, formula, context.formula, context.loops, node, storages, len(self.knowledge.facts))
        )
        return True

    def narrow_product(self, poly: Poly, type_: CType, context: Context, node: Any) -> Poly | None:
        """A product that may wrap in fewer bits than an address has: kept, if the wrapping can be excluded later."""
        if self.strict:
            return None
        self.narrow[poly, type_, context, node] = None
        return poly
