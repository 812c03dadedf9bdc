"""What an expression reads and writes, in the order of its text."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pycparser import c_ast

from ..model import CType
from ..source.kinds import ArrayOf, FunctionType, PointerTo, StructType
from ..values import dataclass, replace
from .calls import called_name, is_pure_call
from .conditions import Conditions
from .context import Context
from .places import Member, Place
from .refusals import refused
from .setting import Setting, c_text
from .updates import Update, accumulation, family, kept_extreme, update


@dataclass(frozen=True)
class Touch:
    """One read or write of a cell, before rows and columns are told apart."""

    place: Place
    write: bool
    context: Context
    node: Any
    update: Update | None = None  # for the read and write of ``x += e``, ``x = x + e``, ``x++``


class Effects:
    """Collects the touches of one statement."""

    def __init__(self, setting: Setting, conditions: Conditions) -> None:
        self._setting = setting
        self._conditions = conditions
        self._found: list[Touch] = []
        self._unused: frozenset[int] = frozenset()  # expressions of the statement whose values nobody looks at
        self._extremes: dict[int, Update] = {}  # by id() of an assignment under a condition that is one with it

    def of(self, node: Any, context: Context) -> tuple[Touch, ...]:
        """The touches of an expression statement, or of a condition."""
        self._found = []
        self._unused = frozenset(map(id, _unused_values(node)))
        self._visit(node, context)
        return tuple(self._found)

    def of_condition(self, node: Any, context: Context) -> tuple[Touch, ...]:
        """The touches of the condition of an ``if``; that of ``if (e > x) x = e;`` is part of one update of ``x``."""
        touches = self.of(node.cond, context)
        kind, assignment = kept_extreme(node)
        own = self._own_reads(0, assignment.lvalue) if kind else []
        if len(own) != 1:
            return touches
        whole = update(kind, self._type(assignment.lvalue), self._work(assignment.lvalue, assignment.rvalue))
        target = self._type(assignment.lvalue)
        if whole is None or target is None or not (whole.exact or target.floating):
            return touches  # a value that is cut when it is stored is no smallest or largest one
        self._extremes[id(assignment)] = whole
        return tuple(replace(touch, update=whole) if at in own else touch for at, touch in enumerate(touches))

    def of_declaration(self, decl: Any, context: Context) -> tuple[Touch, ...]:
        """The touches of a declaration with an initialiser."""
        self._found, self._unused = [], frozenset()
        name = c_ast.ID(decl.name, decl.coord)
        place = self._setting.places.declared(decl)
        if isinstance(decl.init, c_ast.InitList):
            self._initialise(decl, place, context)
        elif isinstance(place.type, StructType):
            self._visit(decl.init, context)
            self._whole_declared(decl, place, context)
        else:
            self._visit(decl.init, context)
            self._found.append(Touch(place, True, context, name))
        return tuple(self._found)

    def of_pointer(self, value: Any, binding: Any, context: Context, node: Any) -> tuple[Touch, ...]:
        """The touches of giving a pointer its value."""
        self._found, self._unused = [], frozenset()
        self._base(value, context)
        self._found.append(Touch(self._setting.places.variable(binding), True, context, node))
        return tuple(self._found)

    def _initialise(self, decl: Any, place: Place, context: Context) -> None:
        if not isinstance(place.type, (ArrayOf, StructType)):
            raise refused(
                decl, "unsupported", f"`{decl.name}` is initialised with a list; assign its parts one by one."
            )
        self._listed(decl.init, context)
        if isinstance(place.type, StructType):
            self._whole_declared(decl, place, context)
            return
        for cell in self._setting.places.cells(place, decl):
            self._found.append(Touch(cell, True, context, decl))

    def _listed(self, values: Any, context: Context) -> None:
        """The reads of a list of initial values, lists inside it included."""
        for part in values.exprs:
            value = part.expr if isinstance(part, c_ast.NamedInitializer) else part
            if isinstance(value, c_ast.InitList):
                self._listed(value, context)
            else:
                self._visit(value, context)

    def _whole_declared(self, decl: Any, place: Place, context: Context) -> None:
        """The writes of a structure that is declared with a value."""
        for part in self._setting.places.parts(place, c_ast.ID(decl.name, decl.coord)):
            self._found.append(Touch(part, True, context, decl))

    def _visit(self, node: Any, context: Context) -> None:
        match node:
            case None | c_ast.Constant() | c_ast.Typename():
                return
            case c_ast.ID() | c_ast.ArrayRef() | c_ast.StructRef():
                self._read(node, context)
            case c_ast.Assignment():
                self._assign(node, context)
            case c_ast.UnaryOp():
                self._unary(node, context)
            case c_ast.BinaryOp(op="&&") | c_ast.BinaryOp(op="||"):
                self._visit(node.left, context)
                self._visit(node.right, self._under(node.left, node.op == "&&", context).block(node.right))
            case c_ast.BinaryOp():
                self._visit(node.left, context)
                self._visit(node.right, context)
            case c_ast.TernaryOp():
                self._ternary(node, context)
            case c_ast.Cast():
                self._visit(node.expr, context)
            case c_ast.ExprList():
                for part in node.exprs:
                    self._visit(part, context)
            case c_ast.FuncCall():
                self._call(node, context)
            case c_ast.CompoundLiteral() if isinstance(self._setting.type_of(node), (CType, StructType)):
                self._listed(node.init, context)
            case _:
                raise refused(
                    node, "unsupported", f"retile does not read `{c_text(node)}`; write it with plain operators."
                )

    def _ternary(self, node: Any, context: Context) -> None:
        self._visit(node.cond, context)
        self._visit(node.iftrue, self._under(node.cond, True, context).block(node.iftrue))
        self._visit(node.iffalse, self._under(node.cond, False, context).block(node.iffalse))

    def _under(self, node: Any, holds: bool, context: Context) -> Context:
        """What is only evaluated where a condition holds, or does not; data, if it would need memory to keep its value."""
        mark = self._setting.mark()
        condition = self._conditions.known(node, context)
        if condition is None or not self._setting.needs_nothing_since(mark):
            self._setting.rewind(mark)
            return context.uncertain()
        return context.where(condition if holds else self._conditions.opposite(condition))

    def _call(self, node: Any, context: Context) -> None:
        if not is_pure_call(node, self._setting):
            name = called_name(node)
            shown = f"`{name}`" if name else "a function through a pointer"
            if name == "__asm__":
                raise refused(node, "asm", "inline assembly may change anything; it would have to leave the nest.")
            if name == "__statement_expression__":
                raise refused(
                    node,
                    "statement-expression",
                    "a statement expression stands here; use a plain expression or a static function.",
                )
            raise refused(
                node,
                "call",
                f"the call of {shown} may read or change anything; only functions that are seen "
                "to compute a value from their arguments may stand in the nest.",
            )
        for argument in node.args.exprs if node.args else ():
            if not isinstance(self._setting.type_of(argument), CType):
                raise refused(
                    argument,
                    "call",
                    f"`{c_text(argument)}` is passed as a pointer; retile cannot tell what is read through it.",
                )
            self._visit(argument, context)

    # ------------------------------------------------------------ reads and writes

    def _unary(self, node: Any, context: Context) -> None:
        if node.op in ("sizeof", "_Alignof"):
            return
        if node.op == "*":
            self._read(node, context)
        elif node.op in ("++", "--", "p++", "p--"):
            whole = update("+", self._type(node.expr), self._type(node.expr)) if id(node) in self._unused else None
            self._update(node.expr, context, whole)
        elif node.op == "&":
            raise refused(
                node, "address", f"the address `{c_text(node)}` is taken inside the nest; use the object itself there."
            )
        else:
            self._visit(node.expr, context)

    def _read(self, node: Any, context: Context) -> None:
        if isinstance(node, c_ast.ID):
            binding = self._setting.names.of(node)
            if binding is not None and (binding.kind == "enumerator" or context.iterator(binding) is not None):
                return
            self._not_outside(node, binding)
            if self._is_plain_size(binding):
                return
        self._beneath(node, context)
        if isinstance(self._setting.type_of(node), StructType):
            self._whole(node, False, context)
            return
        place = self._scalar_place(node, context)
        self._found.append(Touch(place, False, context, node))

    def _whole(self, node: Any, write: bool, context: Context) -> None:
        """The parts of a structure that is copied; none of them has a text of its own."""
        places = self._setting.places
        nowhere = c_ast.ExprList([node], node.coord)
        for part in places.parts(places.place(node, context), node):
            self._found.append(Touch(part, write, context, nowhere))

    def _is_plain_size(self, binding: Any) -> bool:
        """True for an integer that nothing can change while the nest runs: it is a parameter, not memory."""
        if binding is not None and self._setting.constant_of(binding) is not None:
            return True
        if binding is None or not self._setting.is_frozen(binding) or self._setting.reachable(binding):
            return False
        type_ = self._setting.type_of_binding(binding)
        return isinstance(type_, CType) and not type_.floating

    def _not_outside(self, node: Any, binding: Any) -> None:
        if binding is not None and self._setting.is_iterator(binding):
            raise refused(
                node,
                "iterator-outside",
                f"the iterator `{binding.name}` is used outside its loop, but inside the "
                "nest; use a variable of its own there.",
            )

    def _scalar_place(self, node: Any, context: Context) -> Place:
        place = self._setting.places.place(node, context)
        if isinstance(place.type, StructType):
            raise refused(
                node,
                "struct-assignment",
                f"the whole structure `{c_text(node)}` is copied; copy its members one by one.",
            )
        if isinstance(place.type, (PointerTo, ArrayOf, FunctionType)):
            raise refused(
                node,
                "pointer",
                f"the address `{c_text(node)}` is used as a value inside the nest; use the elements it leads to.",
            )
        return place

    def _beneath(self, node: Any, context: Context) -> None:
        """What is read to find the cell: subscripts, and pointers in memory."""
        match node:
            case c_ast.ArrayRef():
                self._base(node.name, context)
                self._base(node.subscript, context)
            case c_ast.StructRef():
                self._base(node.name, context)
            case c_ast.UnaryOp(op="*"):
                self._base(node.expr, context)

    def _base(self, node: Any, context: Context) -> None:
        """The reads of an expression of which only the address or value is wanted."""
        type_ = self._setting.type_of(node)
        if isinstance(type_, CType):
            self._visit(node, context)
            return
        match node:
            case c_ast.ID():
                self._pointer_definition(node, context)
            case c_ast.BinaryOp():
                self._base(node.left, context)
                self._base(node.right, context)
            case c_ast.Cast():
                self._base(node.expr, context)
            case c_ast.UnaryOp(op="&"):
                self._beneath(node.expr, context)
            case c_ast.ArrayRef() | c_ast.StructRef() | c_ast.UnaryOp(op="*"):
                self._beneath(node, context)
                if isinstance(type_, PointerTo):
                    self._pointer_cell(node, context)

    def _pointer_definition(self, node: Any, context: Context) -> None:
        """A pointer that was computed inside the nest is a value of the iteration like any other."""
        binding = self._setting.names.of(node)
        if (
            binding is not None
            and isinstance(self._setting.type_of_binding(binding), PointerTo)
            and self._setting.definition(binding, context) is not None
        ):
            self._found.append(Touch(self._setting.places.variable(binding), False, context, node))

    def _pointer_cell(self, node: Any, context: Context) -> None:
        cell = self._setting.places.place(node, context)
        if not cell.is_fixed(self._setting.loop_ids) or any(
            one.poly is None or one.poly.constant != 0 for one in cell.indices
        ):
            self._found.append(Touch(cell, False, context, node))

    def _write(self, node: Any, context: Context, update: Update | None = None) -> None:
        if isinstance(self._setting.type_of(node), StructType):
            self._whole(node, True, context)
            return
        place = self._scalar_place(node, context)
        if any(isinstance(step, Member) and step.bits is not None for step in place.steps):
            raise refused(
                node,
                "bit-field",
                f"`{c_text(node)}` is a bit-field, which shares its bytes with others; use a plain member.",
            )
        self._found.append(Touch(place, True, context, node, update))

    def _update(self, node: Any, context: Context, family: Update | None) -> None:
        self._not_an_iterator(node, context)
        self._beneath(node, context)
        place = self._scalar_place(node, context)
        self._found.append(Touch(place, False, context, node, family))
        self._write(node, context, family)

    def _assign(self, node: Any, context: Context) -> None:
        self._not_an_iterator(node.lvalue, context)
        target = node.lvalue
        if isinstance(self._setting.type_of(target), PointerTo):
            self._assign_pointer(node, context)
            return
        if node.op != "=":
            self._visit(node.rvalue, context)
            kind = family(node.op[:-1]) if id(node) in self._unused else ""
            work = self._work(target, node.rvalue)
            self._update(target, context, update(kind, self._type(target), work, self._type(node.rvalue)))
            return
        kind, reads = accumulation(node) if id(node) in self._unused else ("", 0)
        whole = self._extremes.get(id(node)) or \
            update(kind, self._type(target), self._type(node.rvalue), self._operand(node.rvalue, target))
        before = len(self._found)
        self._visit(node.rvalue, context)
        own = self._own_reads(before, target)
        if whole is not None and len(own) == reads:
            for at in own:
                self._found[at] = replace(self._found[at], update=whole)
        else:
            whole = None
        self._beneath(target, context)
        self._write(target, context, whole)

    def _operand(self, value: Any, target: Any) -> CType | None:
        """The type of ``e`` in ``x + e`` or ``e + x``."""
        if not isinstance(value, c_ast.BinaryOp):
            return None
        return self._type(value.right if c_text(value.left) == c_text(target) else value.left)

    def _work(self, left: Any, right: Any) -> CType | None:
        """The type in which an operator on both computes."""
        a, b = self._type(left), self._type(right)
        return self._setting.types.common(a, b) if a is not None and b is not None else None

    def _type(self, node: Any) -> CType | None:
        found = self._setting.type_of(node)
        return found if isinstance(found, CType) else None

    def _own_reads(self, since: int, target: Any) -> list[int]:
        """Which touches found since then read the very cell that is assigned."""
        return [at for at in range(since, len(self._found)) if c_text(self._found[at].node) == c_text(target)]

    def _assign_pointer(self, node: Any, context: Context) -> None:
        binding = self._setting.names.of(node.lvalue) if isinstance(node.lvalue, c_ast.ID) else None
        if node.op != "=" or binding is None or self._setting.definition(binding, context) is None:
            raise refused(
                node,
                "pointer-assigned",
                f"the pointer `{c_text(node.lvalue)}` gets another value inside the "
                "nest; use subscripts from a pointer that stays.",
            )
        self._base(node.rvalue, context)
        self._found.append(Touch(self._setting.places.variable(binding), True, context, node))

    def _not_an_iterator(self, node: Any, context: Context) -> None:
        binding = self._setting.names.of(node) if isinstance(node, c_ast.ID) else None
        if binding is not None and context.iterator(binding) is not None:
            raise refused(
                node,
                "iterator-changed",
                f"the iterator `{binding.name}` is changed inside its loop; only the loop's header may do that.",
            )
        self._not_outside(node, binding)


def _unused_values(node: Any) -> Iterator[Any]:
    """The expressions of a statement that stand for what they do: an update among them is nothing but an update.

    ``s += x;`` and both halves of ``s++, t += x;`` are; in ``a[n++] = x;`` the order of the updates of n can be seen.
    """
    if isinstance(node, c_ast.ExprList):
        for part in node.exprs:
            yield from _unused_values(part)
    else:
        yield node
