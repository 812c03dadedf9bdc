"""Sizes and offsets of objects, as the common ABIs for C lay them out.

Members in order, each at a multiple of its alignment; bit-fields share a unit of their declared type and do not
cross its
border (System V ABI, "Bit-Fields").  Where an attribute or ``#pragma pack`` may change that, the answer is "unknown".
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from pycparser import c_ast

from ..model import CType
from .kinds import ArrayOf, Member, PointerTo, Scope, StructType, Type

if TYPE_CHECKING:
    from .types import Types


class Layout:
    """Sizes of types and members of structures."""

    def __init__(self, types: Types) -> None:
        self._types = types
        self._known: dict[int, tuple[Any, tuple[Member, ...], int | None, int | None]] = {}
        self._open: set[int] = set()  # structures being laid out: one inside itself is an error of the user's

    def members(self, type: StructType) -> tuple[Member, ...] | None:
        """The members in order; None if the type is incomplete."""
        laid = self._laid(type)
        return None if laid is None else laid[1]

    def member(self, type: StructType, name: str) -> Member | None:
        """A member by name, searched also in anonymous structures."""
        for member in self.members(type) or ():
            if member.name == name:
                return member
            if member.name is None and isinstance(member.type, StructType):
                inner = self.member(member.type, name)
                if inner is not None:
                    known = member.offset is not None and inner.offset is not None
                    offset = member.offset + inner.offset if known else None  # type: ignore[operator]
                    return Member(inner.name, inner.type, inner.quals | member.quals, inner.bits, offset)
        return None

    def size(self, type: Type, scope: Scope) -> int | None:
        """Bytes of a type."""
        match type:
            case CType():
                return -(-type.bits // self._types.arithmetic.char_bits)
            case PointerTo():
                return self._types.arithmetic.pointer_bytes
            case ArrayOf():
                count = None if type.extent is None else self._types.constant(type.extent, scope)
                element = self.size(type.element, scope)
                return None if count is None or element is None else count * element
            case StructType():
                laid = self._laid(type)
                return None if laid is None else laid[2]
        return None

    def alignment(self, type: Type) -> int | None:
        """Bytes to whose multiples objects of a type are aligned."""
        match type:
            case CType():
                size = self.size(type, self._types.file_scope)
                size = size // 2 if size and "_Complex" in type.spelling else size
                if size is not None and size > self._types.arithmetic.pointer_bytes and not type.floating:
                    return size
                if self._types.arithmetic.pointer_bytes < 8 and size is not None and size > 4:
                    return None  # 4 or 8, as the ABI likes
                return size
            case PointerTo():
                return self._types.arithmetic.pointer_bytes
            case ArrayOf():
                return self.alignment(type.element)
            case StructType():
                laid = self._laid(type)
                return None if laid is None else laid[3]
        return None

    def _laid(self, type: StructType) -> tuple[Any, tuple[Member, ...], int | None, int | None] | None:
        node = type.node
        if node is None or id(node) in self._open:
            return None
        if id(node) not in self._known:
            self._open.add(id(node))
            try:
                self._known[id(node)] = (node, *self._lay_out(type))
            finally:
                self._open.discard(id(node))
        return self._known[id(node)]

    def _lay_out(self, type: StructType) -> tuple[tuple[Member, ...], int | None, int | None]:
        """Members, size and alignment."""
        char = self._types.arithmetic.char_bits
        members: list[Member] = []
        bits: int | None = 0 if self._types.layout_is_plain(type.node) else None  # where the next member may start
        size, largest, scope = 0, 1, self._types.structure_scope(type.node)
        for node in type.node.decls or ():
            if not isinstance(node, c_ast.Decl):
                continue
            kind = self._types.of(node, scope)
            width = None if node.bitsize is None else self._types.constant(node.bitsize, scope)
            start = 0 if type.kind == "union" and bits is not None else bits
            start, after, alignment = self._place(kind, node, width, start, scope)
            known = start is not None and node.bitsize is None
            members.append(
                Member(node.name, kind, self._types.qualifiers(node, scope), width, start // char if known else None)  # type: ignore[operator]
            )
            bits = after
            if bits is not None:
                size, largest = max(size, bits), max(largest, alignment)
        if bits is None and members:
            return tuple(members), None, None
        return tuple(members), -(-size // (largest * char)) * largest, largest

    def _place(
        self, type: Type, node: Any, width: int | None, start: int | None, scope: Scope
    ) -> tuple[int | None, int | None, int]:
        """First bit, bit after, and alignment of a member that may start at bit ``start``."""
        char = self._types.arithmetic.char_bits
        alignment = self.alignment(type)
        flexible = isinstance(type, ArrayOf) and type.extent is None
        size = 0 if flexible else self.size(type, scope)
        if start is None or alignment is None or size is None or (node.bitsize is not None and width is None):
            return None, None, 1
        if node.bitsize is None:
            start = -(-start // (alignment * char)) * alignment * char
            return start, start + size * char, alignment
        assert width is not None
        unit = size * char
        if width == 0 or start // unit != (start + width - 1) // unit:
            start = -(-start // unit) * unit
        return start, start + width, alignment if node.name else 1
