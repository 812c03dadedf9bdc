"""Arithmetic, comparisons and conditions."""

from __future__ import annotations

from typing import Any

from pycparser import c_ast

from .arithmetic import COMPARE, exact, integer_work
from .kinds import INT, LONG, Number, Pointer, Undefined, Unsupported, common, promoted
from .places import Places
from .writer import Operand, as_integer


class Operators(Places):
    """Generates code for operators; ``Expressions`` builds on it."""

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
        left, right = as_integer(a.text), as_integer(b.text)
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
