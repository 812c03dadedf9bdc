"""A C file ready to run: its functions become Python functions when somebody calls them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from pycparser import c_ast

from .arithmetic import outside, overflow, quotient, remainder, shifted_left, shifted_right
from .declarations import Unit, Variable
from .headers import iterators_in
from .kinds import Array, Kind, Length, Number, Pointer, Struct, TooLong, Undefined, Unsupported, Void, constant_size
from .memory import Machine, Object, fitting
from .places import Again
from .statements import Statements
from .tags import UNSET, Book
from .writer import Operand, Place, identifier


@dataclass(frozen=True)
class Compiled:
    """A function of the file for arguments that are held in certain ways."""

    python: str  # its name
    returns: Kind
    returned: str  # how the result is held
    parameters: tuple[tuple[str, Kind, str], ...]  # name, type, how the argument is held
    text: str = ""


class FunctionText(Statements):
    """Generates the text of one function."""

    def __init__(self, program: Program, node: c_ast.FuncDef, held: tuple[str, ...] | None,
                 facts: set[tuple[str, int]]) -> None:
        super().__init__(program.unit, program.book, program.namespace, facts)
        self.program, self.node, self.held = program, node, held
        self.iterators = iterators_in(node.body)
        self.parallel, self.watched, self.assigned = program.parallel, program.watched, program.assigned
        self.parameters: list[tuple[str, Kind, str]] = []

    def generate(self, python: str) -> Compiled:
        """The function; its text defines the Python function of that name."""
        self.scopes.append({})
        self.returns = self.type(self.node.decl.type.type)
        self.returned = self._how_returned()
        heads = [self._parameter(number, decl) for number, decl in enumerate(_parameters(self.node))]
        self.statement(self.node.body)
        if not self.lines:
            self.emit("pass")
        text = "\n".join([f"def {python}({', '.join(heads)}):", *self.lines, ""])
        return Compiled(python, self.returns, self.returned, tuple(self.parameters), text)

    def _how_returned(self) -> str:
        if isinstance(self.returns, (Void, Struct)):
            return "none"
        if isinstance(self.returns, Pointer):
            return "pointer"
        floating = isinstance(self.returns, Number) and self.returns.floating
        return "data" if floating or ("returns data", 0) in self.facts else "plain"

    def _parameter(self, number: int, decl: c_ast.Decl) -> str:
        """Declare a parameter; what stands for it in the function's head."""
        kind = self.type(decl.type)
        if isinstance(kind, Array):
            kind = Pointer(kind.of)  # C11 6.7.6.3: the outermost extent of a parameter says nothing
        if isinstance(kind, Struct):
            raise Unsupported("a structure as an argument")
        variable = self.variable(decl.name, kind, decl.coord)
        if self.held is not None and number < len(self.held) and self.held[number] == "data" and not variable.iterator:
            variable.data = True
        held = "pointer" if isinstance(kind, Pointer) else "data" if variable.data else "plain"
        self.parameters.append((decl.name, kind, held))
        name = variable.python
        if isinstance(kind, Pointer) and isinstance(kind.to, Array) and variable.held == "pointer":
            self.emit(f"{name}_o.shape = ({self._lengths(kind.to)})")
        if variable.held == "object":
            argument = f"argument{number}"
            self._made(variable)
            operand = Operand(kind, held, argument + ("_o" if held == "pointer" else ""), f"{argument}_k")
            self.store(Place(kind, name, "0", private=True), operand)
            return f"{argument}_o, {argument}_k" if held == "pointer" else argument
        return f"{name}_o, {name}_k" if held == "pointer" else name

    def _lengths(self, kind: Kind) -> str:
        """The lengths of an array's dimensions, as the inside of a tuple."""
        texts = ""
        while isinstance(kind, Array):
            texts += f"{kind.length.name if isinstance(kind.length, Length) else kind.length or 0}, "
            kind = kind.of
        return texts

    def own_call(self, name: str, arguments: list[Operand]) -> Operand:
        """A call of a function of the file, generated for the way in which its arguments are held."""
        kinds = [self.program.parameter_kind(decl) for decl in _parameters(self.program.unit.functions[name])]
        if len(kinds) != len(arguments):
            raise Unsupported(f"a call of {name} with another number of arguments than it has")
        given = [self.convert(value, kind) if kind is not None else value
                 for value, kind in zip(arguments, kinds, strict=True)]
        target = self.program.compiled(name, tuple(value.held for value in given))
        texts = []
        for value, (_, _, held) in zip(given, target.parameters, strict=True):
            if held == "pointer":
                texts += [value.text, value.offset]
            else:
                texts.append(self.data(value) if held == "data" else self.number(value))
        call = f"{target.python}({', '.join(texts)})"
        if target.returned == "none":
            self.emit(call)
            return Operand(target.returns, "none", "0")
        result = self.fresh()
        if target.returned == "pointer":
            self.emit(f"{result}_o, {result}_k = {call}")
            return Operand(target.returns, "pointer", f"{result}_o", f"{result}_k")
        self.emit(f"{result} = {call}")
        return Operand(target.returns, target.returned, result)

    def static(self, node: c_ast.Decl, kind: Kind) -> None:
        """A variable of the function that keeps its value: an object of the file."""
        key = f"{self.node.decl.name}.{node.name}"
        variable = Variable(node.name, f"s_{identifier(key)}", kind, "object", "static", declared=key)
        self.program.statics[key] = (variable, node)
        self.scopes[-1][node.name] = variable


class Program:
    """A translation unit that can be run."""

    text_of = FunctionText

    def __init__(self, tree: c_ast.FileAST, book: Book, parallel: frozenset[int] = frozenset(),
                 watched: int | None = None) -> None:
        self.book, self.parallel = book, parallel  # lines of loops whose iterations may run in any order
        self.watched = watched  # line of a loop of which the machine notes that it was reached
        self.unit = Unit(tree)
        self.assigned: dict[int, set[str]] = {}  # names that statements set, by the identity of the statement
        self.statics: dict[str, tuple[Variable, c_ast.Decl]] = {}
        self.namespace: dict[str, Any] = {
            "integers": book.integers, "reals": book.reals, "values": book.values, "real": book.real, "UNSET": UNSET,
            "put": dict.__setitem__, "outside": outside, "overflow": overflow, "quotient": quotient,
            "remainder": remainder, "shifted_left": shifted_left, "shifted_right": shifted_right, "abs": abs,
            "float": float,
        }
        self._compiled: dict[tuple[str, tuple[str, ...] | None], Compiled | None] = {}
        self._starters: dict[str, Any] = {}

    # ------------------------------------------------------------ generating

    def parameter_kind(self, decl: c_ast.Decl) -> Kind | None:
        """The type that an argument is converted to; None for arrays, which are passed as they are."""
        node = decl.type
        if isinstance(node, c_ast.ArrayDecl):
            return None
        probe = FunctionText(self, c_ast.FuncDef(decl, None, c_ast.Compound([])), None, set())
        try:
            return probe.type(node)
        except Unsupported:
            return None  # a pointer to an array whose length is another parameter

    def compiled(self, name: str, held: tuple[str, ...] | None) -> Compiled:
        """The Python function of a C function; Unsupported if something in it is not interpreted."""
        if name not in self.unit.functions:
            raise Unsupported(f"the function {name}, which is not in this file")
        key = (name, held)
        if key in self._compiled:
            found = self._compiled[key]
            if found is None:
                raise Unsupported(f"the function {name}, which calls itself")
            return found
        self._compiled[key] = None
        try:
            found = self._generated(name, held)
            code = compile(found.text, f"<{name}>", "exec")
        except (RecursionError, SyntaxError, MemoryError):
            del self._compiled[key]
            raise Unsupported("loops or expressions that are nested too deep") from None
        except BaseException:
            del self._compiled[key]
            raise
        exec(code, self.namespace)
        self._compiled[key] = found
        return found

    def _generated(self, name: str, held: tuple[str, ...] | None) -> Compiled:
        """Generate a function, again while facts about its variables come to light."""
        facts: set[tuple[str, int]] = set()
        python = f"f_{identifier(name)}_{len(self._compiled)}"
        while True:
            known = len(facts)
            try:
                made = self.text_of(self, self.unit.functions[name], held, facts).generate(python)
                if len(facts) == known:
                    return made
            except Again:
                if len(facts) == known:
                    raise Unsupported("a variable whose address is taken") from None

    # ------------------------------------------------------------ running

    def run(self, function: str, machine: Machine) -> Any:
        """Execute a function with arguments of the machine's invention; its result (see ``FunctionText``).

        Raises Undefined, TooLong or Unsupported.
        """
        compiled = self.compiled(function, None)
        self._prepare(machine)
        try:
            return self.namespace[compiled.python](*self._arguments(compiled, machine))
        except RecursionError:
            raise Unsupported("expressions that are nested too deep") from None
        except (MemoryError, OverflowError):
            raise TooLong from None

    def _prepare(self, machine: Machine) -> None:
        names = self.namespace
        names.update(machine=machine, span=machine.values, tick=machine.tick, unordered=machine.unordered,
                     null=machine.null)
        for variable in self.unit.globals.values():
            names[variable.python] = self._object(variable, machine)
        for key, (variable, _) in self.statics.items():
            obj = machine.own(variable.name, "static", variable.kind, constant_size(variable.kind), key)
            machine.statics[key] = obj
            obj.cleared = True
            names[variable.python] = obj
        for variable, init in [*((v, self.unit.global_nodes[v.name].init) for v in self.unit.globals.values()),
                               *((v, node.init) for v, node in self.statics.values())]:
            if init is not None:
                self._start(variable, init)()

    @staticmethod
    def _object(variable: Variable, machine: Machine) -> Object:
        return machine.outer(variable.name, "global", variable.kind)[0]

    def _start(self, variable: Variable, init: Any) -> Any:
        """The Python function that gives a variable of the file its initial value."""
        python = f"start_{variable.python}"
        if python not in self._starters:
            writer = FunctionText(self, c_ast.FuncDef(None, None, c_ast.Compound([])), None, set())
            if isinstance(init, c_ast.InitList):
                writer.filled(variable, init)
            else:
                writer.store(Place(variable.kind, variable.python, "0"), writer.value(init))
            writer.emit(f"{variable.python}.writes.clear()")
            text = "\n".join([f"def {python}():", *writer.lines, ""])
            exec(compile(text, "<start>", "exec"), self.namespace)
            self._starters[python] = self.namespace[python]
        return self._starters[python]

    def _arguments(self, compiled: Compiled, machine: Machine) -> list[Any]:
        given: list[Any] = []
        for name, kind, held in compiled.parameters:
            if isinstance(kind, Pointer):
                given += machine.outer(name, "caller", kind.to)
            elif isinstance(kind, Number) and kind.floating:
                given.append(self.book.initial_reals[name, "parameter"])
            else:
                value = machine.size(name, True)
                if value is None:
                    raise Unsupported(f"no value for {name}")
                fitting(name, value, kind)
                given.append(self.book.integers[value] if held == "data" else value)
        return given


def _parameters(node: c_ast.FuncDef) -> list[c_ast.Decl]:
    arguments = node.decl.type.args
    return [p for p in (arguments.params if arguments else ()) if isinstance(p, c_ast.Decl)]


__all__ = ["Compiled", "FunctionText", "Program", "Undefined"]
