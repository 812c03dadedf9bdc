"""Calls: functions of the file, of <math.h>, memory, threads; any other is something that its arguments decide."""

from __future__ import annotations

from abc import abstractmethod
from typing import Any

from pycparser import c_ast

from .expressions import Expressions
from .kinds import DOUBLE, FLOAT, INT, LDOUBLE, LONG, VOID, Number, Pointer, Unsupported, Void
from .tags import known_function
from .writer import Operand

_THREADS = {"omp_get_thread_num": 0, "omp_get_num_threads": 1, "omp_get_max_threads": 1, "omp_in_parallel": 0}
_ALLOCATE = {"malloc": "{0}", "calloc": "{0} * {1}, True", "aligned_alloc": "{1}", "memalign": "{1}"}
_POINTER_TO_ANYTHING = Pointer(VOID)


class Calls(Expressions):
    """Generates code for calls."""

    def _value_FuncCall(self, node: c_ast.FuncCall) -> Operand:
        name = node.name.name if isinstance(node.name, c_ast.ID) else ""
        parts = list(node.args.exprs) if node.args is not None else []
        if name in self.unit.functions:
            return self.own_call(name, [self.value(part) for part in parts])
        special = getattr(self, f"_call_{name.removeprefix('__builtin_')}", None)
        if name in _ALLOCATE:
            return self._allocated(_ALLOCATE[name].format(*(self.integer(self.value(part)) for part in parts)))
        if name in _THREADS:
            return self.plain(_THREADS[name])
        if special is not None:
            found: Operand = special([self.value(part) for part in parts])
            return found
        if any(isinstance(part, c_ast.Constant) and part.type == "string" for part in parts):
            raise Unsupported(f"a call of {name}, which may read or change anything")
        return self._outside(name, [self.value(part) for part in parts])

    @abstractmethod
    def own_call(self, name: str, arguments: list[Operand]) -> Operand:
        """A call of a function of the file."""

    def _outside(self, name: str, arguments: list[Operand]) -> Operand:
        """A function that the file does not define: something that depends on its arguments alone."""
        if not name or not arguments or any(not isinstance(a.kind, Number) for a in arguments):
            raise Unsupported(f"a call of {name or 'a function through a pointer'}, which may read or change anything")
        kind = self._result_of(name)
        table = self.table(known_function(name) or name, kind)
        texts = ", ".join(self.data(self.convert(value, kind)) for value in arguments)
        return Operand(kind, "data", f"{table}[{texts}]")

    def _result_of(self, name: str) -> Number:
        base = known_function(name)
        if base is None or base == name:
            return DOUBLE
        return LDOUBLE if name.endswith("l") else FLOAT

    # ------------------------------------------------------------ integers

    def _call_abs(self, arguments: list[Operand]) -> Operand:
        return self._absolute(arguments, INT)

    def _call_labs(self, arguments: list[Operand]) -> Operand:
        return self._absolute(arguments, LONG)

    _call_llabs = _call_labs

    def _absolute(self, arguments: list[Operand], kind: Number) -> Operand:
        value = self.convert(arguments[0], kind)
        if value.held == "data":
            return Operand(kind, "data", f"{self.table('abs', kind, abs)}[{value.text}]")
        return Operand(kind, "plain", f"abs({value.text})")

    # ------------------------------------------------------------ memory

    def _allocated(self, arguments: str) -> Operand:
        name = self.fresh()
        self.emit(f"{name}_o, {name}_k = machine.allocate({arguments})")
        return Operand(_POINTER_TO_ANYTHING, "pointer", f"{name}_o", f"{name}_k")

    def _call_posix_memalign(self, arguments: list[Operand]) -> Operand:
        where, _, size = arguments
        found, status = self._allocated(self.integer(size)), self.fresh()
        self.emit(f"{status} = 12 if {found.text} is null else 0")
        with self.block(f"if not {status}:"):
            self.emit(f"{where.text}[{where.offset}] = ({found.text}, {found.offset})")
        return Operand(INT, "plain", status)

    def _call_free(self, arguments: list[Operand]) -> Operand:
        self._pointers(arguments)
        self.emit(f"machine.free({arguments[0].text}, {arguments[0].offset})")
        return Operand(VOID, "none", "0")

    def _call_memcpy(self, arguments: list[Operand], overlap: bool = False) -> Operand:
        self._pointers(arguments[:2])
        pairs = ", ".join(f"({a.text}, {a.offset})" for a in arguments[:2])
        self.emit(f"machine.copy({pairs}, {self.integer(arguments[2])}, {overlap})")
        return arguments[0]

    def _call_memmove(self, arguments: list[Operand]) -> Operand:
        return self._call_memcpy(arguments, True)

    def _call_memset(self, arguments: list[Operand]) -> Operand:
        self._pointers(arguments[:1])
        target, value, size = arguments
        if value.text != "0":
            raise Unsupported("memset to anything but 0")
        self.emit(f"machine.clear(({target.text}, {target.offset}), {self.integer(size)})")
        return target

    def _call_assume_aligned(self, arguments: list[Operand]) -> Operand:
        self._pointers(arguments[:1])
        return Operand(_POINTER_TO_ANYTHING, "pointer", arguments[0].text, arguments[0].offset)

    def _call_expect(self, arguments: list[Operand]) -> Operand:
        return self.convert(arguments[0], LONG)

    @staticmethod
    def _pointers(arguments: list[Any]) -> None:
        if any(a.held != "pointer" or isinstance(a.kind, Void) for a in arguments):
            raise Unsupported("a number where a pointer should be")
