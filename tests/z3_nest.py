"""The question about a plan, put to z3 straight from the C text.

Own reading of the nest (pycparser), own encoding: iterators are integers, a loop's value is first + step * q with
0 <= q, division is a quotient with its remainder bounded.  Two copies of the iterators, original order forwards, plan
backwards, same cell: a model is a pair that the plan reverses, ``unsat`` means that there is none for any sizes.

Nests outside this small reading raise Unsupported: scalars that are written, unsigned iterators, pointers in pointers.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import z3
from pycparser import c_ast

from oracle import Term, parse_terms
from oracle_text import NAMED, Unsupported, parse

LARGEST = 500  # sizes are looked for between 0 and this; chunks of the tests are far smaller


@dataclass(frozen=True)
class ZLoop:
    """A loop of one statement, in one copy of the variables."""

    name: str
    line: int
    column: int
    value: z3.ArithRef
    number: z3.ArithRef
    step: int
    dependent: bool


@dataclass
class ZStatement:
    """A statement: where it stands and how to write down one instance of it."""

    line: int
    column: int
    around: list[c_ast.For]
    guards: list[tuple[c_ast.Node, bool]]
    accesses: list[tuple[str, tuple[c_ast.Node, ...], bool]]
    path: list  # text positions and loops in turn, from the outside in


@dataclass
class ZNest:
    """All statements of the nest at a line."""

    text: str
    line: int
    statements: list[ZStatement] = field(default_factory=list)
    outer: list[c_ast.For] = field(default_factory=list)
    count: int = 0

    def __post_init__(self) -> None:
        tree = parse(self.text)
        function = next(node for node in tree.ext if isinstance(node, c_ast.FuncDef))
        self.integers = _integer_parameters(function)
        self._find(function.body, [])
        if not self.statements:
            raise Unsupported("no nest")

    # ------------------------------------------------------------ reading

    def _find(self, node: c_ast.Node, outer: list[c_ast.For]) -> None:
        if isinstance(node, c_ast.For):
            if node.coord.line == self.line:
                self.outer = outer
                self._read(node, list(outer), [], [])
                return
            outer = [*outer, node]
        for _, child in node.children():
            self._find(child, outer)

    def _read(self, node: c_ast.Node, around: list, guards: list, path: list) -> None:
        if isinstance(node, c_ast.For):
            self._read(node.stmt, [*around, node], guards, [*path, node])
        elif isinstance(node, c_ast.Compound):
            for at, item in enumerate(node.block_items or ()):
                self._read(item, around, guards, [*path, at])
        elif isinstance(node, c_ast.If):
            self._add(node.cond, around, guards, [*path, 0])
            affine = self._is_affine(node.cond)
            self._read(node.iftrue, around, [*guards, (node.cond, True)] if affine else guards, [*path, 1])
            if node.iffalse is not None:
                self._read(node.iffalse, around, [*guards, (node.cond, False)] if affine else guards, [*path, 2])
        elif isinstance(node, (c_ast.Assignment, c_ast.UnaryOp)):
            self._add(node, around, guards, path)
        elif node is not None and not isinstance(node, c_ast.EmptyStatement):
            raise Unsupported(type(node).__name__)

    def _add(self, node: c_ast.Node, around: list, guards: list, path: list) -> None:
        accesses: list = []
        self._accesses(node, False, accesses)
        self.statements.append(ZStatement(node.coord.line, node.coord.column, around, guards, accesses, path))

    def _accesses(self, node: c_ast.Node, write: bool, into: list) -> None:
        if isinstance(node, c_ast.Assignment):
            if node.op != "=":
                self._accesses(node.lvalue, False, into)
            self._accesses(node.lvalue, True, into)
            self._accesses(node.rvalue, False, into)
        elif isinstance(node, (c_ast.ArrayRef, c_ast.StructRef)):
            into.append((*_cell(node), write))
        elif isinstance(node, c_ast.ID):
            if write:
                raise Unsupported("a scalar is written")
        elif write:
            raise Unsupported("lvalue")
        else:
            for _, child in node.children():
                self._accesses(child, False, into)

    def _is_affine(self, node: c_ast.Node) -> bool:
        if isinstance(node, (c_ast.ArrayRef, c_ast.StructRef, c_ast.FuncCall)):
            return False
        return all(self._is_affine(child) for _, child in node.children())

    # ------------------------------------------------------------ instances

    def fresh(self, what: str) -> z3.ArithRef:
        self.count += 1
        return z3.Int(f"{what}.{self.count}")

    def number(self, node: c_ast.Node, env: dict, facts: list) -> z3.ArithRef:
        """An integer expression; ``facts`` get the definitions of its quotients."""
        if isinstance(node, c_ast.Constant):
            return z3.IntVal(int(node.value.rstrip("uUlL"), 0))
        if isinstance(node, c_ast.ID):
            if node.name in env:
                return env[node.name]
            if node.name not in self.integers:
                raise Unsupported(node.name)
            return env.setdefault(node.name, z3.Int(node.name))
        if isinstance(node, c_ast.Cast):
            return self.number(node.expr, env, facts)
        if isinstance(node, c_ast.UnaryOp) and node.op in "+-":
            value = self.number(node.expr, env, facts)
            return -value if node.op == "-" else value
        if isinstance(node, c_ast.TernaryOp):
            return z3.If(self.truth(node.cond, env, facts), self.number(node.iftrue, env, facts),
                         self.number(node.iffalse, env, facts))
        if isinstance(node, c_ast.BinaryOp) and node.op in ("+", "-", "*", "/", "%"):
            return self._binary(node, env, facts)
        raise Unsupported(type(node).__name__)

    def _binary(self, node: c_ast.BinaryOp, env: dict, facts: list) -> z3.ArithRef:
        a, b = self.number(node.left, env, facts), self.number(node.right, env, facts)
        if node.op == "*" and not (z3.is_int_value(a) or z3.is_int_value(b)):
            raise Unsupported("a product of variables")
        if node.op in "+-*":
            return {"+": a + b, "-": a - b, "*": a * b}[node.op]
        if not z3.is_int_value(b) or b.as_long() <= 0:
            raise Unsupported("division by a variable")
        quotient, rest = self.fresh("quotient"), self.fresh("rest")  # C truncates towards zero
        facts += [a == b * quotient + rest, z3.If(a >= 0, z3.And(rest >= 0, rest < b), z3.And(rest <= 0, rest > -b))]
        return quotient if node.op == "/" else rest

    def truth(self, node: c_ast.Node, env: dict, facts: list) -> z3.BoolRef:
        """A condition."""
        if isinstance(node, c_ast.BinaryOp) and node.op in ("&&", "||"):
            both = self.truth(node.left, env, facts), self.truth(node.right, env, facts)
            return z3.And(*both) if node.op == "&&" else z3.Or(*both)
        if isinstance(node, c_ast.UnaryOp) and node.op == "!":
            return z3.Not(self.truth(node.expr, env, facts))
        if isinstance(node, c_ast.BinaryOp) and node.op in ("<", "<=", ">", ">=", "==", "!="):
            a, b = self.number(node.left, env, facts), self.number(node.right, env, facts)
            return {"<": a < b, "<=": a <= b, ">": a > b, ">=": a >= b, "==": a == b, "!=": a != b}[node.op]
        return self.number(node, env, facts) != 0

    def instance(self, statement: ZStatement, mark: str, shared: dict) -> tuple[list[ZLoop], dict, list]:
        """One instance: its loops, its variables, and what holds of them; ``shared`` are sizes and outer iterators."""
        env, facts, loops = dict(shared), [], []
        for node in statement.around:
            if node in self.outer:
                continue
            loops.append(self._loop(node, mark, env, facts, {loop.name for loop in loops}))
        for condition, wanted in statement.guards:
            held = self.truth(condition, env, facts)
            facts.append(held if wanted else z3.Not(held))
        return loops, env, facts

    def _loop(self, node: c_ast.For, mark: str, env: dict, facts: list, inner: set[str]) -> ZLoop:
        name, first_node, step, early = _loop_parts(node)
        first = self.number(first_node, env, facts)
        dependent = bool(_names(first_node) & inner)
        number = self.fresh(f"number of {name}")
        value = z3.Int(f"{name}{mark}.{node.coord.line}")
        facts += [number >= 0, value == first + (-1 if early else 0) + step * number]
        env[name] = value
        if early:  # for (x = b; x-- > c;): the test sees the value before it falls
            facts.append(value + 1 > self.number(node.cond.right, env, facts))
        else:
            facts.append(self.truth(node.cond, env, facts))
            if node.cond.op == "!=":
                facts.append(value < self.number(node.cond.right, env, facts))
        return ZLoop(name, node.coord.line, node.coord.column, value, number, step, dependent)

    def shared(self) -> tuple[dict, list]:
        """Sizes and outer iterators with what holds of them."""
        env = {name: z3.Int(name) for name in self.integers}
        facts = [z3.And(value >= 0, value <= LARGEST) for value in env.values()]
        for node in self.outer:
            self._loop(node, "", env, facts, set())
        return env, facts


# (line, loop, value, chunks only): where the statements of a line stand in a loop that is not around them.
Aligned = Sequence[tuple[int, str, Callable[[dict], z3.ArithRef], bool]]


def reversed_pair(nest: ZNest, plan: str, aligned: Aligned = ()) -> tuple[dict[str, int], str] | None:
    """Sizes at which the plan reverses a pair, and where; None if z3 proves that there is no such pair."""
    terms = parse_terms(plan)
    for first in nest.statements:
        for second in nest.statements:
            for array, subscripts, writes in first.accesses:
                for other, places, also in second.accesses:
                    if array != other or not (writes or also) or len(subscripts) != len(places):
                        continue
                    model = _solve(nest, terms, (first, subscripts), (second, places), aligned)
                    if model is not None:
                        return model, f"{array} between lines {first.line} and {second.line}"
    return None


def _solve(nest: ZNest, terms: tuple[Term, ...], one: tuple, two: tuple, aligned: Aligned) -> dict[str, int] | None:
    shared, facts = nest.shared()
    loops_a, env_a, facts_a = nest.instance(one[0], "", shared)
    loops_b, env_b, facts_b = nest.instance(two[0], "'", shared)
    facts = facts + facts_a + facts_b
    for a, b in zip(one[1], two[1], strict=True):
        facts.append(nest.number(a, env_a, facts) == nest.number(b, env_b, facts))
    before = _before(_moments(one[0], loops_a), _moments(two[0], loops_b))
    place_a = [_Placing(nest, one[0], loops_a, env_a, facts, aligned).place(term) for term in terms]
    place_b = [_Placing(nest, two[0], loops_b, env_b, facts, aligned).place(term) for term in terms]
    solver = z3.Solver()
    solver.set("timeout", 5000)
    solver.add(*facts, before, _before(place_b, place_a))
    answer = solver.check()
    if answer == z3.unknown:
        raise Unsupported("z3 gave up")
    if answer == z3.unsat:
        return None
    model = solver.model()
    return {name: model.eval(z3.Int(name), model_completion=True).as_long() for name in nest.integers}


def _moments(statement: ZStatement, loops: list[ZLoop]) -> list:
    """The original time: text positions and iteration numbers, as they come from the outside in."""
    numbers = iter(loops)
    return [step if isinstance(step, int) else next(numbers).number for step in statement.path]


@dataclass
class _Placing:
    """An instance of a statement, for the question where it stands in a plan (see the definition in oracle.py)."""

    nest: ZNest
    statement: ZStatement
    loops: list[ZLoop]
    env: dict
    facts: list
    aligned: Aligned

    def place(self, term: Term) -> object:
        """The place with regard to one term."""
        total: object = 0
        around = [self._around(name, term.chunk is not None) for name, _ in term.loops]
        for (name, factor), loop in zip(term.loops, around, strict=True):
            if loop is None:
                before = (self.statement.line, self.statement.column) < _start(self.nest, name)
                return -10**9 if before else 10**9
            if term.skewed:
                total = total + factor * (loop.value if loop.step == 1 else loop.number)
            elif loop.dependent:
                total = loop.value if loop.step > 0 else -loop.value
            else:
                total = loop.number
        if term.chunk is None:
            return total
        unit = term.chunk * (abs(around[0].step) if around[0].dependent and not term.skewed else 1)
        return self._quotient("chunk", total, unit)

    def _quotient(self, what: str, total: z3.ArithRef, unit: int) -> z3.ArithRef:
        whole = self.nest.fresh(what)
        self.facts += [unit * whole <= total, total < unit * whole + unit]
        return whole

    def _around(self, name: str, chunk: bool) -> ZLoop | None:
        """The loop at the instance; one that is not around it if the plan says at which of its values it stands."""
        for loop in self.loops:
            if _is(loop.name, loop.line, name):
                return loop
        for line, other, value, chunks_only in self.aligned:
            if line == self.statement.line and other == name and (chunk or not chunks_only):
                return self._standing(name, value(self.env))
        return None

    def _standing(self, name: str, value: z3.ArithRef) -> ZLoop:
        statement, node = _header(self.nest, name)
        base, first, step, early = _loop_parts(node)
        inner = {_loop_parts(loop)[0] for loop in statement.around if loop not in self.nest.outer}
        dependent = bool(_names(first) & inner)
        number = value  # only asked for where the first value depends on no other loop
        if not dependent:
            ahead = value - self.nest.number(first, self.env, self.facts) + (1 if early else 0)
            number = self._quotient("number", ahead if step > 0 else -ahead, abs(step))
        return ZLoop(base, node.coord.line, node.coord.column, value, number, step, dependent)


def _is(name: str, line: int, wanted: str) -> bool:
    base, _, place = wanted.partition("@")
    return name == base and (not place or line == int(place))


def _start(nest: ZNest, name: str) -> tuple[int, int]:
    node = _header(nest, name)[1]
    return node.coord.line, node.coord.column


def _header(nest: ZNest, name: str) -> tuple[ZStatement, c_ast.For]:
    """The loop of a name, and a statement in it."""
    for statement in nest.statements:
        for loop in statement.around:
            if _is(_loop_parts(loop)[0], loop.coord.line, name):
                return statement, loop
    raise Unsupported(f"no loop {name}")


def _before(a: list, b: list) -> z3.BoolRef:
    """Lexicographic order of two vectors of integers; a known difference ends the comparison."""
    pairs = []
    end = z3.BoolVal(False)
    for x, y in zip(a, b, strict=False):
        if isinstance(x, int) and isinstance(y, int):
            if x != y:
                end = z3.BoolVal(x < y)
                break
        else:
            pairs.append((x, y))
    for x, y in reversed(pairs):
        end = z3.Or(x < y, z3.And(x == y, end))
    return end


def _integer_parameters(function: c_ast.FuncDef) -> tuple[str, ...]:
    found = []
    for parameter in function.decl.type.args.params:
        kind = parameter.type
        if isinstance(kind, c_ast.TypeDecl) and isinstance(kind.type, c_ast.IdentifierType):
            words = kind.type.names
            if words[-1] in ("int", "long", "short") and "unsigned" not in words:
                found.append(parameter.name)
            elif words[-1] in NAMED or "unsigned" in words:
                raise Unsupported("unsigned sizes")
    return tuple(found)


def _cell(node: c_ast.Node) -> tuple[str, tuple[c_ast.Node, ...]]:
    """Array and subscripts; a member of an array of structs counts as an array of its own."""
    if isinstance(node, c_ast.StructRef):
        name, subscripts = _cell(node.name)
        return f"{name}.{node.field.name}", subscripts
    subscripts: list[c_ast.Node] = []
    while isinstance(node, c_ast.ArrayRef):
        subscripts.insert(0, node.subscript)
        node = node.name
    if not isinstance(node, c_ast.ID):
        raise Unsupported("array")
    return node.name, tuple(subscripts)


def _names(node: c_ast.Node) -> set[str]:
    found = {node.name} if isinstance(node, c_ast.ID) else set()
    return found.union(*(_names(child) for _, child in node.children()))


def _loop_parts(node: c_ast.For) -> tuple[str, c_ast.Node, int, bool]:
    """Iterator, first value, step, and whether the test itself counts down (``x-- > c``)."""
    if isinstance(node.init, c_ast.DeclList) and len(node.init.decls) == 1:
        declaration = node.init.decls[0]
        name, first = declaration.name, declaration.init
        if not set(declaration.type.type.names) <= {"int", "long", "short"}:
            raise Unsupported("iterator type")
    elif isinstance(node.init, c_ast.Assignment):
        name, first = node.init.lvalue.name, node.init.rvalue
    else:
        raise Unsupported("loop header")
    after = node.next
    if after is None and isinstance(node.cond, c_ast.BinaryOp) and isinstance(node.cond.left, c_ast.UnaryOp):
        return name, first, -1, True
    if isinstance(after, c_ast.UnaryOp):
        return name, first, 1 if "+" in after.op else -1, False
    if not isinstance(after.rvalue, c_ast.Constant):
        raise Unsupported("a step that is computed")
    step = int(after.rvalue.value)
    return name, first, step if after.op == "+=" else -step, False
