"""From the syntax tree of a nest to its loop tree and its statements, in one walk in text order."""

from __future__ import annotations

from collections import Counter
from typing import Any

from pycparser import c_ast

from ..affine import Affine, AllOf, AnyOf, Formula, at_least_bound, at_most_bound, negate
from ..model import CType, Refusal, Span
from ..source.kinds import ArrayOf, PointerTo
from ..tree import Guard, Leaf, Loop, Node
from ..values import dataclass, replace
from .bounds import Bounds
from .conditions import Conditions
from .context import Context
from .effects import Effects, Touch
from .evaluated import Evaluated
from .headers import origin_of, spans_of
from .hiding import hidden_names
from .loops import Header, Loops
from .refusals import Refused, refusal, refused
from .scopes import Binding, descendants, sole_assignment
from .setting import Setting, c_text
from .skipping import items_of, runs_on, skips, surely_skips

_FORBIDDEN = {
    c_ast.While: ("while", "a `while` loop runs an unknown number of times; write it as a `for` with a bound."),
    c_ast.DoWhile: ("while", "a `do` loop runs an unknown number of times; write it as a `for` with a bound."),
    c_ast.Switch: ("switch", "a `switch` chooses by data; write it with `if`."),
    c_ast.Break: (
        "break",
        "`break` ends the loop early, so how often it runs depends on data; let the bound say where the loop ends.",
    ),
    c_ast.Goto: ("goto", "`goto` leaves the order of the loops; write it with loops and `if`."),
    c_ast.Label: ("label", "a label can be jumped to from elsewhere; write the nest without `goto`."),
    c_ast.Return: (
        "return",
        "`return` leaves the nest early, so how often it runs depends on data; return after the nest.",
    ),
    c_ast.Case: ("switch", "a `case` stands inside the nest; write it with `if`."),
    c_ast.Default: ("switch", "a `default` stands inside the nest; write it with `if`."),
    c_ast.Pragma: ("directive", "a pragma inside the nest speaks of loops as they stand; take it out first."),
}
_EXPRESSIONS = (
    c_ast.Assignment,
    c_ast.UnaryOp,
    c_ast.BinaryOp,
    c_ast.FuncCall,
    c_ast.ExprList,
    c_ast.Cast,
    c_ast.TernaryOp,
    c_ast.ID,
    c_ast.Constant,
    c_ast.ArrayRef,
    c_ast.StructRef,
)


@dataclass(frozen=True)
class RawLoop:
    """A loop as it was read."""

    id: str
    node: Any
    header: Header
    spans: tuple[Span, Span, Span]
    context: Context  # around the loop


@dataclass(frozen=True)
class RawStatement:
    """A statement as it was read; its accesses are still touches."""

    id: str
    span: Span
    text: str
    context: Context
    touches: tuple[Touch, ...]
    node: Any


@dataclass(frozen=True)
class _Rest:
    """A branch of an ``if`` with what else it guards."""

    items: tuple[Any, ...]
    rest: tuple[Any, ...]


class Walk:
    """Reads one nest.  What it finds stands in its public fields afterwards."""

    def __init__(self, setting: Setting, nest: Any) -> None:
        self.setting = setting
        self.loops: list[RawLoop] = []
        self.statements: list[RawStatement] = []
        self.refusals: list[Refusal] = []
        self.evaluated: list[Evaluated] = []  # all expressions, in the order of the text
        self.block_declared: dict[Binding, tuple[str, ...]] = {}  # loops around the declaration
        self.ids = loop_ids(nest, setting)
        setting.loop_ids.update(self.ids.values())
        self._source = setting.unit.source
        self.branches: list[tuple[Context, int, int, int]] = []  # around an if, both branches, statements up to its end
        self._per_line: Counter[int] = Counter()
        self._kept: list[_Rest] = []  # alive as long as contexts tell them by their identity
        conditions = Conditions(setting)
        self._conditions = conditions
        self._headers = Loops(setting, conditions, Bounds(setting, conditions))
        self._effects = Effects(setting, conditions)
        self.refusals += hidden_names(nest, setting)
        self.tree = self._node(nest, Context())
        self.statements = [self._without_sizes(statement) for statement in self.statements]

    # ------------------------------------------------------------ statements

    def _node(self, node: Any, context: Context) -> tuple[Node, ...]:
        """The tree of one statement; a refusal is noted and the reading goes on."""
        try:
            return self._statement(node, context)
        except Refused as problem:
            self.refusals.append(problem.refusal)
            return ()
        except RecursionError:
            self.refusals.append(refusal(node, "unsupported", "an expression or statement here is nested too deep."))
            return ()

    def _statement(self, node: Any, context: Context) -> tuple[Node, ...]:
        for kind, (code, reason) in _FORBIDDEN.items():
            if isinstance(node, kind):
                raise refused(node, code, reason)
        match node:
            case None | c_ast.EmptyStatement() | c_ast.Typedef() | c_ast.StaticAssert() | c_ast.Continue():
                return ()
            case c_ast.Compound():
                return self._sequence(node.block_items or (), context)
            case c_ast.For():
                return (self._loop(node, context),)
            case c_ast.If():
                return self._branch(node, context)
            case c_ast.Decl():
                return self._declarations([node], context)
        if isinstance(node, _EXPRESSIONS):
            return self._expression(node, context)
        raise refused(
            node, "unsupported", "retile does not read this statement; write it with assignments, `if` and `for`."
        )

    def _sequence(self, items: Any, context: Context, rest: tuple[Any, ...] = ()) -> tuple[Node, ...]:
        """The nodes of some statements; ``rest``: what else runs in the iteration, unless they skip it."""
        nodes: list[Node] = []
        group: list[Any] = []
        for at, item in enumerate((*items, None)):
            if item is not None and skips(item):
                if group:
                    nodes += self._guarded_declarations(group, context)
                return (*nodes, *self._skipping(item, (*items[at + 1 :], *rest), context))
            if isinstance(item, c_ast.Decl) and (not group or self._together(group[0], item)):
                group.append(item)
                continue
            if group:
                nodes += self._guarded_declarations(group, context)
                group = []
            if isinstance(item, c_ast.Decl):
                group.append(item)
            elif item is not None:
                nodes += self._node(item, context)
        return (*nodes, *self._sequence(rest, context)) if rest else tuple(nodes)

    def _skipping(self, node: Any, rest: tuple[Any, ...], context: Context) -> tuple[Node, ...]:
        """The nodes of a statement that may skip the rest of the iteration, and of that rest."""
        try:
            if isinstance(node, c_ast.Compound):
                return self._sequence(node.block_items, context, rest)
            if surely_skips(node) and runs_on(rest):
                raise refused(rest[0], "continue", "nothing that stands behind a `continue` can run; take it out.")
            if not isinstance(node, c_ast.If):
                return self._statement(node, context)
            if not surely_skips(node.iftrue) and not surely_skips(node.iffalse) and runs_on(rest):
                return self._perhaps_skipped(node, rest, context)
            return self._branch(node, context, rest)
        except Refused as problem:
            self.refusals.append(problem.refusal)
            return ()

    def _together(self, first: Any, second: Any) -> bool:
        """True for the declarators of one declaration."""
        span = self._source.span(first)
        return span is not None and span == self._source.span(second)

    def _guarded_declarations(self, decls: list[Any], context: Context) -> tuple[Node, ...]:
        try:
            return self._declarations(decls, context)
        except Refused as problem:
            self.refusals.append(problem.refusal)
            return ()

    def _declarations(self, decls: list[Any], context: Context) -> tuple[Node, ...]:
        touches: list[Touch] = []
        for decl in decls:
            touches += self._declaration(decl, context)
        if not touches:
            return ()
        return (self._leaf(decls[0], self._span(decls[0]), tuple(touches), context),)

    def _declaration(self, decl: Any, context: Context) -> tuple[Touch, ...]:
        setting, binding = self.setting, self.setting.names.of(decl)
        if binding is None or isinstance(decl.type, c_ast.FuncDecl):
            return ()
        if binding.kind == "local":
            self.block_declared[binding] = context.loops
            self.evaluated.append(Evaluated(decl.init, context))
        type_ = setting.type_of_binding(binding)
        if isinstance(type_, ArrayOf) and setting.size_of(type_) is None:
            raise refused(
                decl,
                "vla",
                f"the array `{decl.name}`, whose length is no constant, is made anew in every "
                "iteration; declare it before the nest.",
            )
        if decl.init is None or binding.kind == "static":
            return ()
        if isinstance(type_, PointerTo):
            setting.define(binding, decl.init, context)
            return self._effects.of_pointer(decl.init, binding, context, decl)
        touches = self._effects.of_declaration(decl, context)
        setting.define(binding, decl.init, context)
        return touches

    def _expression(self, node: Any, context: Context) -> tuple[Node, ...]:
        setting = self.setting
        self.evaluated.append(Evaluated(node, context))
        binding = None
        if isinstance(node, c_ast.Assignment) and node.op == "=" and isinstance(node.lvalue, c_ast.ID):
            binding = setting.names.of(node.lvalue)
        pointer = binding is not None and binding.is_object and isinstance(setting.type_of_binding(binding), PointerTo)
        if binding is not None and pointer:
            setting.define(binding, node.rvalue, context)
        touches = self._effects.of(node, context)
        if binding is not None and not pointer:
            setting.define(binding, node.rvalue, context)
        return (self._leaf(node, self._span(node), touches, context),)

    def _span(self, node: Any) -> Span:
        span = self._source.span(node)
        if span is None:
            raise refused(
                node,
                "macro",
                "the statement comes out of a macro in part, so it has no text of its own; write the statement out.",
            )
        return span

    def _leaf(self, node: Any, span: Span, touches: tuple[Touch, ...], context: Context) -> Leaf:
        id = self._statement_id(span.line)
        touches = (*self._needed(context), *touches)
        text = " ".join(self._source.slice(span).split())
        self.statements.append(RawStatement(id, span, text, context, touches, node))
        return Leaf(id, tuple((loop, Affine.of(loop)) for loop in context.loops))

    def _needed(self, context: Context) -> tuple[Touch, ...]:
        """The reads of what a header or condition around names, for wherever a plan puts a copy of it."""
        found = {self.setting.names.of(node): node for node in context.needs}
        return tuple(
            Touch(self.setting.places.variable(binding), False, context, node)
            for binding, node in found.items()
            if binding is not None
        )

    def _computed(self, *nodes: Any) -> tuple[Any, ...]:
        """The names in these expressions of what the nest computes."""
        return tuple(
            one
            for node in nodes
            if node is not None
            for one in descendants(node)
            if isinstance(one, c_ast.ID) and self.setting.names.of(one) in self.setting.definitions
        )

    def _statement_id(self, line: int) -> str:
        self._per_line[line] += 1
        number = self._per_line[line]
        return f"{line}{_letters(number)}"

    def _without_sizes(self, statement: RawStatement) -> RawStatement:
        """Reads of integers in memory that serve as parameters are no reads of data: they must not change at all."""
        kept = tuple(touch for touch in statement.touches if touch.write or not self._is_held(touch))
        return replace(statement, touches=kept)

    def _is_held(self, touch: Touch) -> bool:
        return any(held.same_cell(touch.place) for held in self.setting.held.values())

    # ------------------------------------------------------------ if

    def _branch(self, node: Any, context: Context, rest: tuple[Any, ...] = ()) -> tuple[Node, ...]:
        """An ``if``; ``rest``: what follows in the iteration, if a branch may skip it."""
        ends = (node.iftrue, node.iffalse) if not skips(node) else self._with_rest(node, rest)
        span = self._source.condition_span(node)
        if span is None:
            raise refused(node, "macro", "the `if` comes out of a macro, so it has no text of its own; write it out.")
        condition = self._conditions.known(node.cond, context)
        self.evaluated.append(Evaluated(node.cond, context))
        nodes: list[Node] = []
        before = dict(self.setting.definitions)
        if condition is None:
            touches = self._effects.of_condition(node, context)
            if any(touch.write for touch in touches):
                raise refused(node.cond, "condition", "the condition of an `if` changes something; do that before it.")
            nodes.append(self._leaf(node, span, touches, context))
        if condition is None:
            part = self._conditions.known_part(node.cond, context)
            narrowed = context if part is None else context.where(part)
            nodes += self._guard(part, ends[0], narrowed.uncertain(), span, partly=part is not None)
            nodes += self._guard(None, ends[1], context.uncertain(), span)
        else:
            context = context.needing(self._computed(node.cond))
            nodes += self._guard(condition, ends[0], context.where(condition), span)
            nodes += self._guard(negate(condition), ends[1], context.where(negate(condition)), span)
            self._choose(node, context, before)
        self.branches.append((context, id(ends[0]), id(ends[1]), len(self.statements)))
        return tuple(nodes)

    def _choose(self, node: Any, context: Context, before: dict[Binding, Any]) -> None:
        """``if (hi > n) hi = n;`` and ``if (c) hi = n; else hi = m;``: from here on the variable is one of two."""
        yes, no = sole_assignment(node.iftrue), sole_assignment(node.iffalse)
        binding = None if yes is None else self.setting.names.of(yes.lvalue)
        if binding is None or (node.iffalse is not None and (no is None or self.setting.names.of(no.lvalue) is not binding)):
            return
        other = yes.lvalue if no is None else no.rvalue
        if isinstance(self.setting.type_of_binding(binding), CType):
            self.setting.define(binding, c_ast.TernaryOp(node.cond, yes.rvalue, other, node.coord), context, before)

    def _guard(
        self, condition: Formula | None, body: Any, context: Context, span: Span, partly: bool = False
    ) -> list[Node]:
        if body is None:
            return []
        inside = context.block(body)
        jump = isinstance(body, _Rest)
        inner = self._sequence(body.items, inside, body.rest) if isinstance(body, _Rest) else self._node(body, inside)
        return [Guard(condition, inner, (span.start, span.end), partly, jump)] if inner else []

    def _with_rest(self, node: Any, rest: tuple[Any, ...]) -> tuple[_Rest, _Rest]:
        """Both branches of an ``if`` with a ``continue`` in it, and in the one that goes on the rest of the iteration."""
        yes, no = (
            _Rest(items_of(branch), () if surely_skips(branch) else rest) for branch in (node.iftrue, node.iffalse)
        )
        self._kept += (yes, no)
        return yes, no

    def _perhaps_skipped(self, node: Any, rest: tuple[Any, ...], context: Context) -> tuple[Node, ...]:
        """An ``if`` whose branches both may go on, one of them not always: the rest has a guard of its own."""
        span = self._source.condition_span(node)
        before = self._branch(node, context)
        skipped = self._skipped_where(node, context)
        left = None if skipped is None else negate(skipped)
        context = context.needing(self._computed(node))
        body = _Rest((), rest)
        self._kept.append(body)
        assert span is not None  # the branch would have been refused
        return (*before, *self._guard(left, body, context.uncertain() if left is None else context.where(left), span))

    def _skipped_where(self, node: Any, context: Context) -> Formula | None:
        """Where a statement skips what follows it; None if that depends on data."""
        if not skips(node):
            return AnyOf()
        if isinstance(node, c_ast.Continue):
            return AllOf()
        if isinstance(node, c_ast.Compound):
            parts = [self._skipped_where(item, context) for item in node.block_items]
        else:
            holds = self._conditions.known(node.cond, context) if isinstance(node, c_ast.If) else None
            inner = [] if holds is None else [self._skipped_where(one, context) for one in (node.iftrue, node.iffalse)]
            if holds is None or None in inner:
                return None
            parts = [AllOf((one, part)) for one, part in zip((holds, negate(holds)), inner, strict=True) if part is not None]
        known = tuple(part for part in parts if part is not None)
        return AnyOf(known) if len(known) == len(parts) else None

    # ------------------------------------------------------------ loops

    def _loop(self, node: Any, context: Context) -> Loop:
        id = self.ids[built(node)]
        spans = spans_of(self._source, node)
        header = self._headers.header(node, id, context)
        if context.iterator(header.binding) is not None:
            raise refused(
                node,
                "iterator-changed",
                f"the iterator `{header.binding.name}` of an outer loop is used again "
                "for an inner one; give the inner loop its own.",
            )
        origin = origin_of(header)
        self.loops.append(RawLoop(id, node, header, spans, context))
        at = Affine.of(id)
        start = context.inside(id, header.binding, AllOf((at_least_bound(at, header.first), at_most_bound(at, header.first))))
        self.evaluated += [Evaluated(header.first_node, context), Evaluated(node.cond, context if header.before_first else start)]
        inside = context.inside(id, header.binding, header.constraint(id, origin))
        inside = inside.needing(self._computed(node.init, node.cond, node.next))
        body = self._node(node.stmt, inside.block(node.stmt))
        lower, upper = (header.first, header.last) if header.step > 0 else (header.last, header.first)
        return Loop(id, lower, upper, header.step, origin, body, id)


def _letters(number: int) -> str:
    """Nothing for the first statement of a line, ``b`` for the second, ``z`` for the 26th, ``ba`` for the 27th."""
    text, number = "", number - 1
    while number:
        text, number = chr(ord("a") + number % 26) + text, number // 26
    return text


def built(node: Any) -> int:
    """The identity of a tree node."""
    return id(node)


def loop_ids(nest: Any, setting: Setting) -> dict[int, str]:
    """An id for each loop of the nest, by the identity of its node; notes all iterators."""
    loops = [node for node in descendants(nest) if isinstance(node, c_ast.For)]
    for loop in loops:
        target = _iterator(loop)
        binding = None if target is None else setting.names.of(target)
        if binding is not None:
            setting.loop_iterators.add(binding)
    return {built(loop): id for loop, id in zip(loops, iterator_names(nest), strict=True)}


def iterator_names(nest: Any) -> tuple[str, ...]:
    """The ids of a nest's loops: the iterator's name, with line and column where that is not unique."""
    loops = [node for node in descendants(nest) if isinstance(node, c_ast.For)]
    names = [getattr(_iterator(loop), "name", None) or "?" for loop in loops]
    ids = list(names)
    for form in ("{name}@{line}", "{name}@{line}:{column}"):
        count = Counter(ids)
        ids = [
            id if count[id] == 1 else form.format(name=name, line=loop.coord.line, column=loop.coord.column)
            for id, name, loop in zip(ids, names, loops, strict=True)
        ]
    return tuple(ids)


def _iterator(loop: Any) -> Any:
    """The declaration or name that the header starts with."""
    init = loop.init
    return init.decls[0] if isinstance(init, c_ast.DeclList) else getattr(init, "lvalue", None)
