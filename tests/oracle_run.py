"""The oracle's statements and functions: runs one C function and logs what a nest of it does.

``Program(text).run("smooth", {"n": 4})`` executes the function with sizes by name; every pointer argument gets an
object of its own whose cells hold invented data.  With ``nest=line`` each statement instance inside the ``for`` on that
line is logged with the cells it reads and writes.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from pycparser import c_ast

from oracle_expressions import Expressions
from oracle_text import INT, NAMED, Array, Function, Number, Pointer, Slot, Struct, Undefined, Unsupported, parse
from oracle_types import Code, Names
from oracle_values import Instance, LoopAt, Machine, Tagged, element_of, tag_of, word

BREAK, CONTINUE, RETURN = "break", "continue", "return"
# name, line, column, slot of the iterator, slot of its first value, step, whether the first value depends on the nest
Around = tuple[str, int, int, int | None, int, int | None, bool]


@dataclass
class _Function:
    node: c_ast.FuncDef
    run: object = None
    slots: int = 0
    parameters: tuple = ()
    lengths: tuple = ()


class Program(Expressions):
    """A C file ready to run."""

    def __init__(self, text: str, nest: int | None = None, directory: Path | None = None) -> None:
        super().__init__()
        self.nest_line = nest
        self.around: list[Around] = []
        self.loops: list[LoopAt] = []  # of the nest, in text order, without values
        self.in_nest = 0  # number of loops of the nest around what is being compiled
        self.returned: object = None
        self.globals = {}
        self.functions = {}
        self.global_declarations: list[c_ast.Decl] = []
        self.changed: set[str] = set()
        self.loop_names: set[str] = set()
        tree = parse(text, directory)
        self.names.scopes = [self.file_scope]
        for node in tree.ext:
            if isinstance(node, c_ast.FuncDef):
                self.functions[node.decl.name] = _Function(node)
            elif isinstance(node, c_ast.Typedef):
                if node.name not in ("bool",) and not _is_prelude(node):
                    self.file_scope[node.name] = ("typedef", self.type(node.type))
            elif isinstance(node, c_ast.Decl) and not isinstance(node.type, c_ast.FuncDecl):
                kind = self.type(node.type)
                if node.name:
                    self.file_scope[node.name] = ("global", node.name, self._completed(kind, node.init))
                    self.global_declarations.append(node)

    # ------------------------------------------------------------ running

    def run(self, function: str, sizes: dict[str, int], may: bool = False, steps: int = 2_000_000) -> Machine:
        """Execute a function; the machine that comes back holds memory and log."""
        machine = self.machine
        machine.__init__(dict(sizes), may=may, steps=steps)  # the compiled code refers to this object
        compiled = self._compiled(function)
        self.globals.clear()
        for node in self.global_declarations:
            self._global(node)
        env: list = [None] * compiled.slots
        arguments = [self._argument(name, kind) for name, kind, _ in compiled.parameters]
        self._enter(compiled, env, arguments)
        compiled.run(env)
        machine.result = self.returned
        return machine

    def _global(self, node: c_ast.Decl) -> None:
        kind = self.file_scope[node.name][2]
        obj = self.machine.new(node.name, "global", element_of(kind))
        self.globals[node.name] = obj
        if node.init is not None:
            for offset, inner, code in self._initial_parts(kind, node.init):
                obj.cells[offset] = self.convert(code[0], inner, code[1])([])

    def _argument(self, name: str, kind: object) -> object:
        machine = self.machine
        if isinstance(kind, Pointer):
            return (machine.new(name, "caller", element_of(kind.to)), 0)
        if isinstance(kind, Number) and not kind.floating:
            if name not in machine.sizes:
                raise Unsupported(f"no value for {name}")
            return machine.sizes[name]
        if isinstance(kind, Number):
            return Tagged((word(name) % 97) / 16.0 - 3.0, hash((3, word(name))))
        raise Unsupported(f"argument {name}")

    def _enter(self, compiled: _Function, env: list, arguments: list) -> None:
        for (name, kind, slot), value in zip(compiled.parameters, arguments, strict=True):
            obj = self.machine.new(name, "local", kind)
            obj.iterator = name in self.loop_names
            obj.cells[0] = value
            env[slot] = obj
        for slot, code in compiled.lengths:
            env[slot] = code(env)

    def own_call(self, name: str, arguments: list) -> tuple[object, Code]:
        returns = self.type(self.functions[name].node.decl.type.type)
        kinds = [self.type(p.type) for p in _parameters(self.functions[name].node)]
        codes = [self.convert(kind, target, code) for (kind, code), target in zip(arguments, kinds, strict=True)]

        def call(env: list) -> object:
            values = [code(env) for code in codes]
            compiled = self._compiled(name)
            inner: list = [None] * compiled.slots
            self._enter(compiled, inner, values)
            compiled.run(inner)
            result, self.returned = self.returned, None
            return result

        return returns, call

    # ------------------------------------------------------------ functions

    def _compiled(self, name: str) -> _Function:
        if name not in self.functions:
            raise Unsupported(f"no function {name}")
        function = self.functions[name]
        if function.run is None:
            saved = (self.names, self.around, self.in_nest, self.changed)
            self.names, self.around, self.in_nest = Names(self.file_scope), [], 0
            self._compile(function)
            self.names, self.around, self.in_nest, self.changed = saved
        return function

    def _compile(self, function: _Function) -> None:
        self.loop_names |= _iterators(function.node.body)
        parameters, lengths = [], []
        self.returns = self.type(function.node.decl.type.type)
        for node in _parameters(function.node):
            kind = self.type(node.type, lengths)
            if isinstance(kind, Array):
                kind = Pointer(kind.of)  # C11 6.7.6.3: the outermost extent of a parameter says nothing
            slot = self.names.slot()
            self.names.scopes[-1][node.name] = ("local", slot, kind)
            parameters.append((node.name, kind, slot))
        function.parameters, function.lengths = tuple(parameters), tuple(lengths)
        function.run = self.statement(function.node.body)
        function.slots = self.names.slots

    # ------------------------------------------------------------ statements

    def statement(self, node: c_ast.Node | None) -> Code:
        """Code that runs a statement and says how it ended (None, break, continue or return)."""
        if node is None or isinstance(node, (c_ast.EmptyStatement, c_ast.Pragma)):
            return lambda env: None
        method = getattr(self, f"_run_{type(node).__name__}", None)
        if method is not None:
            return method(node)
        code = self.value(node)[1]

        def run(env: list) -> None:
            code(env)

        return self._logged(run, node, "statement")

    def _logged(self, code: Code, node: c_ast.Node, kind: str) -> Code:
        """The same code, its accesses logged if it belongs to the nest."""
        if not self.in_nest:
            return code
        machine, around, coord = self.machine, tuple(self.around), node.coord

        def run(env: list) -> object:
            outer = machine.access
            machine.access = accesses = []
            result = code(env)
            machine.access = outer
            loops = tuple(LoopAt(name, line, column, env[slot].cells[0], env[first], step, dependent)
                          for name, line, column, slot, first, step, dependent in around)
            kept = [access for access in accesses if not access[0].iterator]
            machine.instances.append(Instance(coord.line, coord.column, kind, loops, machine.run, kept))
            return result

        return run

    def _run_Compound(self, node: c_ast.Compound) -> Code:
        self.names.scopes.append({})
        parts = [self.statement(item) for item in node.block_items or ()]
        self.names.scopes.pop()

        def run(env: list) -> object:
            for part in parts:
                signal = part(env)
                if signal is not None:
                    return signal
            return None

        return run

    def _run_DeclList(self, node: c_ast.DeclList) -> Code:
        parts = [self.statement(item) for item in node.decls]

        def run(env: list) -> None:
            for part in parts:
                part(env)

        return run

    def _run_Typedef(self, node: c_ast.Typedef) -> Code:
        self.names.scopes[-1][node.name] = ("typedef", self.type(node.type))
        return lambda env: None

    def _run_Decl(self, node: c_ast.Decl) -> Code:
        lengths: list = []
        kind = self.type(node.type, lengths)
        if isinstance(kind, Function) or node.name is None:
            return lambda env: None
        kind = self._completed(kind, node.init)
        if "static" in node.storage:
            return self._static(node, kind)
        slot = self.names.slot()
        self.names.scopes[-1][node.name] = ("local", slot, kind)
        machine, where = self.machine, "block" if self.in_nest else "local"
        parts = self._initial_parts(kind, node.init) if node.init is not None else []
        parts = [(offset, self.convert(code[0], inner, code[1])) for offset, inner, code in parts]
        name, iterator, declared = node.name, node.name in self.loop_names, (node.name, str(node.coord))

        def declare(env: list) -> None:
            for at, code in lengths:
                env[at] = code(env)
            values = [(offset, code(env)) for offset, code in parts]
            obj = machine.new(name, where, kind, declared)
            obj.iterator = iterator
            env[slot] = obj
            for offset, value in values:
                machine.store(obj, offset, value)

        return self._logged(declare, node, "statement") if parts else declare

    def _static(self, node: c_ast.Decl, kind: object) -> Code:
        self.names.scopes[-1][node.name] = ("global", node.name, kind)
        self.file_scope.setdefault(node.name, ("global", node.name, kind))
        self.global_declarations.append(node)
        self._global(node)
        return lambda env: None

    def _completed(self, kind: object, init: c_ast.Node | None) -> object:
        if isinstance(kind, Array) and kind.length is None and isinstance(init, c_ast.InitList):
            return Array(kind.of, len(init.exprs))
        return kind

    def _initial_parts(self, kind: object, init: c_ast.Node | None, offset: int = 0) -> list[tuple[int, object, tuple]]:
        """(offset, type, (type of the value, code)) for every cell that an initialiser sets."""
        if isinstance(kind, Array):
            if isinstance(kind.length, Slot):
                raise Unsupported("initialiser of an array of variable length")
            items = list(init.exprs) if isinstance(init, c_ast.InitList) else []
            size = self.size(kind.of)
            parts = [self._initial_parts(kind.of, items[k] if k < len(items) else None, offset + k * size)
                     for k in range(kind.length)]
            return [part for group in parts for part in group]
        if isinstance(kind, Struct):
            items = list(init.exprs) if isinstance(init, c_ast.InitList) else []
            groups = [self._initial_parts(inner, items[k] if k < len(items) else None, offset + shift)
                      for k, (shift, inner) in enumerate(kind.members.values())]
            return [part for group in groups for part in group]
        if init is None:
            return [(offset, kind, (INT, lambda env: 0))]
        if isinstance(init, c_ast.InitList):
            init = init.exprs[0]
        return [(offset, kind, self.value(init))]

    def _run_If(self, node: c_ast.If) -> Code:
        condition = self._logged(self.condition(node.cond), node.cond, "condition")
        yes, no = self.statement(node.iftrue), self.statement(node.iffalse)
        machine, data = self.machine, self.reads_data(node.cond)

        def run(env: list) -> object:
            if machine.may and data:
                condition(env)
                machine.uncertain += 1
                yes(env)
                no(env)
                machine.uncertain -= 1
                return None
            return yes(env) if condition(env) else no(env)

        return run

    def _run_Return(self, node: c_ast.Return) -> Code:
        if node.expr is None:
            return lambda env: RETURN
        kind, code = self.value(node.expr)
        code = self.convert(kind, self.returns, code)

        def run(env: list) -> str:
            self.returned = code(env)
            return RETURN

        return run

    def _run_Break(self, node: c_ast.Break) -> Code:
        return lambda env: BREAK

    def _run_Continue(self, node: c_ast.Continue) -> Code:
        return lambda env: CONTINUE

    def _run_While(self, node: c_ast.While) -> Code:
        return self._repeat(self.condition(node.cond), self.statement(node.stmt), lambda env: None)

    def _run_DoWhile(self, node: c_ast.DoWhile) -> Code:
        first = [True]
        test, body = self.condition(node.cond), self.statement(node.stmt)

        def condition(env: list) -> bool:
            if first[0]:
                first[0] = False
                return True
            return test(env)

        loop = self._repeat(condition, body, lambda env: None)

        def run(env: list) -> object:
            first[0] = True
            return loop(env)

        return run

    def _repeat(self, condition: Code, body: Code, after: Code) -> Code:
        machine = self.machine

        def run(env: list) -> object:
            while condition(env):
                machine.tick()
                signal = body(env)
                if signal is RETURN:
                    return signal
                if signal is BREAK:
                    break
                after(env)
            return None

        return run

    def _run_For(self, node: c_ast.For) -> Code:
        is_nest = node.coord.line == self.nest_line and not self.in_nest
        if is_nest:
            self.changed = _assigned(node)
        self.names.scopes.append({})
        start = self._unlogged(node.init)
        name, step = _header(node, self.constant)
        first = self.names.slot()
        entry = self._entry(node, name, first, step, is_nest)
        self.around.append(entry)
        if self.in_nest or is_nest:
            self.in_nest += 1
            self.loops.append(LoopAt(*entry[:3], 0, 0, step, entry[6]))
        body = self.statement(node.stmt)
        self.around.pop()
        self.in_nest = max(0, self.in_nest - 1)
        condition = self.condition(node.cond) if node.cond is not None else lambda env: True
        after = self._unlogged(node.next)
        self.names.scopes.pop()
        return self._loop(entry, is_nest, start, self._repeat(condition, self._first(entry, body), after))

    def _entry(self, node: c_ast.For, name: str | None, first: int, step: int | None, is_nest: bool) -> Around:
        slot = self.names.find(name)[1] if name else None
        used = _names(node.init) - {name} if node.init is not None else set()
        if isinstance(node.init, c_ast.DeclList):
            used = set().union(*(_names(d.init) for d in node.init.decls if d.init is not None))
        dependent = bool(self.in_nest and not is_nest and used & self.changed)
        return (name or "?", node.coord.line, node.coord.column, slot, first, step, dependent)

    def _first(self, entry: Around, body: Code) -> Code:
        """The body, which notes the iterator's value the first time it runs."""
        slot, first = entry[3], entry[4]
        if slot is None or not isinstance(slot, int):
            if self.in_nest:
                raise Unsupported("a loop of the nest has no local iterator")
            return body

        def run(env: list) -> object:
            if env[first] is None:
                env[first] = env[slot].cells[0]
            return body(env)

        return run

    def _loop(self, entry: Around, is_nest: bool, start: Code, loop: Code) -> Code:
        machine, first = self.machine, entry[4]

        def run(env: list) -> object:
            if is_nest:
                machine.run += 1
            env[first] = None
            start(env)
            return loop(env)

        return run

    def _unlogged(self, node: c_ast.Node | None) -> Code:
        """A part of a loop's header, which is no statement instance."""
        saved, self.in_nest = self.in_nest, 0
        code = self.statement(node)
        self.in_nest = saved
        return code


# ---------------------------------------------------------------- what a loop header says


def _is_prelude(node: c_ast.Typedef) -> bool:
    return node.name in NAMED


def _parameters(node: c_ast.FuncDef) -> list[c_ast.Decl]:
    arguments = node.decl.type.args
    return [p for p in (arguments.params if arguments else ()) if isinstance(p, c_ast.Decl)]


def _names(node: c_ast.Node) -> set[str]:
    found = {node.name} if isinstance(node, c_ast.ID) else set()
    return found.union(*(_names(child) for _, child in node.children()))


def _assigned(node: c_ast.Node) -> set[str]:
    """Names of variables that are set somewhere inside."""
    found: set[str] = set()
    if isinstance(node, c_ast.Assignment) and isinstance(node.lvalue, c_ast.ID):
        found.add(node.lvalue.name)
    elif isinstance(node, c_ast.UnaryOp) and node.op in ("++", "--", "p++", "p--") and isinstance(node.expr, c_ast.ID):
        found.add(node.expr.name)
    elif isinstance(node, c_ast.Decl) and node.name:
        found.add(node.name)
    return found.union(*(_assigned(child) for _, child in node.children()))


def _iterators(node: c_ast.Node) -> set[str]:
    found: set[str] = set()
    if isinstance(node, c_ast.For):
        name, _ = _header(node, None)
        found = {name} if name else set()
    return found.union(*(_iterators(child) for _, child in node.children()))


def _header(node: c_ast.For, constant: object) -> tuple[str | None, int | None]:
    """The iterator of a ``for`` and its step (None if not a constant)."""
    for part in (node.next, node.cond.left if isinstance(node.cond, c_ast.BinaryOp) else node.cond):
        found = _change(part, constant)
        if found:
            return found
    return None, None


def _change(node: c_ast.Node | None, constant: object) -> tuple[str, int | None] | None:
    if isinstance(node, c_ast.UnaryOp) and node.op in ("++", "p++", "--", "p--") and isinstance(node.expr, c_ast.ID):
        return node.expr.name, 1 if "+" in node.op else -1
    if not isinstance(node, c_ast.Assignment) or not isinstance(node.lvalue, c_ast.ID):
        return None
    name, amount, sign = node.lvalue.name, node.rvalue, 1 if node.op == "+=" else -1
    if node.op == "=" and isinstance(amount, c_ast.BinaryOp) and amount.op in "+-":
        sign = 1 if amount.op == "+" else -1
        own = [isinstance(side, c_ast.ID) and side.name == name for side in (amount.left, amount.right)]
        if own[0]:
            amount = amount.right
        elif own[1] and sign > 0:
            amount = amount.left
        else:
            return name, None
    elif node.op not in ("+=", "-="):
        return None
    try:
        return name, sign * constant(amount) if constant else None
    except Unsupported:
        return name, None


__all__ = ["Program", "Undefined", "Unsupported", "tag_of"]
