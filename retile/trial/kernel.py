"""A nest in a file of its own: what the compiler is given to time and to verify.

The file is the user's, so that its types, macros and helpers are there as the nest saw them, with two changes.  The
bodies of functions that the nest does not call are emptied, directives inside them excepted.  And the function around
the nest ends where the nest begins; there a function stands that takes what the nest uses as arguments::

    void smooth(int n, double z[n]) {            void smooth(int n, double z[n]) {
        double keep = 0.5;                 ->
        for (int i = 0; i < n; i++)              } void trial_kernel(int n, double z[n], double keep) {
            z[i] *= keep;                            for (int i = 0; i < n; i++)
        report(z);                                       z[i] *= keep;
    }                                            } void trial_rest(void) {

                                                 }

Lines stay where they were.  What the function leaves in scalars goes out through pointers.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

from pycparser import c_ast, c_generator

from ..model import Nest, RetileError, ScalarClass, StorageKind
from ..templating import environment
from .declared import Arithmetic, Array, Pointer, Record, Scope, Variable, names_in, scope_at, type_text, walk
from .memory import Memory, declared_type, memory_of, plain

if TYPE_CHECKING:
    from ..source import Source

_WORD = re.compile(r"(?<![\w.])(?<!->)[A-Za-z_]\w*")


@dataclass(frozen=True)
class Kernel:
    """Everything that is the same for all kernels of one nest."""

    source: Source
    nest: Nest
    node: Any  # the For node
    function: Any  # the FuncDef node around it
    scope: Scope
    memory: Memory
    prefix: str  # no name of the file begins with it
    derived: tuple[Variable, ...]  # pointers that the function works out from others before the nest
    outs: tuple[Variable, ...]  # scalars whose value after the nest can be seen
    kept: frozenset[str]  # functions whose bodies stay

    def text(self, nest_text: str | None = None, includes: Sequence[str] = ()) -> bytes:
        """The kernel's file, in the encoding of the user's, for the original nest, or for a text that replaces it."""
        source, span = self.source, self.nest.span
        body = source.span(self.function.body)
        if body is None:
            raise RetileError(f"{self.nest.address}: the function {self.nest.function} comes out of a macro")
        middle = source.slice(span) if nest_text is None else nest_text
        edits = [
            (body.start + 1, span.start, self._opening(body.start + 1, span, includes)),
            (span.start, span.end, middle),
            (span.end, body.end - 1, self._closing(span.end, body.end - 1)),
            *self._others,
        ]
        return source.encode(self._line(1) + _edited(source.text, edits) + "\n" + self._face())

    @cached_property
    def _others(self) -> list[tuple[int, int, str]]:
        """The edits that empty the functions which the nest does not call."""
        others = [
            function
            for function in self.source.functions
            if function is not self.function and function.decl.name not in self.kept
        ]
        return [(start, end, self._emptied(start, end)) for start, end in map(self._inside, others)]

    def _inside(self, function: Any) -> tuple[int, int]:
        """The text between a function's braces; nothing of it if it is not sure where they are."""
        span = self.source.function_span(function)
        if span is None:
            return 0, 0
        depth = 0
        for token in reversed(self.source.tokens_in(span.start, span.end)):
            if token.kind == "directive" and depth:
                body = self.source.span(function.body)
                return (body.start + 1, body.end - 1) if body else (0, 0)
            if token.kind == "punct" and token.text in "{}":
                depth += 1 if token.text == "}" else -1
                if depth == 0:
                    return token.end, span.end - 1
        return 0, 0

    def _opening(self, start: int, span: Any, includes: Sequence[str]) -> str:
        lines = "".join(_include(header) for header in includes)
        lines = f"\n{lines}{self._line(span.line)}" if lines else ""
        types = " ".join(self.scope.local_types)
        head = (
            f"{types} void {self.prefix}_kernel({self._parameters()}) {{ {' '.join(map(_with_init, self.derived))} "
        )
        return f"{self._emptied(start, span.start)}}} {lines}{head}"

    def _closing(self, start: int, end: int) -> str:
        back = "".join(f" *{self._out(variable)} = {variable.name};" for variable in self.outs)
        return f"{back} }} void {self.prefix}_rest(void) {{ {self._emptied(start, end)}"

    def _line(self, number: int) -> str:
        path = self.source.path.replace("\\", "\\\\").replace('"', '\\"')
        return f'#line {number} "{path}"\n'

    def _emptied(self, start: int, end: int) -> str:
        """The text between two offsets without all but line ends and directives."""
        parts, at = [], start
        for token in self.source.tokens_in(start, end):
            if token.kind == "directive" and token.end <= end:
                parts += ["\n" * self.source.text.count("\n", at, token.start), token.text]
                at = token.end
        return "".join(parts) + "\n" * self.source.text.count("\n", at, end)

    def _out(self, variable: Variable) -> str:
        return f"{self.prefix}_out_{variable.name}"

    def _parameters(self) -> str:
        parts = [_parameter(variable) for variable in self.memory.arguments]
        parts += [f"{type_text(variable.node)} *{self._out(variable)}" for variable in self.outs]
        return ", ".join(parts) or "void"

    def _face(self) -> str:
        arguments = [self._argument(variable, place) for place, variable in enumerate(self.memory.arguments)]
        place = {variable.name: at for at, variable in enumerate(self.memory.arguments)}
        arguments += [f"{self.prefix}_argument[{place[variable.name]}]" for variable in self.outs]
        return (
            environment()
            .get_template("trial_face.c.j2")
            .render(
                p=self.prefix,
                blocks=self.memory.blocks,
                links=self.memory.links,
                cells=self.memory.cells,
                types=self.memory.types,
                late_definitions=self.memory.late_definitions,
                prototype=self._parameters(),
                arguments=", ".join(arguments),
                argument_count=len(self.memory.arguments),
            )
        )

    def _argument(self, variable: Variable, place: int) -> str:
        of = declared_type(self.scope, variable)
        at = f"{self.prefix}_argument[{place}]"
        if isinstance(of, Array):
            return at
        return f"*(void **){at}" if isinstance(of, Pointer) else f"*({of.text} *){at}"


def kernel_of(source: Source, nest: Nest, variant_texts: Iterable[str] = ()) -> Kernel:
    """What all kernels of a nest share; variants may use more of the function's names than the nest does.

    Raises RetileError with the place if the nest cannot be taken out of its function.
    """
    function, node = _find(source, nest)
    scope = scope_at(source.ast, function, node)
    _without_shadowed(scope, node)
    named = names_in(node).union(*(_WORD.findall(text) for text in variant_texts))
    derived = _derived(nest, scope, named)
    try:
        memory = memory_of(scope, node, named, derived)
    except RetileError as problem:
        raise RetileError(
            source.complaint(
                nest.span.line, nest.span.column, str(problem), "move the nest into a function of its own"
            )
        ) from None
    return Kernel(
        source,
        nest,
        node,
        function,
        scope,
        memory,
        _free_prefix(nest),
        derived,
        _outs(nest, memory),
        _called(source, node),
    )


def _find(source: Source, nest: Nest) -> tuple[Any, Any]:
    for function in source.functions:
        if function.decl.name != nest.function:
            continue
        for node in walk(function.body):
            if isinstance(node, c_ast.For) and source.span(node) == nest.span:
                return function, node
    raise RetileError(f"{nest.address}: the nest is not in this file any more; read it again")


def _derived(nest: Nest, scope: Scope, named: set[str]) -> tuple[Variable, ...]:
    """Pointers such as ``end = z + n`` that the nest's accesses have been traced through, in order of declaration."""
    roots = {plain(storage.object).split(".")[0] for storage in nest.storages}
    found: list[Variable] = []
    waiting = set(named)
    while waiting:
        variable = scope.variables.get(waiting.pop())
        if (
            variable is None
            or variable in found
            or variable.name in roots
            or variable.place != "local"
            or variable.init is None
            or not isinstance(declared_type(scope, variable), Pointer)
        ):
            continue
        if not any(isinstance(part, c_ast.FuncCall) for part in walk(variable.init)):
            found.append(variable)
            waiting |= names_in(variable.init)
    order = list(scope.variables)
    return tuple(sorted(found, key=lambda variable: order.index(variable.name)))


def _with_init(variable: Variable) -> str:
    value = c_generator.CGenerator().visit(variable.init)
    return f"{type_text(variable.node, variable.name, qualifiers=True)} = {value};"


def _without_shadowed(scope: Scope, node: Any) -> None:
    """Iterators that the outermost ``for`` declares hide what was declared outside."""
    for decl in node.init.decls if isinstance(node.init, c_ast.DeclList) else ():
        scope.variables.pop(decl.name, None)


def _outs(nest: Nest, memory: Memory) -> tuple[Variable, ...]:
    """The function's scalars that the nest changes and that can be seen afterwards."""
    live = {loop.iterator for loop in nest.loops if loop.iterator_live_after and not loop.declared_in_for}
    for storage in nest.storages:
        if (
            storage.kind is StorageKind.SCALAR
            and storage.live_after
            and storage.scope != "block"
            and storage.scalar is not ScalarClass.PARAMETER
        ):
            live.add(storage.name.split(".")[0])
    return tuple(
        variable
        for variable in memory.arguments
        if variable.name in live
        and not variable.constant
        and isinstance(declared_type(memory.scope, variable), Arithmetic | Record)
    )


def _called(source: Source, node: Any) -> frozenset[str]:
    """The functions of the file that the nest may call, directly or through others."""
    functions = {function.decl.name: function for function in source.functions}
    found: set[str] = set()
    waiting = names_in(node)
    while waiting:
        name = waiting.pop()
        if name in functions and name not in found:
            found.add(name)
            waiting |= names_in(functions[name].body)
    return frozenset(found)


def _parameter(variable: Variable) -> str:
    """The variable as a parameter; an array object overlaps nothing, which its parameter keeps saying."""
    if variable.place == "local" and isinstance(variable.node, c_ast.ArrayDecl):
        node = c_ast.ArrayDecl(variable.node.type, variable.node.dim, ["__restrict__"])
        return type_text(node, variable.name, qualifiers=True)
    return type_text(variable.node, variable.name, qualifiers=True)


def _free_prefix(nest: Nest) -> str:
    prefix = "trial"
    while any(name.startswith(prefix + "_") for name in nest.names_in_scope):
        prefix += "s"
    return prefix


def _include(header: str) -> str:
    header = header.strip()
    if header.startswith("#"):
        return header + "\n"
    return f"#include {header}\n" if header[:1] in ("<", '"') else f"#include <{header}>\n"


def _edited(text: str, edits: list[tuple[int, int, str]]) -> str:
    parts, at = [], 0
    for start, end, new in sorted(edits):
        parts += [text[at:start], new]
        at = end
    return "".join(parts) + text[at:]
