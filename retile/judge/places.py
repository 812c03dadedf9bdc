"""Lvalues: variables that live in the generated code's own variables, and cells of memory."""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import Any

from pycparser import c_ast

from .conversions import Conversions
from .declarations import Variable
from .kinds import Array, Length, Pointer, Struct, Unsupported, cells_of
from .writer import Operand, Place, as_integer, sum_of


class Again(Exception):
    """The function has to be generated anew: a fact about one of its variables came to light."""


class Places(Conversions, ABC):
    """Generates code that finds, reads and writes cells; ``Arithmetic`` builds on it."""

    @abstractmethod
    def value(self, node: Any) -> Operand:
        """The value of an expression."""

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
            value = as_integer(text)
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
        return Place(inner, base.object, sum_of(self.key(base), str(shift)), name=node.field.name, private=base.private)

    def key(self, place: Place) -> str:
        """The byte offset of a place."""
        if not place.index:
            return place.offset
        size = self.size_text(place.kind)
        index, unit = as_integer(place.index), as_integer(size)
        if index is not None and unit is not None:
            return sum_of(place.offset, str(index * unit))
        text = place.index if place.index.isidentifier() else f"({place.index})"
        return sum_of(place.offset, f"{text} * {size}" if size != "1" else text)

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
        values = [self.load(Place(leaf, source.text, sum_of(origin, str(shift))))
                  for shift, (_, leaf) in cells_of(target.kind).items()]
        for (shift, (_, leaf)), value in zip(cells_of(target.kind).items(), values, strict=True):
            self.store(Place(leaf, target.object, sum_of(to, str(shift))), value)
