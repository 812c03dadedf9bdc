"""Text back into files: whole or not at all."""

from __future__ import annotations

import os
import stat
from collections.abc import Iterable

from ..model import RetileError


def splice(text: str, edits: Iterable[tuple[int, int, str]]) -> str:
    """The text with ``text[start:end]`` replaced by a new text, for each of the edits; all else stays.

    The edits may come in any order and must not overlap (ValueError); several at one empty place keep their order.
    """
    pieces, position = [], 0
    for start, end, new in sorted(edits, key=lambda edit: (edit[0], edit[1])):
        if not position <= start <= end <= len(text):
            raise ValueError(f"edits overlap or lie outside the text at offset {start}")
        pieces += [text[position:start], new]
        position = end
    pieces.append(text[position:])
    return "".join(pieces)


def check_unchanged(path: str, read: bytes) -> None:
    """RetileError if the file at ``path`` no longer holds what was read from it."""
    try:
        with open(path, "rb") as file:
            same = file.read() == read
    except OSError:
        same = False
    if not same:
        raise RetileError(f"{path}: the file was changed since it was read; nothing was written, run the command again")


def replace_file(path: str, data: bytes) -> None:
    """Put ``data`` into the file at ``path``: afterwards it holds all of it, or what it held before.

    The new text is written beside the file and takes its place in one step (rename, IEEE 1003.1).  The mode is kept and
    a symbolic link is followed.  A file that does not exist is made.  RetileError says why it is not possible.

    Killed on the way, it leaves at most a file ``.retile-…`` without the suffix of a source, made new by every call.
    """
    target = os.path.realpath(path)
    try:
        if os.path.exists(target) and not os.path.isfile(target):
            raise RetileError(f"{path}: this is not a regular file and cannot be replaced")
        if os.path.exists(target) and not os.access(target, os.W_OK):
            raise RetileError(f"{path}: the file is write-protected; nothing was changed")
        _replace(target, data)
    except OSError as error:
        reason = error.strerror or str(error)
        raise RetileError(f"{path}: the file cannot be written: {reason}; nothing was changed") from None
    except ValueError:
        raise RetileError(f"{path!r}: this cannot be the name of a file") from None


def _replace(target: str, data: bytes) -> None:
    import tempfile  # costs 10 ms, and only a file that is written needs it

    mode, owner = _mode_and_owner(target)
    handle, beside = tempfile.mkstemp(prefix=".retile-", dir=os.path.dirname(target))
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            if owner is not None and owner != (os.geteuid(), os.getegid()):
                _give_to(file.fileno(), owner)
            os.fchmod(file.fileno(), mode)
            os.fsync(file.fileno())
        os.replace(beside, target)
    except BaseException:
        try:
            os.unlink(beside)
        except OSError:
            pass
        raise
    _sync_directory(os.path.dirname(target))


def _mode_and_owner(target: str) -> tuple[int, tuple[int, int] | None]:
    try:
        found = os.stat(target)
        return stat.S_IMODE(found.st_mode), (found.st_uid, found.st_gid)
    except FileNotFoundError:
        mask = os.umask(0)
        os.umask(mask)
        return 0o666 & ~mask, None


def _give_to(handle: int, owner: tuple[int, int]) -> None:
    """Keep the owner where the system lets us."""
    try:
        os.fchown(handle, *owner)
    except OSError:
        pass


def _sync_directory(directory: str) -> None:
    """Make the rename itself lasting, where the system lets us."""
    try:
        handle = os.open(directory, os.O_RDONLY)
    except OSError:
        return
    try:
        os.fsync(handle)
    except OSError:
        pass
    finally:
        os.close(handle)
