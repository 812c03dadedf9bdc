"""The judge's interpreter with a log: runs one C function and tells what a nest of it does.

``Program(text, nest=line).run("smooth", {"n": 4})`` executes the function with sizes by name and logs each statement
instance inside the ``for`` on that line, with the cells that it reads and writes.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pycparser import c_ast

from oracle_text import Undefined, Unsupported, parse
from oracle_values import Instance, LoopAt, Thing
from retile.judge.declarations import Variable
from retile.judge.headers import assigned_in, counting
from retile.judge.kinds import Number
from retile.judge.memory import FAR, Machine, Object, Own
from retile.judge.program import Compiled, FunctionText
from retile.judge.program import Program as Judged
from retile.judge.tags import Book

__all__ = ["LoggedMachine", "Program", "Undefined", "Unsupported"]


class LoggedMachine(Machine):
    """Memory and log of one execution."""

    def __init__(self, *arguments: Any, **options: Any) -> None:
        super().__init__(*arguments, **options)
        self.instances: list[Instance] = []
        self.run = 0  # executions of the nest so far
        self.result: Any = None
        self._accesses: list[tuple[Any, int, bool]] | None = None
        self._things: dict[int, Thing] = {}

    def tell(self, what: Any, offset: int, writes: bool, certain: bool = True) -> None:
        """A cell is accessed."""
        if certain and not -FAR <= offset <= FAR:
            raise Undefined(f"a subscript of {what.name} is far outside any object of a test")
        if self._accesses is not None:
            self._accesses.append((what, offset, writes))

    def begin(self) -> None:
        """A statement of the nest begins."""
        self._accesses = []

    def finish(self, where: tuple[int, int, str], loops: tuple[tuple[Any, ...], ...]) -> None:
        """A statement of the nest ends."""
        accesses = [(self._thing(what), offset, writes) for what, offset, writes in self._accesses or ()]
        self._accesses = None
        kept = [access for access in accesses if not access[0].iterator]
        self.instances.append(Instance(*where, tuple(LoopAt(*loop) for loop in loops), self.run, kept))

    def _thing(self, what: Any) -> Thing:
        if isinstance(what, Thing):
            return what
        found = self._things.get(id(what))
        if found is None:
            type_ = what.whole if isinstance(what, Own) else what.kind
            found = self._things[id(what)] = Thing(what.name, what.where, type_, what.declared, memory=what)
        return found


@dataclass
class _Around:
    """A loop around what is generated."""

    name: str
    line: int
    column: int
    step: int | None
    dependent: bool
    first: str  # the variable that holds the iterator's first value
    iterator: str = "None"


class _Logged(FunctionText):
    """Generates functions that tell what they do."""

    notes = True

    def __init__(self, program: _LoggedProgram, *arguments: Any) -> None:
        super().__init__(program, *arguments)
        self.around: list[_Around] = []
        self.inside = 0  # loops of the nest around what is generated
        self.loops: list[LoopAt] = []
        self.changed: set[str] = set()

    def generate(self, python: str) -> Compiled:
        made = super().generate(python)
        if self.loops:
            self.program.loops = self.loops
        return made

    # ------------------------------------------------------------ accesses

    def note(self, obj: str, key: str, writes: bool) -> None:
        self.emit(f"tell({obj}, {key}, {writes}{', False' if self.uncertain else ''})")

    def note_variable(self, variable: Variable, writes: bool) -> None:
        if not variable.iterator:
            thing = Thing(variable.name, variable.where, variable.kind, variable.declared)
            self.emit(f"tell({self.known(thing, f'thing_{variable.python}_{id(self)}')}, 0, {writes})")

    def both(self, condition: Any) -> bool:
        return self.program.may and self._reads_data(condition)

    def _reads_data(self, node: Any) -> bool:
        """True if the expression reads anything but plain integer variables."""
        if isinstance(node, c_ast.ID):
            found = self.find(node.name)
            return isinstance(found, Variable) and not (isinstance(found.kind, Number) and not found.kind.floating)
        if isinstance(node, (c_ast.ArrayRef, c_ast.FuncCall)):
            return True
        if isinstance(node, c_ast.StructRef):
            with self.apart():
                kind = self.place(node).kind
            return not isinstance(kind, Number) or kind.floating
        return any(self._reads_data(child) for _, child in node.children())

    # ------------------------------------------------------------ instances and loops

    @contextmanager
    def instance(self, node: Any, kind: str) -> Iterator[None]:
        if not self.inside:
            yield
            return
        self.emit("machine.begin()")
        yield
        where = (node.coord.line, node.coord.column, kind)
        loops = "".join(f"({x.name!r}, {x.line}, {x.column}, {x.iterator}, {x.first}, {x.step}, {x.dependent}), "
                        for x in self.around)
        self.emit(f"machine.finish({where!r}, ({loops}))")

    @contextmanager
    def loop(self, node: c_ast.For) -> Iterator[Callable[[str | None], None]]:
        is_nest = node.coord.line == self.program.nest_line and not self.inside
        if is_nest:
            self.changed = assigned_in(node)
            self.emit("machine.run += 1")
        form = counting(node, self.constant)
        name, step = (form.name, form.step) if form else ("?", None)
        used = _names_of_start(node) - {name}
        dependent = bool(self.inside and not is_nest and used & self.changed)
        entry = _Around(name, node.coord.line, node.coord.column, step, dependent, self.fresh("first"))
        self.emit(f"{entry.first} = None")
        if self.inside or is_nest:
            self.loops.append(LoopAt(name, entry.line, entry.column, 0, 0, step, dependent))
        count, outer = self.inside, self.where
        begun = False

        def begin(iterator: str | None) -> None:
            nonlocal begun
            begun = True
            if iterator is None and (count or is_nest):
                raise Unsupported("a loop of the nest has no local iterator")
            if iterator is not None:
                entry.iterator = iterator
                self.emit(f"if {entry.first} is None: {entry.first} = {iterator}")
            self.around.append(entry)
            if count or is_nest:
                self.inside, self.where = count + 1, "block"

        yield begin
        if begun:
            self.around.pop()
        self.inside, self.where = count, outer



def _names_of_start(node: c_ast.For) -> set[str]:
    inits = [decl.init for decl in node.init.decls] if isinstance(node.init, c_ast.DeclList) else [node.init]
    found: set[str] = set()
    waiting = [part for part in inits if part is not None]
    while waiting:
        part = waiting.pop()
        if isinstance(part, c_ast.ID):
            found.add(part.name)
        waiting += [child for _, child in part.children()]
    return found


class _LoggedProgram(Judged):
    """A program whose functions tell what they do; ``may``: branches on data are all taken."""

    text_of = _Logged

    def __init__(self, tree: c_ast.FileAST, nest_line: int | None, may: bool) -> None:
        super().__init__(tree, Book())
        self.nest_line, self.may = nest_line, may
        self.loops: list[LoopAt] = []


class Program:
    """A C file ready to run and to be watched."""

    def __init__(self, text: str, nest: int | None = None, directory: Path | None = None) -> None:
        self._tree, self._nest = parse(text, directory), nest
        self._programs: dict[bool, _LoggedProgram] = {}

    @property
    def loops(self) -> list[LoopAt]:
        """The loops of the nest in text order, without values."""
        return next(iter(self._programs.values())).loops

    def run(self, function: str, sizes: dict[str, int], may: bool = False, steps: int = 2_000_000) -> LoggedMachine:
        """Execute a function; the machine that comes back holds memory and log."""
        if may not in self._programs:
            self._programs[may] = _LoggedProgram(self._tree, self._nest, may)
        program = self._programs[may]
        machine = LoggedMachine(program.book, dict(sizes), steps)
        machine.lenient = may
        program.namespace["tell"] = machine.tell
        result = program.run(function, machine)
        held = program.compiled(function, None).returned
        machine.result = program.book.values[result] if held == "data" and result is not None else result
        return machine


def objects_of(machine: Machine) -> list[Object]:
    """The objects that outlive the function."""
    return list(machine.objects.values())
