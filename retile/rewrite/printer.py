"""A loop tree as C text: headers written anew where they must be, the user's statements moved by whole lines.

The tree is taken as it is; nothing here decides what runs when.  Positions, braces, indentation and comments are the
user's (``layout``, ``style``), headers come from ``loops``.
"""

from __future__ import annotations


from ..affine import Affine, equal, negate
from ..model import LoopText, Nest
from ..tree import Copy, Guard, Kept, Loop, Node, Verbatim
from ..values import replace
from .chunks import Loops
from .expression import Expression, condition, express
from .layout import InternalError, NestText, Remarks, instances
from .loops import Opened, Place
from .style import Style


class Printer:
    """Prints one tree; remarks that found no place are left in ``homeless``."""

    def __init__(self, nest: Nest, layout: NestText, style: Style, loops: Loops, kept: frozenset[str]) -> None:
        self._nest = nest
        self._layout = layout
        self._style = style
        self._loops = loops
        self._ids = {loop.id for loop in nest.loops}
        self._remarks = layout.remarks(kept)

    @property
    def homeless(self) -> list[str]:
        """The comments that no printed loop carried."""
        return [self._layout.text[start:end] for remarks in self._remarks.values()
                for start, end in (*remarks.before, *remarks.behind, *remarks.after)]

    def nodes(self, nodes: tuple[Node, ...], place: Place, indent: str) -> list[str]:
        """The lines of some nodes that run one after the other."""
        lines: list[str] = []
        at = 0
        while at < len(nodes):
            node = nodes[at]
            if isinstance(node, Loop):
                printed, place = self._loop(node, place, indent)
                lines += printed
            elif isinstance(node, Guard):
                both = at + 1 < len(nodes) and self._opposite(node, nodes[at + 1])
                lines += self._guard(node, nodes[at + 1] if both else None, place, indent)
                at += both
            elif isinstance(node, Verbatim):
                lines.append(indent + self._layout.moved(self._layout.piece(node), indent))
            elif isinstance(node, Kept):
                lines.append(f"{indent}{self._declaration(node.scalar)} {self._cells(node.scalar)}"
                             f"{''.join(f'[{extent}]' for extent in node.shape)};")
                lines += self.nodes(node.body, place, indent)
            elif isinstance(node, Copy):
                lines.append(indent + self._copy(node, place))
            else:
                raise InternalError(f"{self._nest.address}: statement {node.statement} has no text of its own")
            at += 1
        return lines

    # ---------------------------------------------------------------- loops

    def _loop(self, loop: Loop, place: Place, indent: str) -> tuple[list[str], Place]:
        opened = self._loops.open(loop, place)
        remarks = self._take(loop)
        lines = [indent + self._layout.moved(extent, indent) for extent in remarks.before]
        lines += self._indented(opened.before, indent)
        behind = "".join(" " + self._layout.moved(extent, indent) for extent in remarks.behind)
        inner = indent + self._style.braced_step
        if opened.condition:
            lines += self._style.block(f"if ({opened.condition})", self._body(loop, opened, inner, behind), indent)
        elif opened.declared:
            body = [f"{inner}{opened.declared};", *self._body(loop, opened, inner, behind)]
            lines += [f"{indent}{{", *body, f"{indent}}}"]
        else:
            lines += self._body(loop, opened, indent, behind)
        after = [self._layout.moved(extent, indent) for extent in remarks.after]
        if after:
            lines[-1] += " " + after[0]
            lines += [indent + text for text in after[1:]]
        return lines, opened.outside

    def _take(self, loop: Loop) -> Remarks:
        """The comments of a source loop, for the first tree loop that runs over its iterations one by one."""
        return self._remarks.pop(loop.symbol, Remarks()) if loop.symbol in self._ids else Remarks()

    def _indented(self, lines: tuple[str, ...], indent: str) -> list[str]:
        """Generated lines; a mark at the start asks for one more level."""
        return [indent + line.replace("\x01", self._style.step) for line in lines]

    def _single(self, loop: Loop) -> bool:
        """True for a loop of exactly one iteration: a value that follows from the loops around."""
        return loop.symbol in self._ids and isinstance(loop.lower, Affine) and loop.lower == loop.upper and \
            abs(loop.step) == 1

    def _assigned(self, loop: Loop, place: Place, indent: str) -> list[str]:
        """The one iteration of a loop, its iterator set before it."""
        source = self._loops.source(loop.symbol)
        remarks = self._take(loop)
        value = self._loops.in_type(Affine.of(loop.lower), source.type, place.scope) \
            if isinstance(loop.lower, Affine) else None
        assert value is not None
        declared = f"const {source.type.spelling} " if source.declared_in_for else ""
        lines = [indent + self._layout.moved(extent, indent)
                 for extent in (*remarks.before, *remarks.behind, *remarks.after)]
        lines.append(f"{indent}{declared}{source.iterator} = {value.text};")
        scope = place.scope.naming(loop.symbol, Expression(source.iterator, source.type), loop.constraints())
        return lines + self.nodes(loop.body, Place(scope, place.limits, place.around | {loop.symbol}), indent)

    def _body(self, loop: Loop, opened: Opened, indent: str, behind: str) -> list[str]:
        given, place = self._given(loop, opened.inside)
        only = loop.body[0] if len(loop.body) == 1 else None
        inner = indent + (self._style.braced_step if self._surely_braced(loop, opened, bool(given)) else self._style.step)
        body = self._indented((*opened.first, *given), inner)
        single = isinstance(only, Loop) and self._single(only)
        body += self._assigned(only, place, inner) if isinstance(only, Loop) and single else \
            self.nodes(loop.body, place, inner)
        braced = self._surely_braced(loop, opened, bool(given)) or single or self._needs_braces(loop.body[0], body)
        return self._style.block(opened.header, body, indent, braced, behind)

    def _surely_braced(self, loop: Loop, opened: Opened, given: bool) -> bool:
        """True if the body gets braces, as far as that shows before it is printed.

        Where the style indents braces, so that a body's place depends on them, every doubtful loop gets some.
        """
        if self._layout.braced(self._nest.loop(loop.of)) or len(loop.body) != 1 or opened.first or given:
            return True
        inner = loop.body[0]
        plain = isinstance(inner, Verbatim) and self._layout.statement_count(inner) == 1 or \
            isinstance(inner, Loop) and inner.symbol in self._ids and self._loops.unchanged(inner)
        return not plain and self._style.braced_step != self._style.step

    def _needs_braces(self, node: Node, body: list[str]) -> bool:
        """True for a body of more than one statement, or one that a reader could take for it."""
        if isinstance(node, Loop):
            first = body[0].lstrip()
            return not first.startswith("for")
        if isinstance(node, Kept):
            return True
        if isinstance(node, Verbatim):
            return self._layout.statement_count(node) != 1
        return False

    def _given(self, loop: Loop, place: Place) -> tuple[list[str], Place]:
        """The user's iterators that a skewed sum took the place of, as soon as their values are known."""
        lines: list[str] = []
        wanted = dict(instances(loop.body))
        for name, form in wanted.items():
            source = self._loops.source(name)
            if name in place.around or form == Affine.of(name) or not place.scope.sees(form.names()) or \
                    self._same_variable(source, form):
                continue
            value = self._loops.in_type(form, source.type, place.scope)
            declared = f"const {source.type.spelling} " if source.declared_in_for else ""
            lines.append(f"{declared}{source.iterator} = {value.text};")
            variable = Expression(source.iterator, source.type)
            place = Place(place.scope.naming(name, variable, equal(Affine.of(name), form)), place.limits, place.around | {name})
        return lines, place

    # ---------------------------------------------------------------- kept values

    def _declaration(self, scalar: str) -> str:
        element = self._nest.storage(scalar).element
        return element if isinstance(element, str) else element.spelling

    def _cells(self, scalar: str) -> str:
        """The name of the array in which a scalar's values wait."""
        return self._loops.name(("kept", scalar), f"{self._variable(scalar)}_kept")

    def _variable(self, scalar: str) -> str:
        return self._nest.storage(scalar).pointer_text.removeprefix("&") or scalar

    def _copy(self, copy: Copy, place: Place) -> str:
        """``sum_kept[i - i_from] = sum;`` or the other way round."""
        index = "".join(f"[{express(form, place.scope).text}]" for form in copy.index)
        cell, scalar = self._cells(copy.scalar) + index, self._variable(copy.scalar)
        if copy.store:
            return f"{cell} = {scalar};"
        return f"{self._declaration(copy.scalar)} {scalar} = {cell};" if copy.declares else f"{scalar} = {cell};"

    def _same_variable(self, source: LoopText, form: Affine) -> bool:
        """True if the value is that of another loop of the user's over the same variable."""
        names = form.names() & self._ids
        return len(names) == 1 and form == Affine.of(*names) and self._nest.loop(*names).iterator == source.iterator

    # ---------------------------------------------------------------- guards

    def _opposite(self, node: Guard, following: Node) -> bool:
        return isinstance(following, Guard) and node.span is None and following.span is None and \
            node.condition is not None and following.condition == negate(node.condition)

    def _guard(self, guard: Guard, otherwise: Node | None, place: Place, indent: str) -> list[str]:
        inside = place
        if guard.condition is not None:
            inside = replace(place, scope=place.scope.knowing(guard.condition))
        if guard.span is not None:
            text = self._layout.moved(guard.span, indent)
            text = f"!({text})" if self._layout.in_false_branch(guard) else text
        elif guard.condition is not None:
            text = self._style.wrapped(condition(guard.condition, place.scope), indent + "if (")
        else:
            raise InternalError(f"{self._nest.address}: a condition has no text")
        inner = indent + self._style.braced_step
        body = self.nodes(guard.body, inside, inner)
        # always in braces: an else of the user's further out must not find this if
        lines = self._style.block(f"if ({text})", body, indent)
        if isinstance(otherwise, Guard):
            assert otherwise.condition is not None
            apart = replace(place, scope=place.scope.knowing(otherwise.condition))
            lines = self._style.otherwise(lines, self.nodes(otherwise.body, apart, inner), indent)
        return lines
