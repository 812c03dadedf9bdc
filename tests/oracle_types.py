"""The oracle's reading of declarations: types, sizes, constants, scopes."""

from __future__ import annotations

from collections.abc import Callable

from pycparser import c_ast

from oracle_text import (DOUBLE, FLOAT, INT, LDOUBLE, LLONG, LONG, NAMED, UINT, ULLONG, ULONG, Array, Function, Pointer,
                         Slot, Struct, Unsupported, basic_type)
from oracle_values import Tagged, integer_operation, plain

Code = Callable[[list], object]


class Names:
    """Scopes of one function while it is compiled; the outermost is the file's."""

    def __init__(self, file_scope: dict[str, tuple]) -> None:
        self.scopes: list[dict[str, tuple]] = [file_scope, {}]
        self.slots = 0

    def slot(self) -> int:
        self.slots += 1
        return self.slots - 1

    def find(self, name: str) -> tuple:
        for scope in reversed(self.scopes):
            if name in scope:
                return scope[name]
        raise Unsupported(f"name {name}")


class Types:
    """Compiles types and integer constants."""

    def __init__(self) -> None:
        self.structs: dict[str, Struct] = {}
        self.file_scope: dict[str, tuple] = {}
        self.names = Names(self.file_scope)

    def type(self, node: c_ast.Node, lengths: list | None = None) -> object:
        """The type of a declarator; lengths that are known only at run time are appended to ``lengths``."""
        if isinstance(node, (c_ast.TypeDecl, c_ast.Typename, c_ast.Decl)):
            return self.type(node.type, lengths)
        if isinstance(node, c_ast.IdentifierType):
            if len(node.names) == 1 and node.names[0] in NAMED:
                return NAMED[node.names[0]]
            if len(node.names) == 1:
                for scope in reversed(self.names.scopes):
                    if scope.get(node.names[0], ("",))[0] == "typedef":
                        return scope[node.names[0]][1]
            return basic_type(node.names)
        if isinstance(node, c_ast.PtrDecl):
            return Pointer(self.type(node.type, lengths))
        if isinstance(node, c_ast.ArrayDecl):
            return Array(self.type(node.type, lengths), self._length(node.dim, lengths))
        if isinstance(node, c_ast.Struct):
            return self._struct(node)
        if isinstance(node, c_ast.Enum):
            self._enumerate(node)
            return INT
        if isinstance(node, c_ast.FuncDecl):
            return Function(self.type(node.type))
        raise Unsupported(type(node).__name__)

    def _length(self, dim: c_ast.Node | None, lengths: list | None) -> object:
        if dim is None:
            return None
        try:
            return self.constant(dim)
        except Unsupported:
            if lengths is None:
                raise
        slot = Slot(self.names.slot())
        lengths.append((slot.index, self.value(dim)[1]))
        return slot

    def _struct(self, node: c_ast.Struct) -> Struct:
        name = node.name or f"anonymous at {node.coord}"
        kind = self.structs.setdefault(name, Struct(name))
        if node.decls and not kind.complete:
            offset, alignment = 0, 1
            for member in node.decls:
                inner = self.type(member.type)
                align = self.alignment(inner)
                offset = -(-offset // align) * align
                kind.members[member.name] = (offset, inner)
                offset += self.size(inner)
                alignment = max(alignment, align)
            kind.size, kind.complete = -(-offset // alignment) * alignment, True
        return kind

    def _enumerate(self, node: c_ast.Enum) -> None:
        value = 0
        for item in node.values.enumerators if node.values else ():
            value = self.constant(item.value) if item.value else value
            self.names.scopes[-1][item.name] = ("constant", value)
            value += 1

    def alignment(self, kind: object) -> int:
        """Alignment of a type of constant size, in bytes."""
        if isinstance(kind, Array):
            return self.alignment(kind.of)
        if isinstance(kind, Struct):
            return max((self.alignment(inner) for _, inner in kind.members.values()), default=1)
        return kind.size

    def size(self, kind: object) -> int | Code:
        """Bytes of a type: an int, or code for arrays of variable length."""
        if not isinstance(kind, Array):
            return kind.size
        inner, length = self.size(kind.of), kind.length
        if isinstance(inner, int) and isinstance(length, int):
            return inner * length
        each = (lambda env: inner) if isinstance(inner, int) else inner
        count = (lambda env: env[length.index]) if isinstance(length, Slot) else (lambda env: length)
        return lambda env: each(env) * count(env)

    def constant(self, node: c_ast.Node) -> int:
        """The value of an integer constant expression; Unsupported if it is not one."""
        if isinstance(node, c_ast.Constant):
            return plain(self.literal(node)[1])
        if isinstance(node, c_ast.ID):
            what = self.names.find(node.name)
            if what[0] == "constant":
                return what[1]
        if isinstance(node, c_ast.UnaryOp) and node.op in "+-":
            value = self.constant(node.expr)
            return -value if node.op == "-" else value
        if isinstance(node, c_ast.BinaryOp) and node.op in ("+", "-", "*", "/", "%", "<<", ">>"):
            return integer_operation(node.op, self.constant(node.left), self.constant(node.right), LONG, True)
        if isinstance(node, c_ast.UnaryOp) and node.op == "sizeof" and isinstance(node.expr, c_ast.Typename):
            size = self.size(self.type(node.expr))
            if isinstance(size, int):
                return size
        raise Unsupported("not a constant")

    def literal(self, node: c_ast.Constant) -> tuple[object, object]:
        """Type and value of a literal."""
        text = node.value.lower()
        if node.type in ("float", "double", "long double"):
            kind = {"f": FLOAT, "l": LDOUBLE}.get(text[-1], DOUBLE) if not text.startswith("0x") else DOUBLE
            value = float.fromhex(text) if text.startswith("0x") else float(text.rstrip("fl"))
            return kind, Tagged(value, hash((2, value)))
        if node.type == "char":
            return INT, ord(eval(node.value))  # a C character literal of the tests reads as one of Python
        if node.type == "string":
            raise Unsupported("string")
        digits = text.rstrip("ul")
        value = int(digits, 8) if digits[0] == "0" and digits.isdigit() else int(digits, 0)
        suffix, decimal = text[len(digits):], digits[0] != "0"
        kinds = [INT, UINT, LONG, ULONG, LLONG, ULLONG]
        if "u" in suffix:
            kinds = [k for k in kinds if not k.signed]
        elif decimal:
            kinds = [k for k in kinds if k.signed]
        if "l" in suffix:
            kinds = [k for k in kinds if k.size == 8]
        return next((k for k in kinds if value <= k.high), ULLONG), value

    # supplied by Expressions
    def value(self, node: c_ast.Node) -> tuple[object, Code]:
        raise NotImplementedError
