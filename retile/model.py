"""The values that travel between the rooms, in the order in which they come into being.

All are immutable.  Positions are offsets into the text of the user's file, in characters of the decoded text, and lines
and columns that count from 1.
"""

from __future__ import annotations

from enum import Enum
from typing import Any

from .affine import Affine, AllOf, Bound, Formula
from .tree import Buffer, Loop
from .values import dataclass

# ---------------------------------------------------------------- source


@dataclass(frozen=True)
class Span:
    """A piece of the user's text: ``text[start:end]``."""

    start: int
    end: int
    line: int  # of the first character
    column: int


@dataclass(frozen=True)
class Address:
    """What the user types: ``FILE:LINE`` or ``FILE:LINE:COLUMN``, of the outermost ``for``."""

    file: str
    line: int
    column: int | None = None  # printed only if the line has several loops

    def __str__(self) -> str:
        return f"{self.file}:{self.line}" + (f":{self.column}" if self.column is not None else "")


class RetileError(Exception):
    """The call is wrong or a file cannot be used (exit status 2).

    ``str()`` is the whole message: what is wrong, the file, line, source line and caret where there is one, and what to
    do next.
    """


@dataclass(frozen=True)
class Refusal:
    """Why a nest lies outside what retile reads.  A refusal is an answer, not an error."""

    line: int
    column: int
    code: str  # a short word of the trade, e.g. ``call``, ``goto``, ``nonaffine-write``
    reason: str  # one sentence: what stands there and what would have to change


# ---------------------------------------------------------------- nest


@dataclass(frozen=True)
class CType:
    """An arithmetic type of C."""

    spelling: str  # as it can be printed in a declaration: ``unsigned char``, ``size_t``, ``double``
    bits: int
    signed: bool
    floating: bool = False

    @property
    def smallest(self) -> int:
        """The smallest value of an integer type."""
        return -(1 << (self.bits - 1)) if self.signed else 0

    @property
    def largest(self) -> int:
        """The largest value of an integer type."""
        return (1 << (self.bits - (1 if self.signed else 0))) - 1

    def fits(self, other: CType) -> bool:
        """True if the other integer type has all values of this one."""
        return other.smallest <= self.smallest and self.largest <= other.largest


@dataclass(frozen=True)
class Parameter:
    """An integer that keeps its value while the nest runs: a size, a constant, an outer iterator."""

    symbol: str  # its name in forms
    text: str  # the C expression that yields it inside the function: ``n``, ``g->n``, ``(n > 4 ? n : 4)``
    type: CType
    kind: str  # ``argument``, ``local``, ``global``, ``member``, ``outer iterator``, ``expression``
    # Over other parameters: where it holds the nest surely evaluates the text, so that it may be evaluated ahead of the
    # nest.  False (an empty ``AnyOf``) for what reads memory or may trap, and stands under a condition on data.
    readable: Formula = AllOf()


class StorageKind(Enum):
    """What kind of object a name stands for."""

    POINTER = "pointer"  # reached through a pointer: where it points is not known
    ARRAY = "array"  # a declared array object
    SCALAR = "scalar"  # a declared object without subscripts


class ScalarClass(Enum):
    """What the nest does with a scalar (only for storages of kind scalar)."""

    PARAMETER = "parameter"  # only read
    PRIVATE = "private"  # written before it is read in each iteration of the loops ``private_to``
    ACCUMULATOR = "accumulator"  # x = x op e in every access
    CARRIED = "carried"  # any other


@dataclass(frozen=True)
class Storage:
    """A set of cells that are told apart by subscripts."""

    name: str  # as it is shown and used in accesses: ``a``, ``g->depth``, ``p.x`` for one member of an array of structs
    object: str  # name of the object or pointer that it lies in; storages of one object differ by member, never overlap
    kind: StorageKind
    element: CType | str  # type of a cell; the spelling alone if it is not arithmetic
    element_bytes: int | None  # size of the step of the last subscript (of the struct, for a member); None if unknown
    shape: tuple[Affine | None, ...]  # declared extents, outermost first; None where the code states none
    # For a flattened array a[i*ld + j] the distance between two values of each subscript in elements, as C text; empty
    # for one subscript and for true multi-dimensional arrays.
    strides: tuple[str, ...] = ()
    restrict: bool = False
    scope: str = "argument"  # ``argument``, ``local``, ``static``, ``global``, ``block`` (declared inside the nest)
    scalar: ScalarClass | None = None
    private_to: tuple[str, ...] = ()  # ids of the loops whose every iteration has a value of its own
    live_after: bool = True  # its value after the nest can be seen
    pointer_text: str = ""  # C expression of the address of the first cell: ``a``, ``g->depth``, ``&x``
    const: bool = False
    # For a member of structures in an array (``t.x``) the array of whole structures that it lies in, with the first of
    # its subscripts: their distance in memory is that of the structures.
    whole: Storage | None = None
    readable: Formula = AllOf()  # where the address may be computed ahead of the nest, as for a parameter


class Syntax:
    """A node of the syntax tree kept beside a value: it is no part of what the value says, so all are equal."""

    __slots__ = ("node",)

    def __init__(self, node: Any = None) -> None:
        self.node = node

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Syntax)

    def __hash__(self) -> int:
        return 0

    def __repr__(self) -> str:
        return "Syntax()"


@dataclass(frozen=True)
class Access:
    """One read or write of a storage by a statement."""

    storage: str
    write: bool
    subscripts: tuple[Affine, ...] | None  # None: any cell of the storage
    certain: bool  # False under a condition on data: it counts as happening, but proves nothing about sizes
    span: Span
    # For the read and write of an update ``x = x op e``: ``+``, ``*``, ``min`` ...; updates of one kind commute.
    update: str = ""
    exact_update: bool = False  # any order of such updates gives the same bits
    syntax: Syntax = Syntax()  # the expression in the syntax tree
    where: Formula = AllOf()  # what holds where it happens beyond the statement's domain: the condition of a ``? :``


@dataclass(frozen=True)
class Statement:
    """An expression statement or declaration of the nest, also a condition of an ``if`` (which only reads)."""

    id: str  # its line, ``31``; ``31b`` for the second one on a line
    text: str  # one line of the user's text, as tables show it
    span: Span
    loops: tuple[str, ...]  # ids of the loops of the nest around it, outermost first
    domain: Formula  # which values its iterators take: bounds, strides and known guards
    accesses: tuple[Access, ...]

    @property
    def line(self) -> int:
        """The line of its first character."""
        return self.span.line


@dataclass(frozen=True)
class LoopText:
    """How the user wrote a loop.  Forms name its iterator by the loop's id."""

    id: str  # ``i``, or ``i@14`` where several share the name, or ``i@14:9`` where they also share the line
    iterator: str  # the C variable
    type: CType
    declared_in_for: bool
    first: Bound  # the first value
    last: Bound  # the limit of the last value, inclusive: upper for step > 0, lower for step < 0
    step: int
    span: Span  # from ``for`` to the end of its body
    header: Span  # from ``for`` to its closing parenthesis
    body: Span  # the statement after it, braces included
    first_text: str  # C text of the first value, e.g. ``n - 1``; for ``i-- > 0`` the first value used
    bound_text: str  # C text of the bound as compared, e.g. ``n``
    relation: str  # the comparison with the iterator on the left: ``<``, ``<=``, ``>``, ``>=``, ``!=``, ``-->`` for i-- > b
    outer: tuple[str, ...]  # ids of the loops around it
    iterator_live_after: bool  # the iterator's value after the nest can be seen
    # True if the first value depends on no other loop of the nest: chunks count from it
    independent: bool


class AssumptionCode(Enum):
    """Kinds of facts that the code does not state."""

    NO_OVERLAP = "no-overlap"  # two storages share no byte that the nest touches
    ROW_BOUND = "row-bound"  # subscripts of a flattened array stay inside their row
    UNCHANGED = "unchanged"  # a bound or pointer is not changed by a store of the nest
    NO_WRAP = "no-wrap"  # unsigned arithmetic does not wrap
    RELATION = "relation"  # a relation between sizes such as n >= 1
    OTHER = "other"  # cannot be tested when the function is called


@dataclass(frozen=True)
class Assumption:
    """A fact that a verdict may rest on."""

    code: AssumptionCode
    text: str  # one sentence, e.g. ``a and c do not overlap``
    condition: Formula | None = None  # the fact over parameters, for all codes but no-overlap, unchanged and other
    storages: tuple[str, ...] = ()  # the two that must not overlap, for no-overlap and unchanged; the one whose rows must not
    given: bool = False  # the user vouches for it
    # False if the test would need what is not known ahead of the nest: which cells it touches of the two storages, or
    # what it reads from memory under a condition on data.
    ranges_known: bool = True

    @property
    def testable(self) -> bool:
        """True if the variant can test it when the function is called."""
        return self.code is not AssumptionCode.OTHER and self.ranges_known and \
            (self.condition is not None or len(self.storages) == 2)


@dataclass(frozen=True)
class Nest:
    """A ``for`` and all that is in it, read as loops, statements and affine accesses."""

    address: Address
    function: str
    span: Span  # from the first character of ``for`` to the end of its body
    tree: tuple[Loop]  # the original order, as a loop tree; leaves map every iterator to itself
    loops: tuple[LoopText, ...]  # in text order
    statements: tuple[Statement, ...]  # in text order
    parameters: tuple[Parameter, ...]
    storages: tuple[Storage, ...]
    facts: tuple[Formula, ...]  # what holds of the parameters whenever the nest runs and is defined
    assumptions: tuple[Assumption, ...]
    names_in_scope: frozenset[str]  # every identifier of the translation unit: none may be chosen anew

    def loop(self, id: str) -> LoopText:
        """The loop with this id; KeyError if there is none."""
        return _by(self.loops, "id", id)

    def statement(self, id: str) -> Statement:
        """The statement with this id; KeyError if there is none."""
        return _by(self.statements, "id", id)

    def storage(self, name: str) -> Storage:
        """The storage with this name; KeyError if there is none."""
        return _by(self.storages, "name", name)


def _by(values: tuple[Any, ...], attribute: str, wanted: str) -> Any:
    for value in values:
        if getattr(value, attribute) == wanted:
            return value
    raise KeyError(wanted)


# ---------------------------------------------------------------- plan


@dataclass(frozen=True)
class Term:
    """One loop of a plan: ``i``, ``i:64`` or, skewed, ``(2*t+i):64``."""

    form: tuple[tuple[str, int], ...]  # (loop id, coefficient): one pair with coefficient 1 unless skewed
    chunk: int | str | None  # iterations of a chunk, or the name of the constant that says; None for a bare term
    start: int  # where it stands in the plan's text
    end: int

    @property
    def loop(self) -> str:
        """The id of the loop of a term that is not skewed."""
        return self.form[0][0]


@dataclass(frozen=True)
class Place:
    """Where a statement stands with regard to one term of a plan."""

    position: int  # in the list at this level; the text's order among those before, in and after the term's loop
    # Its moment in the term's loop, in its iterators and parameters; None outside the loop, or in every iteration for a
    # copied statement.  For a chunk of unknown size the form that is cut.
    form: Affine | None


@dataclass(frozen=True)
class Alignment:
    """A statement outside a loop that stands where the loop has a value."""

    statement: str
    loop: str
    value: Affine  # in the statement's iterators and the parameters
    chunks_only: bool  # it goes with the chunk that holds the value, but before or after its single iterations


@dataclass(frozen=True)
class Plan:
    """A new order for a nest."""

    text: str  # as the user wrote it, blanks made single
    terms: tuple[Term, ...]  # outermost first
    options: tuple[tuple[str, str], ...] = ()  # after the ``;``: (word, value)
    places: tuple[tuple[str, tuple[Place, ...]], ...] = ()  # per statement id, one place per term
    aligned: tuple[Alignment, ...] = ()
    copied: tuple[str, ...] = ()  # statements that run again wherever their value is needed
    kept: tuple[str, ...] = ()  # private scalars whose values wait in a small array of the variant's own
    buffers: tuple[Buffer, ...] = ()  # outer ones first
    inner: tuple[tuple[str, int], ...] = ()  # kept scalars with an array of their own in the loops before a term
    threaded: int | None = None  # the term whose loop's iterations threads share
    unrolled: tuple[str, ...] = ()  # loops whose full chunks are written out

    def places_of(self, statement: str) -> tuple[Place, ...]:
        """The places of one statement; KeyError if the plan has none for it."""
        return dict(self.places)[statement]

    @property
    def moved(self) -> tuple[str, ...]:
        """The ids of all loops that the plan names, in its order."""
        return tuple(dict.fromkeys(loop for term in self.terms for loop, _ in term.form))

    @property
    def remainder(self) -> str:
        """How partial chunks are done: as the options say; what is written out or buffered is fast in full chunks apart."""
        return dict(self.options).get("remainder", "peel" if self.unrolled or self.buffers else "clamp")

    @property
    def order_text(self) -> str:
        """The terms without the options."""
        return self.text.split(";")[0].strip()


class Verdict(Enum):
    """The answer about a plan."""

    LEGAL = "legal"
    ILLEGAL = "illegal"
    UNPROVEN = "unproven"
    REFUSED = "refused"


@dataclass(frozen=True)
class Instance:
    """One execution of a statement."""

    statement: str
    line: int
    iterators: tuple[tuple[str, int], ...]  # value of the C variable of every loop around it, outer ones too


@dataclass(frozen=True)
class Violation:
    """Two instances that share a cell, one of them writing, whose order the plan reverses."""

    kind: str  # ``flow``, ``anti``, ``output``
    array: str
    parameters: tuple[tuple[str, int], ...]  # sizes at which it happens
    source: Instance  # first in the original order
    target: Instance
    cell: tuple[int, ...] | None = None  # the subscripts they share; None if any cell may be meant
    note: str = ""  # why the order of two updates ``x = x op e`` counts


@dataclass(frozen=True)
class Unproven:
    """A pair of accesses whose order cannot be decided."""

    source: str  # statement id
    target: str
    reason: str
    needs: str  # the fact that would settle it


@dataclass(frozen=True)
class Judgement:
    """The verdict about a plan with its evidence."""

    verdict: Verdict
    plan: Plan
    violations: tuple[Violation, ...] = ()
    unproven: tuple[Unproven, ...] = ()
    refusals: tuple[Refusal, ...] = ()
    assumptions: tuple[Assumption, ...] = ()  # those that the verdict rests on
    instead: str | None = None  # a legal plan near the one asked for


# ---------------------------------------------------------------- rewrite


@dataclass(frozen=True)
class Variant:
    """The C that a plan gives."""

    plan: Plan
    text: str  # the whole file
    judgement: Judgement
    tree: tuple[Loop, ...] = ()  # what it executes, as judged
    nest_text: str = ""  # what stands in place of the nest's span
    includes: tuple[str, ...] = ()  # headers that it needs beyond those of the file, e.g. ``<stdint.h>``
