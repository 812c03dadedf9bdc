"""From C expressions to Python text: operands that are tags, integers or pointers.

An expression becomes lines for what has effects, reads memory or may be undefined, and a text for its value.
"""

from __future__ import annotations

import math
import struct
from collections.abc import Callable
from typing import Any

from pycparser import c_ast, c_generator

from .arithmetic import COMPARE, exact, integer_work, wrapped
from .declarations import Alias, Constant, Declarations, Unit, Variable, literal
from .kinds import (DOUBLE, FLOAT, INT, LONG, ULONG, Array, Kind, Length, Number, Pointer, Struct, Undefined,
                    Unsupported, Void, alike, cells_of, common, element_of, promoted)
from .tags import EXTREMES, Book, Operation
from .writer import Operand, Place, Writer


class Again(Exception):
    """The function has to be generated anew: a fact about one of its variables came to light."""


class Expressions(Declarations, Writer):
    """Generates code for expressions; ``Statements`` builds on it."""

    def __init__(self, unit: Unit, book: Book, namespace: dict[str, Any], facts: set[tuple[str, int]]) -> None:
        Declarations.__init__(self, unit)
        Writer.__init__(self)
        self.book, self.namespace, self.facts = book, namespace, facts
        self.uncertain = 0  # how many conditions stand around what is only run because both branches are wanted

    # ------------------------------------------------------------ hooks for those who want to know every access

    def note(self, obj: str, key: str, writes: bool) -> None:
        """A cell of memory is accessed."""

    def note_variable(self, variable: Variable, writes: bool) -> None:
        """A variable that lives in a Python variable is accessed."""

    def both(self, condition: Any) -> bool:
        """True if both branches of a condition are to be run."""
        return False

    # ------------------------------------------------------------ helpers

    def learn(self, fact: str, variable: Variable) -> None:
        """Note a fact about a variable's declaration, for the next time the function is generated."""
        self.facts.add((fact, variable.declared))

    def table(self, name: str, kind: Number, work: Callable[..., int] | None = None, reals: bool = False) -> str:
        """The name of an operation's table in the generated code."""
        found = self.book.operation(name, kind, work, reals)
        return self.known(found, found.python)

    def known(self, value: Any, name: str) -> str:
        """A name in the generated code for a value of ours."""
        self.namespace[name] = value
        return name

    def kind_name(self, kind: Kind) -> str:
        """A name in the generated code for a type."""
        return self.known(kind, f"kind_{id(kind)}")

    def plain(self, value: int, kind: Kind = INT) -> Operand:
        """A constant."""
        return Operand(kind, "plain", str(value))

    def data(self, operand: Operand) -> str:
        """The tag of a number."""
        if operand.held == "data":
            return operand.text
        if operand.held != "plain":
            raise Unsupported("a pointer where a number should be")
        value = _integer(operand.text)
        return f"integers[{operand.text}]" if value is None else str(self.book.integers[value])

    def number(self, operand: Operand) -> str:
        """The plain number that an operand is."""
        if operand.held == "plain":
            return operand.text
        if operand.held != "data" or not isinstance(operand.kind, Number):
            raise Unsupported("a pointer where a number should be")
        return f"real({operand.text})" if operand.kind.floating else f"values[{operand.text}]"

    def integer(self, operand: Operand) -> str:
        """The value of an integer, for subscripts and lengths."""
        if not isinstance(operand.kind, Number) or operand.kind.floating:
            raise Unsupported("a subscript that is no integer")
        return self.number(operand)

    def _signed(self, text: str, kind: Kind) -> str:
        """A subscript, where it may have wrapped: what it reaches on machines whose addresses have 64 bits."""
        if not isinstance(kind, Number) or kind.signed or kind.size < 8 or text.isdigit():
            return text
        text = self.atom(text)
        return f"({text} - {1 << 64} if {text} >= {1 << 63} else {text})"

    def size_text(self, kind: Kind) -> str:
        """Bytes of a type."""
        if not isinstance(kind, Array):
            return str(kind.size)
        length = kind.length.name if isinstance(kind.length, Length) else str(kind.length)
        inner = self.size_text(kind.of)
        if inner.isdigit() and length.isdigit():
            return str(int(inner) * int(length))
        return f"({length} * {inner})"

    # ------------------------------------------------------------ conversions

    def convert(self, value: Operand, target: Kind) -> Operand:
        """The value in another type."""
        kind = value.kind
        if kind == target or isinstance(target, (Void, Struct)):
            return value
        if isinstance(target, Pointer):
            return self._to_pointer(value, target)
        if not isinstance(target, Number):
            raise Unsupported("a conversion to this type")
        if value.held == "pointer":
            if target.name == "_Bool":
                return Operand(target, "plain", f"(1 if {value.text} else 0)")
            if target.floating:
                raise Unsupported("a pointer as a number")
            return Operand(target, "plain", f"({value.text}.base + {value.offset})")
        if not isinstance(kind, Number):
            raise Unsupported("the value of a call that has none")
        if value.held == "plain":
            return self._plain_to(value, kind, target)
        return Operand(target, "data", self._data_to(value, kind, target))

    def _to_pointer(self, value: Operand, target: Pointer) -> Operand:
        if value.held == "plain" and value.text == "0":
            return Operand(target, "pointer", "null", "0")
        if value.held != "pointer" or not isinstance(value.kind, Pointer):
            raise Unsupported("a number as a pointer")
        was, wanted = element_of(value.kind.to), element_of(target.to)
        if not isinstance(wanted, Void) and not alike(was, wanted) and not self.uncertain:
            self.emit(f"{value.text}.seen_as({self.kind_name(wanted)})")
        return Operand(target, "pointer", value.text, value.offset)

    def _plain_to(self, value: Operand, kind: Number, target: Number) -> Operand:
        constant = _integer(value.text)
        if target.floating:
            text = f"reals[float({value.text})]" if constant is None else str(self.book.reals[float(constant)])
            return Operand(target, "data", text)
        if constant is not None:
            return Operand(target, "plain", str(wrapped(constant, target)))
        if target.name == "_Bool":
            return Operand(target, "plain", f"(1 if {value.text} else 0)")
        if target.low <= kind.low and kind.high <= target.high:
            return Operand(target, "plain", value.text)
        mask = (1 << 8 * target.size) - 1
        if not target.signed:
            return Operand(target, "plain", f"({value.text} & {mask})")
        half = target.high + 1
        return Operand(target, "plain", f"((({value.text}) + {half} & {mask}) - {half})")

    def _data_to(self, value: Operand, kind: Number, target: Number) -> str:
        if target.floating:
            if kind.floating and target.size >= kind.size:
                return value.text
            return f"{self.table('convert', target)}[{value.text}]"
        if kind.floating:
            return f"{self.table('truncate', target, lambda a: _truncated(a, target), True)}[{value.text}]"
        if target.low <= kind.low and kind.high <= target.high and target.name != "_Bool":
            return value.text
        return f"{self.table('convert', target, lambda a: wrapped(a, target))}[{value.text}]"

    # ------------------------------------------------------------ places

    def place(self, node: Any) -> Place | Variable:
        """An lvalue; a Variable where that lives in the generated code's own variables."""
        match node:
            case c_ast.ID():
                found = self.find(node.name)
                if isinstance(found, Variable):
                    return self._of_variable(found) if found.held == "object" else found
            case c_ast.ArrayRef():
                return self._element(node)
            case c_ast.StructRef():
                return self._member(node)
            case c_ast.UnaryOp(op="*"):
                pointer = self.value(node.expr)
                if pointer.held == "pointer" and isinstance(pointer.kind, Pointer):
                    return Place(pointer.kind.to, pointer.text, pointer.offset, name="what a pointer leads to")
            case c_ast.Cast() | c_ast.CompoundLiteral():
                raise Unsupported("a compound literal")
        raise Unsupported(f"an lvalue of the kind {type(node).__name__}")

    def _of_variable(self, variable: Variable) -> Place:
        private = variable.where in ("local", "block") and not variable.exposed
        return Place(variable.kind, variable.python, "0", name=variable.name, private=private)

    def memory(self, node: Any) -> Place:
        """An lvalue in memory; a variable whose address is taken gets memory."""
        found = self.place(node)
        if isinstance(found, Variable):
            self.learn("object", found)
            raise Again
        return found

    def _element(self, node: c_ast.ArrayRef) -> Place:
        base = self._base(node.name)
        index = self.value(node.subscript)
        text = self.integer(index)
        text = self._signed(text, index.kind)
        if isinstance(base, Operand):
            assert isinstance(base.kind, Pointer)
            return Place(base.kind.to, base.text, base.offset, text, name=base.text)
        assert isinstance(base.kind, Array)
        length = base.kind.length
        limit = length.name if isinstance(length, Length) else length
        if limit is not None and not self.uncertain:
            value = _integer(text)
            if value is None or not isinstance(limit, int) or not 0 <= value < limit:
                text = self.atom(text)
                self.emit(f"if not 0 <= {text} < {limit}: outside({base.name!r}, {text})")
        if base.index:
            text = f"({base.index}) * {limit} + {text}"
        return Place(base.kind.of, base.object, base.offset, text, name=base.name, private=base.private)

    def _base(self, node: Any) -> Place | Operand:
        """What is subscripted: an array, or a pointer."""
        if isinstance(node, (c_ast.ID, c_ast.ArrayRef, c_ast.StructRef)) or \
                (isinstance(node, c_ast.UnaryOp) and node.op == "*"):
            found = self.place(node)
            if isinstance(found, Place) and isinstance(found.kind, Array):
                return found
            value = self.load(found)
        else:
            value = self.value(node)
        if value.held != "pointer" or not isinstance(value.kind, Pointer):
            raise Unsupported("a subscript of something that is no array")
        return value

    def _member(self, node: c_ast.StructRef) -> Place:
        if node.type == "->":
            pointer = self.value(node.name)
            if pointer.held != "pointer" or not isinstance(pointer.kind, Pointer):
                raise Unsupported("a member of something that is no structure")
            base = Place(pointer.kind.to, pointer.text, pointer.offset)
        else:
            base = self.memory(node.name)
        kind = base.kind
        if not isinstance(kind, Struct) or node.field.name not in kind.members:
            raise Unsupported(f"the member {node.field.name}")
        shift, inner = kind.members[node.field.name]
        return Place(inner, base.object, _sum(self.key(base), str(shift)), name=node.field.name, private=base.private)

    def key(self, place: Place) -> str:
        """The byte offset of a place."""
        if not place.index:
            return place.offset
        size = self.size_text(place.kind)
        index, unit = _integer(place.index), _integer(size)
        if index is not None and unit is not None:
            return _sum(place.offset, str(index * unit))
        text = place.index if place.index.isidentifier() else f"({place.index})"
        return _sum(place.offset, f"{text} * {size}" if size != "1" else text)

    # ------------------------------------------------------------ reading and writing

    def load(self, place: Place | Variable) -> Operand:
        """The value that stands at a place; arrays decay to pointers."""
        if isinstance(place, Variable):
            self.note_variable(place, False)
            if place.held == "pointer":
                return Operand(place.kind, "pointer", f"{place.python}_o", f"{place.python}_k")
            return Operand(place.kind, "data" if place.data else "plain", place.python)
        kind = place.kind
        if isinstance(kind, Array):
            return self.address(place, Pointer(kind.of))
        key = self.key(place)
        if isinstance(kind, Struct):
            return Operand(kind, "none", place.object, key)
        self.note(place.object, key, False)
        name = self.fresh()
        if isinstance(kind, Pointer):
            self.emit(f"{name}_o, {name}_k = {place.object}[{key}]")
            return Operand(kind, "pointer", f"{name}_o", f"{name}_k")
        self.emit(f"{name} = {place.object}[{key}]")
        return Operand(kind, "data", name)

    def address(self, place: Place, kind: Pointer) -> Operand:
        """A pointer to a place; an array of the function can be reached in other ways from now on."""
        if place.private:
            for scope in self.scopes:
                for variable in scope.values():
                    if isinstance(variable, Variable) and variable.python == place.object:
                        self.learn("exposed", variable)
        return Operand(kind, "pointer", place.object, self.key(place))

    def store(self, place: Place | Variable, value: Operand) -> Operand:
        """Give a place a value; the value in the place's type."""
        value = self.convert(value, place.kind)
        if isinstance(place, Variable):
            return self._assign(place, value)
        key = self.key(place)
        if value.held == "pointer":
            self.note(place.object, key, True)
            self.emit(f"{place.object}[{key}] = ({value.text}, {value.offset})")
            self.emit(f"{place.object}.log(({key}, ({value.text}, {value.offset})))")
            return value
        text = self.data(value)
        if place.private:
            self.note(place.object, key, True)
            self.emit(f"put({place.object}, {key}, {text})")
            return Operand(place.kind, "data", text)
        key, text = self.atom(key), self.atom(text)
        self.note(place.object, key, True)
        self.emit(f"{place.object}[{key}] = {text}")
        self.emit(f"{place.object}.log(({key}, {text}))")
        return Operand(place.kind, "data", text)

    def _assign(self, variable: Variable, value: Operand) -> Operand:
        name = variable.python
        if variable.held == "pointer":
            if value.held != "pointer":
                raise Unsupported("a number as a pointer")
            self.emit(f"{name}_o, {name}_k = {value.text}, {value.offset}")
            self.note_variable(variable, True)
            return Operand(variable.kind, "pointer", f"{name}_o", f"{name}_k")
        if variable.iterator:
            self.emit(f"{name} = {self.number(value)}")
        elif variable.data:
            self.emit(f"{name} = {self.data(value)}")
        else:
            if value.held == "data":
                self.learn("data", variable)
            self.emit(f"{name} = {self.number(value)}")
        self.note_variable(variable, True)
        return Operand(variable.kind, "data" if variable.data else "plain", name)

    def copy_struct(self, target: Place, source: Operand) -> None:
        """Assign a structure cell by cell."""
        if not isinstance(target.kind, Struct) or source.held != "none" or source.kind is not target.kind:
            raise Unsupported("the assignment of this structure")
        to = self.atom(self.key(target))
        origin = self.atom(source.offset)
        values = [self.load(Place(leaf, source.text, _sum(origin, str(shift))))
                  for shift, (_, leaf) in cells_of(target.kind).items()]
        for (shift, (_, leaf)), value in zip(cells_of(target.kind).items(), values, strict=True):
            self.store(Place(leaf, target.object, _sum(to, str(shift))), value)

    # ------------------------------------------------------------ values

    def value(self, node: Any) -> Operand:
        """The value of an expression."""
        method = getattr(self, f"_value_{type(node).__name__}", None)
        if method is None:
            raise Unsupported(f"an expression of the kind {type(node).__name__}")
        found: Operand = method(node)
        return found

    def _value_ID(self, node: c_ast.ID) -> Operand:
        found = self.scoped(node.name)
        if found is None:
            if node.name in ("true", "false"):
                return self.plain(int(node.name == "true"))
            found = self.find(node.name)
        if isinstance(found, Constant):
            return self.plain(found.value)
        if isinstance(found, Alias):
            raise Unsupported(f"the type name {node.name} as a value")
        return self.load(self.place(node))

    def scoped(self, name: str) -> Any:
        """What a name means, if it is known already."""
        return next((scope[name] for scope in reversed(self.scopes) if name in scope), None)

    def _value_ArrayRef(self, node: c_ast.ArrayRef) -> Operand:
        return self.load(self.place(node))

    _value_StructRef = _value_ArrayRef

    def _value_Constant(self, node: c_ast.Constant) -> Operand:
        kind, value = literal(node)
        if not kind.floating:
            return Operand(kind, "plain", str(value))
        if kind is FLOAT:
            value = struct.unpack("f", struct.pack("f", value))[0]
        return Operand(kind, "data", str(self.book.reals[value]))

    def _value_Cast(self, node: c_ast.Cast) -> Operand:
        return self.convert(self.value(node.expr), self.type(node.to_type))

    def _value_ExprList(self, node: c_ast.ExprList) -> Operand:
        for part in node.exprs[:-1]:
            self.value(part)
        return self.value(node.exprs[-1])

    def _value_UnaryOp(self, node: c_ast.UnaryOp) -> Operand:
        if node.op == "sizeof":
            return Operand(ULONG, "plain", self._sizeof(node.expr))
        if node.op == "&":
            if isinstance(node.expr, c_ast.UnaryOp) and node.expr.op == "*":
                return self.value(node.expr.expr)
            place = self.memory(node.expr)
            return self.address(place, Pointer(place.kind))
        if node.op == "*":
            return self.load(self.place(node))
        if node.op in ("++", "--", "p++", "p--"):
            return self._increment(node)
        if node.op == "!":
            return Operand(INT, "plain", f"(0 if {self.condition(node.expr)} else 1)")
        value = self.value(node.expr)
        if not isinstance(value.kind, Number):
            raise Unsupported(f"the operator {node.op} on this type")
        kind = promoted(value.kind)
        value = self.convert(value, kind)
        if node.op == "+":
            return value
        if node.op == "-":
            return self._negated(value, kind)
        if kind.floating or node.op != "~":
            raise Unsupported(f"the operator {node.op}")
        if value.held == "data":
            table = self.table("complement", kind, lambda a: wrapped(~a, kind))
            return Operand(kind, "data", f"{table}[{value.text}]")
        return Operand(kind, "plain", f"(~{value.text})" if kind.signed else f"(~{value.text} & {kind.high})")

    def _negated(self, value: Operand, kind: Number) -> Operand:
        if value.held == "plain":
            return self.arithmetic("-", self.plain(0, kind), value, kind)
        table = self.table("negate", kind, None if kind.floating else lambda a: wrapped(-a, kind))
        return Operand(kind, "data", f"{table}[{value.text}]")

    def _sizeof(self, node: Any) -> str:
        if isinstance(node, c_ast.Typename):
            return self.size_text(self.type(node))
        with self.apart():
            try:
                return self.size_text(self.place(node).kind)
            except Unsupported:
                return self.size_text(self.value(node).kind)

    def _increment(self, node: c_ast.UnaryOp) -> Operand:
        place = self.place(node.expr)
        if isinstance(place, Place):
            place = self._fixed(place)
        old = self.load(place)
        if node.op.startswith("p") and isinstance(place, Variable):
            old = self._copied(old)
        new = self.calculated("+" if "+" in node.op else "-", old, self.plain(1))
        stored = self.store(place, new)
        return old if node.op.startswith("p") else stored

    def _copied(self, value: Operand) -> Operand:
        name = self.fresh()
        if value.held == "pointer":
            self.emit(f"{name}_o, {name}_k = {value.text}, {value.offset}")
            return Operand(value.kind, "pointer", f"{name}_o", f"{name}_k")
        self.emit(f"{name} = {value.text}")
        return Operand(value.kind, value.held, name)

    def _fixed(self, place: Place) -> Place:
        """The same place, its address worked out once."""
        return Place(place.kind, self.atom(place.object), self.atom(self.key(place)), name=place.name, private=place.private)

    def _value_Assignment(self, node: c_ast.Assignment) -> Operand:
        if node.op == "=":
            value = self.value(node.rvalue)
            place = self.place(node.lvalue)
            if isinstance(place.kind, Struct):
                assert isinstance(place, Place)
                self.copy_struct(place, value)
                return value
            return self.store(place, value)
        operand = self.value(node.rvalue)
        place = self.place(node.lvalue)
        if isinstance(place, Place):
            place = self._fixed(place)
        return self.store(place, self.calculated(node.op[:-1], self.load(place), operand))

    def _value_TernaryOp(self, node: c_ast.TernaryOp) -> Operand:
        extreme = self._extreme(node)
        if extreme is not None:
            return extreme
        both = self.both(node.cond)
        condition = self.condition(node.cond)
        if both:
            condition = self.atom(condition)
            self.uncertain += 1
        with self.apart() as yes_lines:
            yes = self.value(node.iftrue)
        with self.apart() as no_lines:
            no = self.value(node.iffalse)
        self.uncertain -= both
        kind = self._ternary_kind(yes, no)
        with self.apart() as yes_more:
            yes = self._as(yes, kind, no)
        with self.apart() as no_more:
            no = self._as(no, kind, yes)
        yes_lines, no_lines = yes_lines + yes_more, no_lines + no_more
        if yes.held == "none":
            return self._branches(condition, yes_lines, no_lines, yes, no, both)
        if not yes_lines and not no_lines and yes.held != "pointer":
            return Operand(kind, yes.held, f"({yes.text} if {condition} else {no.text})")
        return self._branches(condition, yes_lines, no_lines, yes, no, both)

    def _extreme(self, node: c_ast.TernaryOp) -> Operand | None:
        """``a < b ? a : b`` on data is an operation of its own, so that equal numbers do not hide which one was taken."""
        if not isinstance(node.cond, c_ast.BinaryOp) or node.cond.op not in ("<", "<=", ">", ">=") or self.notes:
            return None
        sides, chosen = (node.cond.left, node.cond.right), (node.iftrue, node.iffalse)
        texts = [[_text(part) for part in pair] for pair in (sides, chosen)]
        if None in texts[0] or sorted(map(str, texts[0])) != sorted(map(str, texts[1])):
            return None
        with self.apart() as lines:
            a, b = self.value(sides[0]), self.value(sides[1])
        if "data" not in (a.held, b.held) or not isinstance(a.kind, Number) or not isinstance(b.kind, Number):
            return None
        self.insert(lines)
        kind = common(a.kind, b.kind)
        a, b = self.convert(a, kind), self.convert(b, kind)
        name = f"a {node.cond.op} b ? " + ("a : b" if texts[0] == texts[1] else "b : a")
        table = self.table(name, kind, None if kind.floating else EXTREMES[name])
        return Operand(kind, "data", f"{table}[{self.data(a)}, {self.data(b)}]")

    notes = False  # accesses are told, so that everything is worked out where it stands

    def _ternary_kind(self, yes: Operand, no: Operand) -> Kind:
        if isinstance(yes.kind, Number) and isinstance(no.kind, Number):
            return common(yes.kind, no.kind)
        return no.kind if yes.held == "plain" else yes.kind

    def _as(self, value: Operand, kind: Kind, other: Operand) -> Operand:
        if value.held == "none" or other.held == "none":
            return Operand(kind, "none", "0")
        value = self.convert(value, kind)
        if other.held == "data" and value.held == "plain":
            return Operand(kind, "data", self.data(value))
        return value

    def _branches(self, condition: str, yes_lines: list[str], no_lines: list[str], yes: Operand, no: Operand,
                  both: bool) -> Operand:
        if yes.held != no.held:  # the first branch did not know yet that the other is data
            yes, no = (Operand(x.kind, "data", self.data(x)) if x.held == "plain" else x for x in (yes, no))
        name = self.fresh()
        if both:
            self._chosen(f"if not {condition}:", yes_lines, yes, name)
            self._chosen("else:", no_lines, no, name)
        self._chosen(f"if {condition}:", yes_lines, yes, name)
        self._chosen("else:", no_lines, no, name)
        if yes.held == "pointer":
            return Operand(yes.kind, "pointer", f"{name}_o", f"{name}_k")
        return Operand(yes.kind, yes.held, name)

    def _chosen(self, head: str, lines: list[str], value: Operand, name: str) -> None:
        with self.block(head):
            self.insert([" " + line for line in lines])
            if value.held == "pointer":
                self.emit(f"{name}_o, {name}_k = {value.text}, {value.offset}")
            elif value.held != "none":
                self.emit(f"{name} = {value.text}")

    # ------------------------------------------------------------ arithmetic

    def _value_BinaryOp(self, node: c_ast.BinaryOp) -> Operand:
        if node.op in ("&&", "||"):
            return Operand(INT, "plain", f"(1 if {self.condition(node)} else 0)")
        a, b = self.value(node.left), self.value(node.right)
        if node.op in COMPARE:
            return self._compared(node.op, a, b)
        return self.calculated(node.op, a, b)

    def calculated(self, operator: str, a: Operand, b: Operand) -> Operand:
        """``a op b``, pointers included."""
        if a.held == "pointer" or b.held == "pointer":
            return self._moved(operator, a, b)
        if not isinstance(a.kind, Number) or not isinstance(b.kind, Number):
            raise Unsupported(f"the operator {operator} on these types")
        if operator in ("<<", ">>"):
            kind = promoted(a.kind)
            return self.arithmetic(operator, self.convert(a, kind), self.convert(b, promoted(b.kind)), kind)
        kind = common(a.kind, b.kind)
        return self.arithmetic(operator, self.convert(a, kind), self.convert(b, kind), kind)

    def arithmetic(self, operator: str, a: Operand, b: Operand, kind: Number) -> Operand:
        """``a op b`` on two numbers of a type."""
        if a.held == "data" or b.held == "data":
            if kind.floating and operator not in "+-*/":
                raise Unsupported(f"the operator {operator} on floating-point numbers")
            table = self.table(operator, kind, None if kind.floating else integer_work(operator, kind))
            return Operand(kind, "data", f"{table}[{self.data(a)}, {self.data(b)}]")
        left, right = _integer(a.text), _integer(b.text)
        if left is not None and right is not None:
            try:
                return Operand(kind, "plain", str(exact(operator, left, right, kind)))
            except Undefined:
                pass  # it is only undefined if it is executed
        return Operand(kind, "plain", self._plain(operator, a.text, b.text, kind))

    def _plain(self, operator: str, a: str, b: str, kind: Number) -> str:
        if operator in ("&", "|", "^"):
            return f"({a} {operator} {b})"
        if operator in ("/", "%"):
            simple = b.isdigit() and int(b) > 0 and not kind.signed
            sign = "//" if operator == "/" else "%"
            call = "quotient" if operator == "/" else "remainder"
            return f"({a} {sign} {b})" if simple else self.atom(f"{call}({a}, {b})")
        if operator in ("<<", ">>"):
            call = "shifted_left" if operator == "<<" else "shifted_right"
            text = f"{call}({a}, {b}, {8 * kind.size})"
        else:
            text = f"{a} {operator} {b}"
        if not kind.signed:
            return f"({text} & {kind.high})"
        name = self.atom(text)
        if not self.uncertain:
            self.emit(f"if not {kind.low} <= {name} <= {kind.high}: overflow({name})")
        return name

    def _moved(self, operator: str, a: Operand, b: Operand) -> Operand:
        """Pointer arithmetic."""
        if a.held == "pointer" and b.held == "pointer":
            if operator != "-" or not isinstance(a.kind, Pointer):
                raise Unsupported(f"the operator {operator} on pointers")
            size = self.size_text(a.kind.to)
            addresses = f"(({a.text}.base + {a.offset}) - ({b.text}.base + {b.offset}))"
            return Operand(LONG, "plain", f"({addresses} // {size})")
        if b.held == "pointer":
            a, b = b, a
        if operator not in "+-" or not isinstance(a.kind, Pointer):
            raise Unsupported(f"the operator {operator} on a pointer")
        count = self._signed(self.integer(b), b.kind)
        size = self.size_text(a.kind.to)
        return Operand(a.kind, "pointer", a.text, self.atom(f"{a.offset} {operator} ({count}) * {size}"))

    # ------------------------------------------------------------ comparisons and conditions

    def _relation(self, operator: str, a: Operand, b: Operand) -> tuple[str, Operand, Operand]:
        """A comparison as a Python condition, and the operands in their common type."""
        if a.held == "pointer" or b.held == "pointer":
            other = a if b.held == "pointer" else b
            pointer = b if b.held == "pointer" else a
            assert isinstance(pointer.kind, Pointer)
            if other.held == "plain":
                other = self.convert(other, pointer.kind)
            sides = [f"({x.text}.base + {x.offset})" for x in ((pointer, other) if pointer is a else (other, pointer))]
            return f"({sides[0]} {operator} {sides[1]})", a, b
        if not isinstance(a.kind, Number) or not isinstance(b.kind, Number):
            raise Unsupported("a comparison of these types")
        kind = common(a.kind, b.kind)
        a, b = self.convert(a, kind), self.convert(b, kind)
        return f"({self.number(a)} {operator} {self.number(b)})", a, b

    def _compared(self, operator: str, a: Operand, b: Operand) -> Operand:
        """A comparison as a number."""
        text, a, b = self._relation(operator, a, b)
        if "data" not in (a.held, b.held):
            return Operand(INT, "plain", f"(1 if {text} else 0)")
        assert isinstance(a.kind, Number)
        relation = COMPARE[operator]
        table = self.table(operator, a.kind, lambda x, y: int(relation(x, y)), a.kind.floating)
        return Operand(INT, "data", f"{table}[{self.data(a)}, {self.data(b)}]")

    def condition(self, node: Any) -> str:
        """Python text that is true where C takes the branch."""
        if isinstance(node, c_ast.UnaryOp) and node.op == "!":
            return f"(not {self.condition(node.expr)})"
        if isinstance(node, c_ast.BinaryOp) and node.op in ("&&", "||"):
            return self._logical(node)
        if isinstance(node, c_ast.BinaryOp) and node.op in COMPARE:
            return self._relation(node.op, self.value(node.left), self.value(node.right))[0]
        value = self.value(node)
        if value.held == "pointer":
            return f"({value.text} is not null)"
        return f"({self.number(value)} != 0)"

    def _logical(self, node: c_ast.BinaryOp) -> str:
        both = self.both(node.left)
        first = self.condition(node.left)
        word, proceed = ("and", "if {}:") if node.op == "&&" else ("or", "if not {}:")
        if both:
            first = self.atom(first)
            self.uncertain += 1
        with self.apart() as lines:
            second = self.condition(node.right)
        if both:
            self.uncertain -= 1
            self.insert(lines)
            return f"({first} {word} {second})"
        if not lines:
            return f"({first} {word} {second})"
        name = self.fresh()
        self.emit(f"{name} = {first}")
        with self.block(proceed.format(name)):
            self.insert([" " + line for line in lines])
            self.emit(f"{name} = {second}")
        return name

    # ------------------------------------------------------------ calls

    def _value_FuncCall(self, node: c_ast.FuncCall) -> Operand:
        raise Unsupported("a call")  # Calls reads them


# ---------------------------------------------------------------- texts

def _text(node: Any) -> str | None:
    """The text of an expression that changes nothing; None for any other."""
    waiting = [node]
    while waiting:
        part = waiting.pop()
        if isinstance(part, (c_ast.Assignment, c_ast.FuncCall)) or (isinstance(part, c_ast.UnaryOp) and part.op[-1] in "+-"
                                                                     and len(part.op) > 1):
            return None
        waiting += [child for _, child in part.children()]
    text: str = c_generator.CGenerator().visit(node)
    return text


def _integer(text: str) -> int | None:
    """The number that a text is."""
    try:
        return int(text)
    except ValueError:
        return None


def _sum(a: str, b: str) -> str:
    if a == "0":
        return b
    if b == "0":
        return a
    left, right = _integer(a), _integer(b)
    return str(left + right) if left is not None and right is not None else f"{a} + {b}"


def _truncated(value: float, kind: Number) -> int:
    return wrapped(int(value), kind) if math.isfinite(value) else 0


__all__ = ["DOUBLE", "Again", "Expressions", "Operation"]
