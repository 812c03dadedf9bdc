"""New names in the user's program: taken from the user's own, never one that is in use."""

from __future__ import annotations

from collections.abc import Iterable


class Names:
    """Hands out names that no identifier of the translation unit has, the same ones for the same requests."""

    def __init__(self, taken: Iterable[str]) -> None:
        self._taken = set(taken)

    def fresh(self, wanted: str, family: bool = False) -> str:
        """``wanted``, with as many underscores behind it as it takes; ``family``: names like ``wanted_3`` are free too."""
        while wanted in self._taken or family and any(name.startswith(f"{wanted}_") for name in self._taken):
            wanted += "_"
        self._taken.add(wanted)
        return wanted
