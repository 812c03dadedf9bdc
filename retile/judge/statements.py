"""From C statements to lines of Python; loops that count become loops over a range."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

from pycparser import c_ast

from .calls import Calls
from .declarations import Alias, Variable, completed, initial_parts
from .headers import Counting, assigned_in, counting, iterators_in, steady
from .kinds import BOOL, Array, Function, Kind, Length, Number, Pointer, Struct, Unsupported, Void, common
from .writer import Operand, Place


class Statements(Calls):
    """Generates code for statements; ``FunctionText`` in program.py builds on it."""

    iterators: frozenset[str] = frozenset()  # names of variables that a ``for`` of the function counts with
    parallel: frozenset[int] = frozenset()  # lines of loops whose iterations may run in any order
    watched: int | None = None  # line of a loop that tells the machine that it was reached
    returns: Kind = Void()
    returned: str = "none"  # how the function's result is held
    where: str = "local"  # where new variables belong

    def __init__(self, *arguments: Any) -> None:
        super().__init__(*arguments)
        self._continue: list[Callable[[], None]] = []
        self.assigned: dict[int, set[str]] = {}  # by the identity of a statement

    # ------------------------------------------------------------ hooks

    @contextmanager
    def instance(self, node: Any, kind: str) -> Iterator[None]:
        """Around the code of an expression statement, an initialised declaration or a condition."""
        yield

    @contextmanager
    def loop(self, node: c_ast.For) -> Iterator[Callable[[str | None], None]]:
        """Around the code of a ``for``; what it gives is called at the begin of the body, with the iterator."""
        yield lambda iterator: None

    # ------------------------------------------------------------ dispatch

    def statement(self, node: Any) -> None:
        """The lines of a statement."""
        if node is None or isinstance(node, (c_ast.EmptyStatement, c_ast.Pragma, c_ast.StaticAssert)):
            return
        method = getattr(self, f"_run_{type(node).__name__}", None)
        if method is not None:
            method(node)
            return
        with self.instance(node, "statement"):
            self.value(node)

    def _run_Compound(self, node: c_ast.Compound) -> None:
        self.scopes.append({})
        for item in node.block_items or ():
            self.statement(item)
        self.scopes.pop()

    def _run_DeclList(self, node: c_ast.DeclList) -> None:
        for item in node.decls:
            self.statement(item)

    def _run_Label(self, node: Any) -> None:
        raise Unsupported("a jump")

    _run_Goto = _run_Switch = _run_Case = _run_Default = _run_Label

    def _run_Return(self, node: c_ast.Return) -> None:
        if node.expr is None:
            self.emit("return")
            return
        value = self.value(node.expr)
        if value.held == "none":
            self.emit("return")
            return
        value = self.convert(value, self.returns)
        if value.held == "pointer":
            self.emit(f"return ({value.text}, {value.offset})")
        elif self.returned == "data":
            self.emit(f"return {self.data(value)}")
        else:
            if value.held == "data":
                self.facts.add(("returns data", 0))
            self.emit(f"return {value.text}")

    def _run_If(self, node: c_ast.If) -> None:
        both = self.both(node.cond)
        with self.instance(node.cond, "condition"):
            condition = self.condition(node.cond)
            if both or self.notes:
                condition = self.atom(condition)
        if both:
            self.uncertain += 1
            self._possible(node.iftrue)
            self._possible(node.iffalse)
            self.uncertain -= 1
            return
        with self.block(f"if {condition}:"):
            self.statement(node.iftrue)
        if node.iffalse is not None:
            with self.block("else:"):
                self.statement(node.iffalse)

    def _possible(self, node: Any) -> None:
        """A branch that runs beside the other one: a ``continue`` in it ends the branch, not what comes behind the ``if``."""
        if not _continues(node):
            self.statement(node)
            return
        with self.block("for _ in (0,):"):
            self._body(node, lambda: None)

    # ------------------------------------------------------------ declarations

    def _run_Typedef(self, node: c_ast.Typedef) -> None:
        self.scopes[-1][node.name] = Alias(self.type(node.type))

    def computed_length(self, dim: Any) -> Length:
        """The length of an array, computed here."""
        name = self.fresh("length")
        self.emit(f"{name} = {self.integer(self.value(dim))}")
        return Length(name)

    def variable(self, name: str, kind: Kind, coord: object, where: str = "") -> Variable:
        """A new variable in the innermost scope."""
        declared = (name, str(coord))
        iterator = name in self.iterators
        if isinstance(kind, (Array, Struct)) or ("object", declared) in self.facts:
            held = "object"
        else:
            held = "pointer" if isinstance(kind, Pointer) else "number"
        data = isinstance(kind, Number) and (kind.floating or ("data", declared) in self.facts)
        made = Variable(name, self.fresh(f"{name}_"), kind, held, where or self.where, declared, data, iterator,
                        held == "object" and ("exposed", declared) in self.facts)
        self.scopes[-1][name] = made
        return made

    def _run_Decl(self, node: c_ast.Decl) -> None:
        for tag in _enumerations(node.type):
            self.enumerate(tag)
        if node.name is None:
            self.type(node.type)
            return
        kind = completed(self.type(node.type), node.init)
        if isinstance(kind, Function) or "extern" in node.storage:
            return
        if isinstance(kind, Array) and kind.length is None:
            raise Unsupported("an array without a length")
        if "static" in node.storage or "_Thread_local" in node.storage:
            self.static(node, kind)
            return
        if node.init is None:
            self._made(self.variable(node.name, kind, node.coord))
            return
        with self.instance(node, "statement"):
            self._initialised(node, kind)

    @abstractmethod
    def static(self, node: c_ast.Decl, kind: Kind) -> None:
        """A variable that keeps its value from call to call."""

    def _made(self, variable: Variable) -> None:
        """A variable without a value."""
        name, kind = variable.python, variable.kind
        if variable.held == "object":
            self.emit(f"{name} = machine.own({variable.name!r}, {variable.where!r}, {self.kind_name(kind)}, "
                      f"{self.size_text(kind)}, {variable.declared!r})")
        elif variable.held == "pointer":
            self.emit(f"{name}_o = {name}_k = UNSET")
        else:
            self.emit(f"{name} = UNSET")

    def _initialised(self, node: c_ast.Decl, kind: Kind) -> None:
        variable = self.variable(node.name, kind, node.coord)  # its scope begins before the initialiser (6.2.1)
        if isinstance(kind, (Number, Pointer)):
            value = self.value(node.init.exprs[0] if isinstance(node.init, c_ast.InitList) else node.init)
            if variable.held == "object":
                self._made(variable)
                self.store(Place(kind, variable.python, "0", name=node.name, private=True), value)
            else:
                self.store(variable, value)
            return
        self._made(variable)
        if isinstance(kind, Struct) and not isinstance(node.init, c_ast.InitList):
            self.copy_struct(Place(kind, variable.python, "0"), self.value(node.init))
            return
        self.filled(variable, node.init)

    def filled(self, variable: Variable, init: Any) -> None:
        """The cells that an initialiser in braces sets."""
        if not isinstance(init, c_ast.InitList):
            raise Unsupported("this initialiser")
        parts = list(initial_parts(variable.kind, init))
        if any(part is None for _, _, part in parts):
            self.emit(f"machine.clear(({variable.python}, 0), {self.size_text(variable.kind)})")
        for offset, kind, part in parts:
            if part is not None:
                self.store(Place(kind, variable.python, str(offset), private=variable.where in ("local", "block")),
                           self.value(part))

    # ------------------------------------------------------------ loops

    def _run_Break(self, node: c_ast.Break) -> None:
        self.emit("break")

    def _run_Continue(self, node: c_ast.Continue) -> None:
        self._continue[-1]()
        self.emit("continue")

    def _run_While(self, node: c_ast.While) -> None:
        with self.block("while True:"):
            self._leave_unless(node.cond)
            self._body(node.stmt, lambda: None)

    def _run_DoWhile(self, node: c_ast.DoWhile) -> None:
        with self.block("while True:"):
            self.emit("tick()")
            self._body(node.stmt, lambda: self._leave_unless(node.cond))
            self._leave_unless(node.cond)

    def _leave_unless(self, condition: Any) -> None:
        if condition is not None:
            self.emit(f"if not {self.condition(condition)}: break")

    def _body(self, node: Any, proceed: Callable[[], None]) -> None:
        """A loop's body; ``proceed`` writes what a ``continue`` goes on with."""
        self._continue.append(proceed)
        self.statement(node)
        self._continue.pop()

    def _run_For(self, node: c_ast.For) -> None:
        self.scopes.append({})
        if node.coord is not None and node.coord.line == self.watched:
            self.emit("machine.reached = True")
        with self.loop(node) as begin:
            range_form = self._counting(node)
            if range_form is None:
                self._general(node, begin)
            else:
                self._ranged(node, *range_form, begin)
        self.scopes.pop()

    def _general(self, node: c_ast.For, begin: Callable[[str | None], None]) -> None:
        self._aside(node.init)
        form = counting(node, self.constant)
        found = self.scoped(form.name) if form else None
        iterator = found.python if isinstance(found, Variable) and found.held == "number" else None
        with self.block("while True:"):
            self._leave_unless(node.cond)
            self.emit("tick()")
            begin(iterator)
            self._body(node.stmt, lambda: self._aside(node.next))
            self._aside(node.next)

    def _aside(self, node: Any) -> None:
        """A part of a loop's header, which is no statement of its own."""
        if isinstance(node, c_ast.DeclList):
            for item in node.decls:
                self._header_declaration(item)
        elif node is not None:
            self.value(node)

    def _header_declaration(self, node: c_ast.Decl) -> None:
        kind = self.type(node.type)
        if node.init is None:
            self._made(self.variable(node.name, kind, node.coord))
        else:
            self._initialised(node, kind)

    def _counting(self, node: c_ast.For) -> tuple[Counting, Any, bool] | None:
        """How the loop counts: with first value and whether the header declares the iterator; None if not surely."""
        form = counting(node, self.constant)
        if form is None or form.bound is None or not form.step or form.name in self._assigned(node.stmt):
            return None
        init, declares = node.init, False
        if isinstance(init, c_ast.DeclList) and len(init.decls) == 1 and init.decls[0].name == form.name:
            kind, first, declares = self.type(init.decls[0].type), init.decls[0].init, True
        elif isinstance(init, c_ast.Assignment) and init.op == "=" and isinstance(init.lvalue, c_ast.ID) \
                and init.lvalue.name == form.name:
            found = self.find(form.name)
            if not isinstance(found, Variable) or found.held != "number":
                return None
            kind, first = found.kind, init.rvalue
        else:
            return None
        declared = (form.name, str(init.decls[0].coord)) if declares else None
        plain = isinstance(kind, Number) and not kind.floating and kind is not BOOL
        if first is None or not plain or ("object", declared) in self.facts:
            return None
        if not steady(form.bound, self._assigned(node.stmt) | {form.name}, self._is_number):
            return None
        return form, first, declares

    def _assigned(self, node: Any) -> set[str]:
        found = self.assigned.get(id(node))
        if found is None:
            found = self.assigned[id(node)] = assigned_in(node, self.assigned)
        return found

    def _is_number(self, name: str) -> bool:
        try:
            found = self.find(name)
        except Unsupported:
            return False
        return not isinstance(found, Variable) or found.held == "number"

    def _ranged(self, node: c_ast.For, form: Counting, first: Any, declares: bool,
                begin: Callable[[str | None], None]) -> None:
        value = self.value(first)
        if declares:
            decl = node.init.decls[0]
            variable = self.variable(form.name, self.type(decl.type), decl.coord)
        else:
            variable = self.find(form.name)
        kind = variable.kind
        assert isinstance(kind, Number)
        low = self.atom(self.number(self.convert(value, kind)))
        bound = self.value(form.bound)
        both = common(kind, bound.kind) if isinstance(bound.kind, Number) else kind
        if both.floating or (kind.signed and not both.signed):
            self.emit(f"{variable.python} = {low}")
            self._general(c_ast.For(None, node.cond, node.next, node.stmt, node.coord), begin)
            return
        stop = self.number(self.convert(bound, both))
        if form.inclusive:
            stop = f"{stop} + 1" if (form.step or 0) > 0 else f"{stop} - 1"
        self._range_loop(node, variable, low, stop, form, declares, begin)

    def _range_loop(self, node: c_ast.For, variable: Variable, low: str, stop: str, form: Counting, declares: bool,
                    begin: Callable[[str | None], None]) -> None:
        kind, name, values = variable.kind, variable.python, self.fresh("values")
        assert isinstance(kind, Number)
        span, step = "machine.meeting" if form.meets else "span", form.step
        self.emit(f"{values} = {span}({low}, {stop}, {step}, {kind.low}, {kind.high})")
        if not declares:
            self.emit(f"{name} = {low}")
        together = node.coord is not None and node.coord.line in self.parallel
        with self.block(f"for {name} in {f'unordered({values})' if together else values}:"):
            begin(name)
            self._body(node.stmt, lambda: None)
        if not declares:
            with self.block("else:"):
                self.emit(f"if {values}: {name} = {values}[-1] + {step}")


def _enumerations(node: Any) -> Iterator[c_ast.Enum]:
    while node is not None and not isinstance(node, (str, list)):
        if isinstance(node, c_ast.Enum):
            yield node
        node = getattr(node, "type", None)


__all__ = ["Operand", "Statements", "iterators_in"]


def _continues(node: Any) -> bool:
    """True if a ``continue`` of a loop around stands in a statement."""
    if node is None or isinstance(node, (c_ast.For, c_ast.While, c_ast.DoWhile)):
        return False
    return isinstance(node, c_ast.Continue) or any(_continues(child) for _, child in node.children())
