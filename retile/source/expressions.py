"""Types and values of expressions (ISO/IEC 9899:2018, 6.5 and 6.6)."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from ..model import CType
from ..values import replace
from .kinds import ArrayOf, FunctionType, PointerTo, Scope, StructType, Type, UnknownType, Void

if TYPE_CHECKING:
    from .types import Types

_COMPARISONS = frozenset({"<", ">", "<=", ">=", "==", "!=", "&&", "||"})
_ESCAPES = {"n": 10, "t": 9, "r": 13, "0": 0, "a": 7, "b": 8, "f": 12, "v": 11, "\\": 92, "'": 39, '"': 34, "?": 63}
Value = tuple[int, CType]
_DEPTH = 150


class Expressions:
    """Types and constant values of expression nodes."""

    def __init__(self, types: Types) -> None:
        self._types = types
        self._depth = 0

    # ---------------------------------------------------------------- types

    def type(self, node: Any, scope: Scope) -> Type:
        """The type of an expression as an lvalue would have it: no decay, no promotion."""
        self._depth += 1
        try:
            if self._depth > _DEPTH:
                return UnknownType("this expression is nested too deep")
            handler = getattr(self, "_type_" + type(node).__name__, None)
            return handler(node, scope) if handler else UnknownType("retile does not read this expression")
        finally:
            self._depth -= 1

    def value_type(self, node: Any, scope: Scope) -> Type:
        """The type of an expression's value: arrays and functions are pointers."""
        return decayed(self.type(node, scope))

    def _type_ID(self, node: c_ast.ID, scope: Scope) -> Type:
        declared = scope.lookup(node.name)
        if declared is None:
            return UnknownType(f"{node.name} is not declared here")
        if declared.kind == "typedef":
            return UnknownType(f"{node.name} is a type")
        return self._types.of_declared(declared, scope)

    def _type_Constant(self, node: c_ast.Constant, scope: Scope) -> Type:
        arithmetic = self._types.arithmetic
        if node.type == "string":
            if not node.value.startswith('"'):
                return UnknownType("a string of wide characters")
            return ArrayOf(arithmetic.named(["char"]) or arithmetic.int)
        value = self._constant_Constant(node, scope)
        if value is not None:
            return value[1]
        named = arithmetic.named(node.type.split())
        return named if named is not None and named.floating else UnknownType("a constant that retile does not read")

    def _type_ArrayRef(self, node: c_ast.ArrayRef, scope: Scope) -> Type:
        for part in (node.name, node.subscript):  # C also has 3[a]
            base = self.value_type(part, scope)
            if isinstance(base, PointerTo):
                return base.target
        return UnknownType("what is subscripted here is no array or pointer")

    def _type_StructRef(self, node: c_ast.StructRef, scope: Scope) -> Type:
        base = self.value_type(node.name, scope)
        if node.type == "->":
            base = base.target if isinstance(base, PointerTo) else UnknownType("this is no pointer")
        if not isinstance(base, StructType):
            return UnknownType("this is no structure")
        member = self._types.member(base, node.field.name)
        if member is None:
            return UnknownType(f"{base.kind} {base.tag or ''} has no member {node.field.name} here")
        if member.bits is not None and isinstance(member.type, CType):
            return replace(member.type, bits=member.bits)
        return member.type

    def _type_UnaryOp(self, node: c_ast.UnaryOp, scope: Scope) -> Type:
        if node.op in ("sizeof", "_Alignof"):
            return self._types.arithmetic.size_type
        if node.op == "&":
            return PointerTo(self.type(node.expr, scope), self.lvalue_quals(node.expr, scope))
        inner = self.value_type(node.expr, scope)
        if node.op == "*":
            return inner.target if isinstance(inner, PointerTo) else UnknownType("this is no pointer")
        if node.op == "!":
            return self._types.arithmetic.int
        if node.op in ("++", "--", "p++", "p--"):
            return inner
        return self._types.promoted(inner) if isinstance(inner, CType) else UnknownType("no arithmetic operand")

    def lvalue_quals(self, node: Any, scope: Scope) -> frozenset[str]:
        """Qualifiers of the object that an lvalue designates."""
        if isinstance(node, c_ast.ID):
            declared = scope.lookup(node.name)
            if declared is None or declared.node is None or declared.kind == "constant":
                return frozenset()
            if declared.where == "parameter":
                type = self._types.of_declared(declared, scope)
                if isinstance(type, PointerTo):
                    return type.quals
            owner = declared.node.decl if isinstance(declared.node, c_ast.FuncDef) else declared.node
            return self._types.qualifiers(owner, scope)
        if isinstance(node, c_ast.StructRef):
            base, outer = self.value_type(node.name, scope), frozenset[str]()
            if node.type == ".":
                outer = self.lvalue_quals(node.name, scope)
            elif isinstance(base, PointerTo):
                outer = base.target_quals
                base = base.target
            member = self._types.member(base, node.field.name) if isinstance(base, StructType) else None
            return outer | (member.quals if member else frozenset())
        if isinstance(node, (c_ast.ArrayRef, c_ast.UnaryOp)):
            inner = node.name if isinstance(node, c_ast.ArrayRef) else node.expr
            whole = self.type(inner, scope)
            if isinstance(whole, ArrayOf):
                return whole.element_quals | self.lvalue_quals(inner, scope)
            return whole.target_quals if isinstance(whole, PointerTo) else frozenset()
        return frozenset()

    def _type_BinaryOp(self, node: c_ast.BinaryOp, scope: Scope) -> Type:
        if node.op in _COMPARISONS:
            return self._types.arithmetic.int
        left, right = self.value_type(node.left, scope), self.value_type(node.right, scope)
        if isinstance(left, CType) and isinstance(right, CType):
            return self._types.promoted(left) if node.op in ("<<", ">>") else self._types.common(left, right)
        if node.op == "-" and isinstance(left, PointerTo) and isinstance(right, PointerTo):
            return self._types.arithmetic.difference_type
        if node.op in "+-":
            for pointer, other in ((left, right), (right, left)):
                if isinstance(pointer, PointerTo) and isinstance(other, CType):
                    return pointer
        unknown = next((side for side in (left, right) if isinstance(side, UnknownType)), None)
        return unknown or UnknownType("operands that do not fit the operator")

    def _type_Assignment(self, node: c_ast.Assignment, scope: Scope) -> Type:
        return self.type(node.lvalue, scope)

    def _type_TernaryOp(self, node: c_ast.TernaryOp, scope: Scope) -> Type:
        true, false = self.value_type(node.iftrue, scope), self.value_type(node.iffalse, scope)
        if isinstance(true, CType) and isinstance(false, CType):
            return self._types.common(true, false)
        return true if isinstance(true, PointerTo) and not isinstance(true.target, Void) else false

    def _type_Cast(self, node: c_ast.Cast, scope: Scope) -> Type:
        return self._types.of(node.to_type, scope)

    def _type_CompoundLiteral(self, node: c_ast.CompoundLiteral, scope: Scope) -> Type:
        return self._types.of(node.type, scope)

    def _type_ExprList(self, node: c_ast.ExprList, scope: Scope) -> Type:
        return self.value_type(node.exprs[-1], scope)

    def _type_FuncCall(self, node: c_ast.FuncCall, scope: Scope) -> Type:
        if isinstance(node.name, c_ast.ID) and node.name.name == "offsetof":
            return self._types.arithmetic.size_type
        called = self.value_type(node.name, scope)
        if isinstance(called, PointerTo) and isinstance(called.target, FunctionType):
            return called.target.result
        return called if isinstance(called, UnknownType) else UnknownType("this is no function")

    # ---------------------------------------------------------------- constants

    def constant(self, node: Any, scope: Scope) -> Value | None:
        """Value and type of an integer constant expression; None also where its evaluation is undefined."""
        self._depth += 1
        try:
            handler = getattr(self, "_constant_" + type(node).__name__, None)
            return handler(node, scope) if handler and self._depth <= _DEPTH else None
        finally:
            self._depth -= 1

    def _constant_Constant(self, node: c_ast.Constant, scope: Scope) -> Value | None:
        if node.type == "char" or node.value[:1] in "'" or node.value[:2] in ("L'", "u'", "U'"):
            value = _character(node.value, self._types.arithmetic.char_signed, self._types.arithmetic.char_bits)
            return None if value is None else (value, self._types.arithmetic.int)
        if node.type == "string" or "." in node.value or node.type in ("float", "double", "long double"):
            return None
        return self._types.arithmetic.literal(node.value)

    def _constant_ID(self, node: c_ast.ID, scope: Scope) -> Value | None:
        declared = scope.lookup(node.name)
        if declared is None or declared.kind != "constant" or declared.value is None:
            return None
        return declared.value, self._fitting(declared.value)

    def _fitting(self, value: int) -> CType:
        arithmetic = self._types.arithmetic
        for type in (arithmetic.int, arithmetic.named(["long"]), arithmetic.named(["unsigned", "long"])):
            if type is not None and type.smallest <= value <= type.largest:
                return type
        return arithmetic.int

    def _constant_UnaryOp(self, node: c_ast.UnaryOp, scope: Scope) -> Value | None:
        if node.op == "sizeof":
            typed = isinstance(node.expr, c_ast.Typename)
            type = self._types.of(node.expr, scope) if typed else self.type(node.expr, scope)
            size = string_size(node.expr) or self._types.size_of(type, scope)
            return None if size is None else (size, self._types.arithmetic.size_type)
        if node.op not in ("+", "-", "~", "!"):
            return None
        inner = self.constant(node.expr, scope)
        if inner is None:
            return None
        if node.op == "!":
            return int(inner[0] == 0), self._types.arithmetic.int
        type = self._types.promoted(inner[1])
        return _in_range({"+": inner[0], "-": -inner[0], "~": ~inner[0]}[node.op], type)

    def _constant_BinaryOp(self, node: c_ast.BinaryOp, scope: Scope) -> Value | None:
        left = self.constant(node.left, scope)
        if left is not None and node.op in ("&&", "||") and bool(left[0]) == (node.op == "||"):
            return int(bool(left[0])), self._types.arithmetic.int
        right = self.constant(node.right, scope)
        if left is None or right is None:
            return None
        if node.op in ("<<", ">>"):
            return self._shifted(node.op, left, right[0])
        type = self._types.common(left[1], right[1])
        a, b = _converted(left[0], type), _converted(right[0], type)
        if node.op in _COMPARISONS:
            return _compare(node.op, a, b), self._types.arithmetic.int
        value = _compute(node.op, a, b)
        return None if value is None else _in_range(value, type)

    def _shifted(self, op: str, left: Value, count: int) -> Value | None:
        type = self._types.promoted(left[1])
        if not 0 <= count < type.bits or (left[0] < 0 and op == "<<"):
            return None
        return _in_range(left[0] << count if op == "<<" else left[0] >> count, type)

    def _constant_TernaryOp(self, node: c_ast.TernaryOp, scope: Scope) -> Value | None:
        condition = self.constant(node.cond, scope)
        if condition is None:
            return None
        chosen = self.constant(node.iftrue if condition[0] else node.iffalse, scope)
        type = self.type(node, scope)
        return (_converted(chosen[0], type), type) if chosen and isinstance(type, CType) else chosen

    def _constant_Cast(self, node: c_ast.Cast, scope: Scope) -> Value | None:
        type = self._types.of(node.to_type, scope)
        if not isinstance(type, CType) or type.floating:
            return None
        inner = self.constant(node.expr, scope)
        if inner is None:
            return self._floating_cast(node.expr, type)
        if type.spelling == "_Bool" or type.bits == self._types.arithmetic.char_bits and "ool" in type.spelling:
            return int(inner[0] != 0), type
        return _converted(inner[0], type), type

    @staticmethod
    def _floating_cast(node: Any, type: CType) -> Value | None:
        if not isinstance(node, c_ast.Constant) or node.type not in ("float", "double", "long double"):
            return None
        try:
            value = int(float(node.value.rstrip("fFlL")))
        except (ValueError, OverflowError):
            return None
        return (value, type) if type.smallest <= value <= type.largest else None

    def _constant_FuncCall(self, node: c_ast.FuncCall, scope: Scope) -> Value | None:
        """``offsetof``."""
        if not isinstance(node.name, c_ast.ID) or node.name.name != "offsetof" or len(node.args.exprs) != 2:
            return None
        type, field = self._types.of(node.args.exprs[0], scope), node.args.exprs[1]
        if not isinstance(type, StructType) or not isinstance(field, c_ast.ID):
            return None
        member = self._types.member(type, field.name)
        return None if member is None or member.offset is None else (member.offset, self._types.arithmetic.size_type)


def decayed(type: Type) -> Type:
    """Arrays and functions as values are pointers (6.3.2.1)."""
    if isinstance(type, ArrayOf):
        return PointerTo(type.element, type.element_quals)
    return PointerTo(type) if isinstance(type, FunctionType) else type


def string_size(node: Any) -> int | None:
    """Bytes of a plain string literal with its final zero; None for other nodes and for strings with escapes."""
    plain = isinstance(node, c_ast.Constant) and re.fullmatch(r'"[^\\"]*"', node.value)
    return len(node.value) - 1 if plain and node.value.isascii() else None


def _converted(value: int, type: CType) -> int:
    """A value converted to an integer type, modulo its width."""
    value &= (1 << type.bits) - 1
    return value - (1 << type.bits) if type.signed and value > type.largest else value


def _in_range(value: int, type: CType) -> Value | None:
    """The value of an operation: unsigned types wrap, signed ones must not overflow."""
    if not type.signed:
        return _converted(value, type), type
    return (value, type) if type.smallest <= value <= type.largest else None


def _compare(op: str, a: int, b: int) -> int:
    return int({"<": a < b, ">": a > b, "<=": a <= b, ">=": a >= b, "==": a == b, "!=": a != b,
                "&&": bool(a and b), "||": bool(a or b)}[op])  # fmt: skip


def _compute(op: str, a: int, b: int) -> int | None:
    match op:
        case "+":
            return a + b
        case "-":
            return a - b
        case "*":
            return a * b
        case "&":
            return a & b
        case "|":
            return a | b
        case "^":
            return a ^ b
        case "/" | "%" if b != 0:
            quotient = abs(a) // abs(b) * (1 if (a < 0) == (b < 0) else -1)
            return quotient if op == "/" else a - quotient * b
    return None


def _character(text: str, signed: bool, bits: int) -> int | None:
    """The value of a character constant; None for several characters and those outside ASCII."""
    prefix, _, rest = text.partition("'")
    body = rest[:-1]
    if prefix or not body:
        return None
    if len(body) == 1:
        return ord(body) if ord(body) < 128 else None
    if not body.startswith("\\"):
        return None
    if body[1:] in _ESCAPES:
        return _ESCAPES[body[1:]]
    match = re.fullmatch(r"\\(?:([0-7]{1,3})|x([0-9a-fA-F]+))", body)
    if match is None:
        return None
    value = int(match[1], 8) if match[1] else int(match[2], 16)
    if value >= 1 << bits:
        return None
    return value - (1 << bits) if signed and value >= 1 << (bits - 1) else value
