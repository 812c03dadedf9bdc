"""The memory that a nest works on, as blocks, pointers between them and cells in them.

A block is a row of equal elements.  Every variable of the function that the nest names is a block of its own, which the
kernel takes as an argument; objects of the file stay where the kernel's own file puts them.  A pointer that the nest
follows links each element that holds it to a further block: ``g->depth[i]`` makes the variable ``g``, the struct that
it points to, and the doubles that the struct's member points to; ``double **rows`` makes a block for every row.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from pycparser import c_ast

from ..model import RetileError
from .declared import Arithmetic, Array, Pointer, Record, Scope, Type, Variable, names_in, require, type_text, walk


@dataclass(frozen=True)
class Block:
    """Equal elements one after the other; texts are C for the kernel's file."""

    number: int
    name: str
    type: str
    count: str  # elements, if the kernel's file can tell; else ``0``
    home: str  # address of the object in the kernel's file, or ``0``
    argument: int  # place among the kernel's arguments, or -1
    constant: int  # 1 if the home may not be written
    dims: tuple[Any, ...]  # declared extents as expression nodes, None where there is none
    levels: tuple[int, ...]  # how many subscripts each block on the way here takes, this one last
    skip: int = 0  # subscripts between the block before and this one: of an array of pointers in a struct

    @property
    def step(self) -> str:
        """Bytes of an element."""
        return f"sizeof({self.type})"


@dataclass(frozen=True)
class Link:
    """A pointer in the elements of ``holder``, to a space of block ``target`` for each of them."""

    holder: int
    target: int
    offset: str
    repeat: str
    stride: str


@dataclass(frozen=True)
class Cell:
    """An arithmetic object in the elements of a block (``repeat`` of them, ``stride`` bytes apart)."""

    number: int
    name: str  # ``a``, ``g.depth``, ``p.x``: arrows are dots, subscripts are left out
    block: int
    offset: str
    repeat: str
    stride: str
    type: str
    type_number: int


@dataclass
class Memory:
    """All blocks of a nest; ``arguments`` are the variables that the kernel takes, in order."""

    scope: Scope
    arguments: list[Variable] = field(default_factory=list)
    blocks: list[Block] = field(default_factory=list)
    links: list[Link] = field(default_factory=list)
    cells: list[Cell] = field(default_factory=list)
    types: list[str] = field(default_factory=list)
    late_definitions: list[str] = field(default_factory=list)

    def cells_of(self, storage: str) -> list[Cell]:
        """The cells of a storage: the one of its name, or all members of elements that are structs."""
        name = plain(storage)
        exact = [cell for cell in self.cells if cell.name == name]
        return exact or [cell for cell in self.cells if cell.name.startswith(name + ".")]

    def cell(self, name: str) -> Cell | None:
        """The one cell of a name such as ``g->rows``; None if there is no such cell."""
        return next((cell for cell in self.cells if cell.name == plain(name)), None)


def plain(text: str) -> str:
    """The name of a cell as used here: ``g->depth`` is ``g.depth``, blanks and parentheses go.

    >>> plain("( *g ).rows"), plain("to->cols"), plain("rows[]"), plain("m->h[0]")
    ('g.rows', 'to.cols', 'rows', 'm.h')
    """
    return re.sub(r"[\s()*]|\[\d*\]", "", text.replace("->", "."))


def memory_of(scope: Scope, nest: Any, named: Iterable[str], derived: Sequence[Variable] = ()) -> Memory:
    """The memory for a nest (a For node) and for variants that use the names ``named``.

    ``derived`` are pointers that the kernel works out from others, as the function did.  Raises RetileError, naming the
    variable, for objects that a trial cannot make.
    """
    return _Builder(scope, nest, derived).build(named)


def path_of(scope: Scope, node: Any) -> tuple[str, Type] | None:
    """The object that an expression names, as a path in which ``*`` stands for a pointer followed, and its type."""
    return _Paths(scope).of(node)


class _Paths:
    """Follows expressions through the declared types and notes the pointers on the way."""

    def __init__(self, scope: Scope) -> None:
        self.scope = scope
        self.followed: dict[str, bool] = {}  # path of a pointer -> True if with a subscript

    def of(self, node: Any) -> tuple[str, Type] | None:
        if isinstance(node, c_ast.ID):
            variable = self.scope.variables.get(node.name)
            return (node.name, declared_type(self.scope, variable)) if variable else None
        if isinstance(node, c_ast.ArrayRef):
            return self._element(self.of(node.name), True)
        if isinstance(node, c_ast.StructRef):
            base = self.of(node.name)
            return self._member(self._element(base, False) if node.type == "->" else base, node.field.name)
        if isinstance(node, c_ast.UnaryOp) and node.op == "*":
            inner, shifted = node.expr, False
            while isinstance(inner, c_ast.BinaryOp) and inner.op in "+-":
                inner, shifted = (inner.left if self._is_pointer(inner.left) else inner.right), True
            return self._element(self.of(inner), shifted)
        return None

    def _is_pointer(self, node: Any) -> bool:
        while isinstance(node, c_ast.BinaryOp):
            node = node.left
        found = self.of(node)
        return found is not None and isinstance(found[1], Pointer | Array)

    def _element(self, base: tuple[str, Type] | None, indexed: bool) -> tuple[str, Type] | None:
        if base is None:
            return None
        path, of = base
        if isinstance(of, Array):
            return path, of.element
        if not isinstance(of, Pointer):
            return None
        self.followed[path] = self.followed.get(path, False) or indexed
        return path + "*", of.target

    def _member(self, base: tuple[str, Type] | None, name: str) -> tuple[str, Type] | None:
        if base is None or not isinstance(base[1], Record):
            return None
        node = dict(base[1].members).get(name)
        return (f"{base[0]}.{name}", self.scope.type_of(node)) if node is not None else None


def declared_type(scope: Scope, variable: Variable) -> Type:
    """The type of a variable; an array argument is the pointer that C makes of it."""
    found = scope.type_of(variable.node)
    if variable.place == "argument" and isinstance(found, Array):
        return Pointer(found.element)
    return found


@dataclass(frozen=True)
class _Spot:
    """A place in the elements of a block: a member path of a type, and how often it comes, for arrays in structs."""

    holder: str  # the type that the path starts in
    path: tuple[str, ...] = ()
    before: str = "0"  # offset of the holder
    repeat: str = "1"
    stride: str = "0"
    subscripts: int = 0  # how many the array takes

    @property
    def offset(self) -> str:
        """Bytes from the begin of the element, as C."""
        if not self.path:
            return self.before
        own = f"__builtin_offsetof({self.holder}, {'.'.join(self.path)})"
        return own if self.before == "0" else f"{self.before} + {own}"

    def inside(self, member: str) -> _Spot:
        """The spot of a member."""
        return replace(self, path=(*self.path, member))


class _Builder:
    """Gives every variable a block and follows the pointers that the nest follows."""

    def __init__(self, scope: Scope, nest: Any, derived: Sequence[Variable]) -> None:
        self.memory = Memory(scope)
        self.scope = scope
        self.nest = nest
        self.derived = {variable.name: variable for variable in derived}
        self.paths = _Paths(scope)
        self.members: set[str] = set()

    def build(self, named: Iterable[str]) -> Memory:
        reached = [_element_of(variable.init) for variable in self.derived.values()]
        reached += [_element_of(init) for init in _pointers_set(self.nest)]
        for node in (part for whole in (self.nest, *reached) for part in walk(whole)):
            found = self.paths.of(node)
            if found:
                self.members.add(found[0])
        names = set(named).union(*(names_in(variable.init) for variable in self.derived.values()))
        wanted = [name for name in self.scope.variables if name in names]
        for name in self._in_order(wanted):
            if name not in self.derived:
                self._variable(self.scope.variables[name])
        return self.memory

    def _in_order(self, names: list[str]) -> list[str]:
        """The names and those that their types mention, the latter first."""
        order: list[str] = []

        def add(name: str) -> None:
            if name in order or name not in self.scope.variables:
                return
            for other in sorted(_names_of_type(self.scope.variables[name].node) - {name}):
                add(other)
            order.append(name)

        for name in names:
            add(name)
        return order

    def _variable(self, variable: Variable) -> None:
        found = declared_type(self.scope, variable)
        element, dims = _flat(found)
        require(
            isinstance(element, Arithmetic | Pointer | Record),
            f"a trial cannot make the object {variable.name}: its type {type_text(variable.node)} is not complete here",
        )
        fixed = variable.place == "global"
        argument = -1 if fixed else len(self.memory.arguments)
        text = element.text or (f"__typeof__({variable.name}{'[0]' * len(dims)})" if fixed else "")
        require(text, f"a trial cannot make {variable.name}: give the struct of its type a name")
        if fixed and not variable.defined:
            self.memory.late_definitions.append(type_text(variable.node, variable.name, qualifiers=True) + ";")
        block = self._add(
            variable.name,
            text,
            dims,
            (len(dims),) if dims else (),
            count=f"sizeof({variable.name}) / sizeof({text})" if fixed else "0" if dims else "1",
            home=f"(void *)&{variable.name}" if fixed else "0",
            argument=argument,
            constant=int(fixed and variable.constant),
        )
        if not fixed:
            self.memory.arguments.append(variable)
        self._contents(block, element, variable.name, _Spot(text), variable)

    def _add(
        self,
        name: str,
        text: str,
        dims: tuple[Any, ...],
        levels: tuple[int, ...],
        count: str = "0",
        home: str = "0",
        argument: int = -1,
        constant: int = 0,
        skip: int = 0,
    ) -> Block:
        block = Block(len(self.memory.blocks), name, text, count, home, argument, constant, dims, levels, skip)
        self.memory.blocks.append(block)
        return block

    def _contents(self, block: Block, of: Type, path: str, spot: _Spot, variable: Variable | None = None) -> None:
        """Register what stands at a spot in the elements of a block."""
        if isinstance(of, Arithmetic):
            if of.text not in self.memory.types:
                self.memory.types.append(of.text)
            self.memory.cells.append(
                Cell(
                    len(self.memory.cells),
                    path.replace("*", ""),
                    block.number,
                    spot.offset,
                    spot.repeat,
                    spot.stride,
                    of.text,
                    self.memory.types.index(of.text),
                )
            )
        elif isinstance(of, Record):
            for name, member in of.members:
                if not of.union or self._is_used(f"{path}.{name}"):
                    self._member(block, member, f"{path}.{name}", spot.inside(name))
        elif isinstance(of, Pointer) and path in self.paths.followed:
            self._follow(block, of, path, spot, variable)

    def _is_used(self, path: str) -> bool:
        return any(used == path or used.startswith((path + ".", path + "*")) for used in self.members)

    def _member(self, block: Block, member: Any, path: str, spot: _Spot) -> None:
        element, dims = _flat(self.scope.type_of(member))
        if not isinstance(element, Arithmetic | Record | Pointer):
            return
        if dims:
            require(
                spot.repeat == "1",
                f"a trial cannot fill arrays of structs with arrays inside another struct ({path})",
            )
            require(element.text, f"a trial cannot fill {path}: give the struct of its elements a name")
            size = f"sizeof({element.text})"
            spot = _Spot(
                element.text,
                (),
                spot.offset,
                f"sizeof((({spot.holder} *)0)->{'.'.join(spot.path)}) / {size}",
                size,
                len(dims),
            )
        self._contents(block, element, path, spot)

    def _follow(self, holder: Block, of: Pointer, path: str, spot: _Spot, variable: Variable | None) -> None:
        element, inner = _flat(of.target)
        indexed = self.paths.followed[path]
        require(
            isinstance(element, Arithmetic | Pointer | Record) and element.text,
            f"a trial cannot make what {path.replace('*', '')} points to: its type is not complete here",
        )
        outer = variable.node.dim if variable is not None and isinstance(variable.node, c_ast.ArrayDecl) else None
        dims = (outer, *inner)
        levels = (*holder.levels, len(dims) if indexed or inner else 0)
        block = self._add(
            path.replace("*", ""),
            element.text,
            dims,
            levels,
            count="0" if indexed or inner else "1",
            skip=spot.subscripts,
        )
        self.memory.links.append(Link(holder.number, block.number, spot.offset, spot.repeat, spot.stride))
        self._contents(block, element, path + "*", _Spot(element.text))


def _flat(of: Type) -> tuple[Any, tuple[Any, ...]]:
    """The innermost element of an array type and all extents, outermost first."""
    dims: tuple[Any, ...] = ()
    while isinstance(of, Array):
        dims = (*dims, of.extent)
        of = of.element
    return of, dims


def _element_of(pointer: Any) -> Any:
    """The expression of some element that a pointer leads to."""
    while isinstance(pointer, c_ast.Cast):
        pointer = pointer.expr
    return c_ast.UnaryOp("*", c_ast.BinaryOp("+", pointer, c_ast.Constant("int", "0")))


def _pointers_set(nest: Any) -> Iterator[Any]:
    """What the nest sets pointers of its own to: ``double *row = a + i * n;`` follows ``a``."""
    for node in walk(nest):
        if isinstance(node, c_ast.Decl) and isinstance(node.type, c_ast.PtrDecl) and node.init is not None:
            yield node.init
        elif isinstance(node, c_ast.Assignment) and node.op == "=" and isinstance(node.lvalue, c_ast.ID):
            yield node.rvalue


def _names_of_type(node: Any) -> set[str]:
    found: set[str] = set()
    while node is not None and not isinstance(node, c_ast.Struct | c_ast.Union | c_ast.Enum):
        if isinstance(node, c_ast.ArrayDecl) and node.dim is not None:
            found |= names_in(node.dim)
        node = getattr(node, "type", None)
    return found


def value_of(node: Any, scope: Scope, values: dict[str, int]) -> int:
    """The value of an integer expression of C whose objects have the given values (by the plain names of their cells).

    Raises RetileError if the expression holds anything else.
    """
    if isinstance(node, c_ast.Constant):
        return _constant(node)
    if isinstance(node, c_ast.ID) and node.name in scope.constants and node.name not in scope.variables:
        return value_of(scope.constants[node.name], scope, values)
    path = _Paths(scope).of(node)
    if path is not None and path[0].replace("*", "") in values:
        return values[path[0].replace("*", "")]
    if isinstance(node, c_ast.Cast):
        return value_of(node.expr, scope, values)
    if isinstance(node, c_ast.UnaryOp) and node.op in "+-~!":
        operand = value_of(node.expr, scope, values)
        return {"+": operand, "-": -operand, "~": ~operand, "!": int(not operand)}[node.op]
    if isinstance(node, c_ast.TernaryOp):
        return value_of(node.iftrue if value_of(node.cond, scope, values) else node.iffalse, scope, values)
    if isinstance(node, c_ast.BinaryOp):
        return binary(node.op, value_of(node.left, scope, values), value_of(node.right, scope, values))
    raise RetileError("an extent or parameter is not an integer expression of known objects")


def binary(op: str, a: int, b: int) -> int:
    """``a op b`` as C computes it (division towards zero); RetileError if it is undefined."""
    if op in ("/", "%"):
        require(b, "an extent divides by zero at these sizes")
        quotient = abs(a) // abs(b) * (1 if (a < 0) == (b < 0) else -1)
        return quotient if op == "/" else a - quotient * b
    if op in ("<<", ">>"):
        require(0 <= b < 64, "an extent shifts too far at these sizes")
    return int(
        {
            "+": lambda: a + b,
            "-": lambda: a - b,
            "*": lambda: a * b,
            "<<": lambda: a << b,
            ">>": lambda: a >> b,
            "&": lambda: a & b,
            "|": lambda: a | b,
            "^": lambda: a ^ b,
            "<": lambda: a < b,
            ">": lambda: a > b,
            "<=": lambda: a <= b,
            ">=": lambda: a >= b,
            "==": lambda: a == b,
            "!=": lambda: a != b,
            "&&": lambda: bool(a and b),
            "||": lambda: bool(a or b),
        }[op]()
    )


def _constant(node: Any) -> int:
    text = node.value
    if node.type == "char" and len(text) == 3:
        return ord(text[1])
    try:
        digits = text.rstrip("uUlL")
        return int(digits, 8) if digits.startswith("0") and digits.isdigit() else int(digits, 0)
    except ValueError:
        raise RetileError(f"{text} is not an integer constant") from None
