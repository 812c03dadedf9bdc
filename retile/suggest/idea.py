"""A plan that may be worth a trial, before anybody asked whether it is legal."""

from __future__ import annotations

from collections.abc import Iterable

from ..model import Plan
from ..values import dataclass
from .view import View


@dataclass(frozen=True)
class Idea:
    """A plan's text with the reason for it."""

    # ``order``, ``chunks``, ``register block``, ``unroll and jam``, ``transposition``, ``time skewing``, ``wavefront``
    kind: str
    text: str  # as a PLAN argument takes it
    why: str  # one sentence
    worth: float  # about how many times faster it may be; only ranks ideas
    family: str = ""  # only the first legal ones of a family are kept; by default the kind

    @property
    def relatives(self) -> str:
        """What it competes with."""
        return self.family or self.kind


@dataclass(frozen=True)
class Suggestion:
    """A legal plan worth a trial."""

    plan: Plan
    kind: str
    why: str


@dataclass(frozen=True)
class Advice:
    """What is worth trying, the most promising first; or why the nest is best left as it is."""

    suggestions: tuple[Suggestion, ...]
    leave: str | None  # one sentence; None if there are suggestions
    assumed: tuple[str, ...] = ()  # what was taken for granted about sizes and the machine


def order_text(terms: Iterable[str], *options: str) -> str:
    """A plan's text of terms and options; empty options are left out."""
    kept = [option for option in options if option]
    return " ".join(terms) + ("; " + ", ".join(kept) if kept else "")


def amount(count: float) -> str:
    """A number of bytes for people: ``32 KiB``."""
    for unit, factor in (("GiB", 1 << 30), ("MiB", 1 << 20), ("KiB", 1 << 10)):
        if count >= factor:
            return f"{count / factor:.3g} {unit}"
    return f"{int(count)} bytes"


def listed(names: Iterable[str]) -> str:
    """``a``, ``a and b``, ``a, b and c``."""
    several = list(dict.fromkeys(names))
    return several[0] if len(several) == 1 else f"{', '.join(several[:-1])} and {several[-1]}" if several else ""


def with_room(view: View, terms: list[str], size: int = 2048) -> list[str]:
    """The terms with chunks ahead of them that bound how many values of a private scalar wait, where they do.

    A value private to ``i`` waits while a loop that it is not private to runs outside ``i``, unless chunks of ``i``
    stand further out already.
    """
    from ..model import ScalarClass

    names = [term.split(":")[0] for term in terms]
    front: dict[str, None] = {}
    for storage in view.nest.storages:
        if storage.scalar is ScalarClass.PRIVATE and not storage.live_after:
            others = [at for at, name in enumerate(names) if name not in storage.private_to]
            front |= dict.fromkeys(name for name in names if others and name in storage.private_to
                                   and names.index(name) > others[0])
    each = size if len(front) < 2 else 64
    return [*(f"{loop}:{each}" for loop in front), *terms]
