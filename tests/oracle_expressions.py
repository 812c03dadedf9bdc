"""The oracle's expressions: a pycparser tree becomes Python closures over a frame.

A frame is a list; a variable's slot holds its Object, other slots hold array lengths and first values of loops.
"""

from __future__ import annotations

import math
from collections.abc import Callable

from pycparser import c_ast

from oracle_text import (DOUBLE, FLOAT, INT, LONG, ULONG, Array, Number, Pointer, Slot, Struct, Undefined, Unsupported,
                         Void, common, promoted)
from oracle_types import Code, Types
from oracle_values import (COMPARE, Machine, Object, Tagged, address_of, calculate, compare, integer_operation,
                           narrowed, plain, tag_of, target_of, to_float, to_integer, truth, word, wrapped)

FAR = 1 << 24  # larger than any array of the tests: what a wrapped unsigned subscript reaches
_MATH = {
    "sqrt": math.sqrt, "fabs": abs, "sin": math.sin, "cos": math.cos, "exp": math.exp, "log": math.log,
    "floor": math.floor, "ceil": math.ceil, "pow": math.pow, "atan2": math.atan2, "hypot": math.hypot,
    "fmax": max, "fmin": min, "abs": abs, "labs": abs, "fmod": math.fmod, "tan": math.tan, "log10": math.log10,
    "fma": lambda a, b, c: a * b + c,
}


def _unknown(*values: float) -> float:
    """A function that the file only declares: something that depends on its arguments alone."""
    return (hash(values) % 1021) / 64.0 - 8.0


class Expressions(Types):
    """Compiles expressions; ``Program`` in oracle_run builds on it."""

    def __init__(self) -> None:
        super().__init__()
        self.machine = Machine({})

    # ------------------------------------------------------------ conversions

    def convert(self, kind: object, target: object, code: Code) -> Code:
        """Code for the value converted to another type."""
        if kind == target or isinstance(target, (Void, Struct)):
            return code
        if isinstance(target, Pointer):
            return code
        if isinstance(kind, Pointer):
            return lambda env: address_of(code(env))
        if not isinstance(kind, Number) or not isinstance(target, Number):
            raise Unsupported(f"conversion of {kind} to {target}")
        if target.floating:
            return to_float(kind, target, code)
        if kind.floating:
            return lambda env: to_integer(code(env), target)
        if target.low <= kind.low and kind.high <= target.high:
            return code
        return lambda env: narrowed(code(env), target)

    # ------------------------------------------------------------ places

    def place(self, node: c_ast.Node) -> tuple[object, Code]:
        """Type and code of an lvalue; the code gives (object, offset)."""
        if isinstance(node, c_ast.ID):
            what = self.names.find(node.name)
            if what[0] == "local":
                slot = what[1]
                return what[2], lambda env: (env[slot], 0)
            if what[0] == "global":
                name = what[1]
                return what[2], lambda env: (self.globals[name], 0)
        elif isinstance(node, c_ast.ArrayRef):
            return self._element(node)
        elif isinstance(node, c_ast.StructRef):
            return self._member(node)
        elif isinstance(node, c_ast.UnaryOp) and node.op == "*":
            kind, code = self.value(node.expr)
            if isinstance(kind, Pointer):
                return kind.to, lambda env: target_of(code(env))
        raise Unsupported(f"lvalue {type(node).__name__}")

    def _element(self, node: c_ast.ArrayRef) -> tuple[object, Code]:
        base_kind, base, extent = self._base(node.name)
        kind, index = self.value(node.subscript)
        if isinstance(kind, Pointer) or kind.floating:
            raise Unsupported("subscript")
        size = self.size(base_kind)
        machine = self.machine
        limit = (lambda env: env[extent.index]) if isinstance(extent, Slot) else (lambda env: extent)

        def element(env: list) -> tuple[Object, int]:
            obj, offset = target_of(base(env))
            at = index(env)
            if type(at) is not int:
                at = at.v
            end = limit(env)
            if at >= 1 << 63:
                at -= 1 << 64  # what a wrapped size_t reaches on every machine with 64-bit addresses
            if end is None and abs(at) > FAR and not machine.uncertain:
                raise Undefined(f"subscript {at} of {obj.name} is far outside any object of a test")
            if end is not None and not 0 <= at < end and not machine.uncertain:
                raise Undefined(f"subscript {at} of {obj.name} is outside 0..{end}-1")
            return obj, offset + at * (size if type(size) is int else size(env))

        return base_kind, element

    def _base(self, node: c_ast.Node) -> tuple[object, Code, object]:
        """Element type, code for the address, and the declared extent of what is subscripted."""
        try:
            kind, place = self.place(node)
        except Unsupported:
            kind, place = None, None
        if isinstance(kind, Array):
            return kind.of, place, kind.length
        kind, code = self.value(node)
        if not isinstance(kind, Pointer):
            raise Unsupported("subscript of no array")
        return kind.to, code, kind.extent

    def _member(self, node: c_ast.StructRef) -> tuple[object, Code]:
        if node.type == "->":
            kind, code = self.value(node.name)
            kind = kind.to if isinstance(kind, Pointer) else None
        else:
            kind, code = self.place(node.name)
        if not isinstance(kind, Struct) or node.field.name not in kind.members:
            raise Unsupported(f"member {node.field.name}")
        shift, inner = kind.members[node.field.name]

        def member(env: list) -> tuple[Object, int]:
            obj, offset = target_of(code(env))
            return obj, offset + shift

        return inner, member

    # ------------------------------------------------------------ values

    def value(self, node: c_ast.Node) -> tuple[object, Code]:
        """Type and code of an expression's value; arrays decay to pointers."""
        method = getattr(self, f"_value_{type(node).__name__}", None)
        if method is None:
            raise Unsupported(type(node).__name__)
        return method(node)

    def load(self, kind: object, place: Code) -> tuple[object, Code]:
        """The value that stands at a place."""
        if isinstance(kind, Array):
            return Pointer(kind.of, kind.length), place
        if isinstance(kind, Struct):
            return kind, place
        machine = self.machine

        def load(env: list) -> object:
            obj, offset = place(env)
            return machine.load(obj, offset, kind)

        return kind, load

    def _value_ID(self, node: c_ast.ID) -> tuple[object, Code]:
        if node.name in ("true", "false"):
            value = int(node.name == "true")
            return INT, lambda env: value
        what = self.names.find(node.name)
        if what[0] == "constant":
            return INT, lambda env: what[1]
        return self.load(*self.place(node))

    def _value_ArrayRef(self, node: c_ast.ArrayRef) -> tuple[object, Code]:
        return self.load(*self.place(node))

    _value_StructRef = _value_ArrayRef

    def _value_Constant(self, node: c_ast.Constant) -> tuple[object, Code]:
        kind, value = self.literal(node)
        return kind, lambda env: value

    def _value_Cast(self, node: c_ast.Cast) -> tuple[object, Code]:
        kind, code = self.value(node.expr)
        target = self.type(node.to_type)
        return target, self.convert(kind, target, code)

    def _value_ExprList(self, node: c_ast.ExprList) -> tuple[object, Code]:
        parts = [self.value(part) for part in node.exprs]

        def run(env: list) -> object:
            for _, code in parts[:-1]:
                code(env)
            return parts[-1][1](env)

        return parts[-1][0], run

    def _value_UnaryOp(self, node: c_ast.UnaryOp) -> tuple[object, Code]:
        if node.op == "sizeof":
            return ULONG, self._sizeof(node.expr)
        if node.op == "&":
            kind, place = self.place(node.expr)
            return Pointer(kind), place
        if node.op == "*":
            return self.load(*self.place(node))
        if node.op in ("++", "--", "p++", "p--"):
            return self._increment(node)
        kind, code = self.value(node.expr)
        if node.op == "!":
            return INT, lambda env: 0 if truth(code(env)) else 1
        target = promoted(kind)
        code = self.convert(kind, target, code)
        if node.op == "+":
            return target, code
        mark = word("negate" if node.op == "-" else "complement")

        def run(env: list) -> object:
            value = code(env)
            if type(value) is int:
                return wrapped(~value, target) if node.op == "~" else integer_operation("-", 0, value, target, True)
            return Tagged(-value.v if node.op == "-" else ~value.v, hash((mark, value.t)))

        return target, run

    def _sizeof(self, node: c_ast.Node) -> Code:
        if isinstance(node, c_ast.Typename):
            size = self.size(self.type(node))
        else:
            try:
                size = self.size(self.place(node)[0])
            except Unsupported:
                size = self.size(self.value(node)[0])
        return (lambda env: size) if isinstance(size, int) else size

    def _increment(self, node: c_ast.UnaryOp) -> tuple[object, Code]:
        kind, place = self.place(node.expr)
        change = self._arithmetic("+" if "+" in node.op else "-", kind, INT)
        machine, after = self.machine, not node.op.startswith("p")

        def run(env: list) -> object:
            obj, offset = place(env)
            old = machine.load(obj, offset, kind)
            new = change(env, old, 1)
            machine.store(obj, offset, new)
            return new if after else old

        return kind, run

    def _arithmetic(self, operator: str, kind: object, other: object) -> Callable[[list, object, object], object]:
        """``left = left op right`` on values, the result in the type of the left operand."""
        if isinstance(kind, Pointer):
            size = self.size(kind.to)
            sign = 1 if operator == "+" else -1
            return lambda env, a, b: (a[0], a[1] + sign * plain(b) * (size if type(size) is int else size(env)))
        both = common(kind, other) if operator not in ("<<", ">>") else promoted(kind)
        box: list = [None, None]
        left = self.convert(kind, both, lambda env: box[0])
        right = self.convert(other, both if operator not in ("<<", ">>") else promoted(other), lambda env: box[1])
        result = self.convert(both, kind, lambda env: box[0])

        def apply(env: list, a: object, b: object) -> object:
            box[0], box[1] = a, b
            box[0] = calculate(operator, left(env), right(env), both)
            return result(env)

        return apply

    def _value_Assignment(self, node: c_ast.Assignment) -> tuple[object, Code]:
        kind, place = self.place(node.lvalue)
        source, code = self.value(node.rvalue)
        machine = self.machine
        if isinstance(kind, Struct):
            return kind, lambda env: self._copy(kind, code(env), place(env))
        if node.op == "=":
            code = self.convert(source, kind, code)

            def assign(env: list) -> object:
                value = code(env)
                obj, offset = place(env)
                machine.store(obj, offset, value)
                return value

            return kind, assign
        change = self._arithmetic(node.op[:-1], kind, source)

        def update(env: list) -> object:
            operand = code(env)
            obj, offset = place(env)
            value = change(env, machine.load(obj, offset, kind), operand)
            machine.store(obj, offset, value)
            return value

        return kind, update

    def _copy(self, kind: Struct, source: tuple, target: tuple) -> tuple:
        for shift, inner in kind.members.values():
            if isinstance(inner, Struct):
                self._copy(inner, (source[0], source[1] + shift), (target[0], target[1] + shift))
                continue
            count = inner.length if isinstance(inner, Array) else 1
            item = inner.of if isinstance(inner, Array) else inner
            for k in range(count):
                value = self.machine.load(source[0], source[1] + shift + k * item.size, item)
                self.machine.store(target[0], target[1] + shift + k * item.size, value)
        return target

    def _value_TernaryOp(self, node: c_ast.TernaryOp) -> tuple[object, Code]:
        condition = self.condition(node.cond)
        (a_kind, a), (b_kind, b) = self.value(node.iftrue), self.value(node.iffalse)
        kind = a_kind
        if isinstance(a_kind, Number) and isinstance(b_kind, Number):
            kind = common(a_kind, b_kind)
            a, b = self.convert(a_kind, kind, a), self.convert(b_kind, kind, b)
        machine, data = self.machine, self.reads_data(node.cond)

        def run(env: list) -> object:
            chosen, other = (a, b) if condition(env) else (b, a)
            if not (machine.may and data):
                return chosen(env)
            machine.uncertain += 1
            other(env)
            result = chosen(env)
            machine.uncertain -= 1
            return result

        return kind, run

    def _value_BinaryOp(self, node: c_ast.BinaryOp) -> tuple[object, Code]:
        if node.op in ("&&", "||"):
            return INT, self._logical(node)
        (a_kind, a), (b_kind, b) = self.value(node.left), self.value(node.right)
        if isinstance(a_kind, Pointer) or isinstance(b_kind, Pointer):
            return self._pointers(node.op, a_kind, a, b_kind, b)
        operator = node.op
        if operator in ("<<", ">>"):
            kind, other = promoted(a_kind), promoted(b_kind)
        else:
            kind = other = common(a_kind, b_kind)
        a, b = self.convert(a_kind, kind, a), self.convert(b_kind, other, b)
        if operator in COMPARE:
            return INT, lambda env: compare(operator, a(env), b(env))
        return kind, lambda env: calculate(operator, a(env), b(env), kind)

    def _logical(self, node: c_ast.BinaryOp) -> Code:
        a, b = self.condition(node.left), self.condition(node.right)
        machine, stop, data = self.machine, node.op == "||", self.reads_data(node.left)

        def run(env: list) -> int:
            first = a(env)
            if not (machine.may and data):
                return int(first) if first == stop else int(b(env))
            machine.uncertain += 1
            second = b(env)
            machine.uncertain -= 1
            return int(first) if first == stop else int(second)

        return run

    def _pointers(self, operator: str, a_kind: object, a: Code, b_kind: object, b: Code) -> tuple[object, Code]:
        if operator in COMPARE:
            return INT, lambda env: int(COMPARE[operator](address_of(a(env)), address_of(b(env))))
        if isinstance(a_kind, Pointer) and isinstance(b_kind, Pointer):
            size = self.size(a_kind.to)
            each = (lambda env: size) if isinstance(size, int) else size
            return LONG, lambda env: (address_of(a(env)) - address_of(b(env))) // each(env)
        if isinstance(b_kind, Pointer):
            a_kind, a, b_kind, b = b_kind, b, a_kind, a
        move = self._arithmetic(operator, a_kind, b_kind)
        return Pointer(a_kind.to), lambda env: move(env, a(env), b(env))

    def condition(self, node: c_ast.Node) -> Code:
        """Code that gives True or False."""
        code = self.value(node)[1]
        return lambda env: truth(code(env))

    def reads_data(self, node: c_ast.Node) -> bool:
        """True if the expression reads anything but plain integer variables."""
        if isinstance(node, c_ast.ID):
            what = self.names.find(node.name)
            return what[0] in ("local", "global") and not (isinstance(what[2], Number) and not what[2].floating)
        if isinstance(node, (c_ast.ArrayRef, c_ast.FuncCall)):
            return True
        if isinstance(node, c_ast.StructRef):
            return not isinstance(self.place(node)[0], Number) or self.place(node)[0].floating
        return any(self.reads_data(child) for _, child in node.children())

    def _value_FuncCall(self, node: c_ast.FuncCall) -> tuple[object, Code]:
        name = node.name.name if isinstance(node.name, c_ast.ID) else ""
        arguments = [self.value(part) for part in (node.args.exprs if node.args else ())]
        if name in self.functions:
            return self.own_call(name, arguments)
        base = name[:-1] if name not in _MATH and name.endswith("f") else name
        kind = FLOAT if base != name else DOUBLE
        if base in ("abs", "labs"):
            kind = INT if base == "abs" else LONG
        function, mark = _MATH.get(base, _unknown), word(name)
        codes = [self.convert(k, kind, c) for k, c in arguments]

        def call(env: list) -> object:
            values = [code(env) for code in codes]
            if all(type(v) is int for v in values):
                return function(*values)
            try:
                result = function(*(plain(v) for v in values))
            except (ValueError, OverflowError):
                result = math.nan
            return Tagged(float(result) if kind.floating else result, hash((mark, *map(tag_of, values))))

        return kind, call

    # supplied by Statements
    functions: dict
    globals: dict

    def own_call(self, name: str, arguments: list) -> tuple[object, Code]:
        raise NotImplementedError
