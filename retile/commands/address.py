"""``FILE:LINE`` and ``FILE:LINE:COLUMN``, as users type them."""

from __future__ import annotations

import re
from collections.abc import Callable
from os.path import exists

from ..model import Address, RetileError

_ADDRESS = re.compile(r"(?P<file>.+):(?P<line>\d+)", re.DOTALL)


def parse_address(text: str, is_file: Callable[[str], bool] = exists) -> Address:
    """The address that a text means; file names may hold colons and blanks.

    ``wide:3:14`` is column 14 of line 3 of ``wide``, unless only a file ``wide:3`` exists.
    Raises RetileError if there is no line number.
    """
    outer = _ADDRESS.fullmatch(text)
    if outer is None:
        raise RetileError(f"'{text}' is not an address: write FILE:LINE, where LINE is the line of the outermost for.\n"
                          f"'retile nests {text}' lists the addresses of a file.")
    inner = _ADDRESS.fullmatch(outer["file"])
    whole = Address(outer["file"], _counted(outer["line"], text))
    if inner is None or (is_file(whole.file) and not is_file(inner["file"])):
        return whole
    return Address(inner["file"], _counted(inner["line"], text), _counted(outer["line"], text))


def _counted(digits: str, text: str) -> int:
    number = int(digits)
    if number < 1:
        raise RetileError(f"'{text}' is not an address: lines and columns count from 1.")
    return number
