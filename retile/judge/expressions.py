"""From C expressions to Python text: operands that are tags, integers or pointers.

An expression becomes lines for what has effects, reads memory or may be undefined, and a text for its value.
"""

from __future__ import annotations

import struct
from typing import Any

from pycparser import c_ast, c_generator

from .arithmetic import wrapped
from .declarations import Alias, Constant, Variable, literal
from .kinds import FLOAT, INT, ULONG, Kind, Number, Pointer, Struct, Unsupported, common, promoted
from .operators import Operators
from .tags import EXTREMES
from .writer import Operand, Place


class Expressions(Operators):
    """Generates code for expressions; ``Calls`` builds on it."""

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
        obj, key = self.atom(place.object), self.atom(self.key(place))
        return Place(place.kind, obj, key, name=place.name, private=place.private)

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
        """``a < b ? a : b`` on data is an operation of its own, so that equal numbers do not hide which one it is."""
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


def _text(node: Any) -> str | None:
    """The text of an expression that changes nothing; None for any other."""
    waiting = [node]
    while waiting:
        part = waiting.pop()
        counts = isinstance(part, c_ast.UnaryOp) and part.op in ("++", "--", "p++", "p--")
        if counts or isinstance(part, (c_ast.Assignment, c_ast.FuncCall)):
            return None
        waiting += [child for _, child in part.children()]
    text: str = c_generator.CGenerator().visit(node)
    return text
