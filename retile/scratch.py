"""Folders of our own for what is built and run: removed at the end, and if we were killed, by the next run.

Whose owner lives is told by a lock on a file in the folder (``flock``): the system lets go of it when the owner ends,
however that comes about.
"""

from __future__ import annotations

import fcntl
import os
import shutil
import tempfile
import time
from pathlib import Path
from typing import IO

_LOCK = ".owner"
_SETTLED = 60  # seconds after which a folder without an owner has lost it, and is not just being made
_FORGOTTEN = 86_400  # seconds after which a folder without a lock file has been left behind


class Scratch:
    """A folder for this process alone."""

    def __init__(self, kind: str) -> None:
        """Make ``retile-<kind>-…`` where temporary files go, and clear away what killed runs left there."""
        clear(kind)
        self.folder = Path(tempfile.mkdtemp(prefix=f"retile-{kind}-"))
        self._lock: IO[bytes] | None = open(self.folder / _LOCK, "wb")
        fcntl.flock(self._lock, fcntl.LOCK_EX)

    def remove(self) -> None:
        """Remove the folder with all that is in it; what cannot be removed stays."""
        shutil.rmtree(self.folder, ignore_errors=True)
        if self._lock is not None:
            self._lock.close()
            self._lock = None


def clear(kind: str) -> None:
    """Remove the folders of one kind whose owners were killed; others', and those in use, are left alone."""
    for folder in Path(tempfile.gettempdir()).glob(f"retile-{kind}-*"):
        try:
            found = folder.lstat()
            if folder.is_symlink() or not folder.is_dir() or found.st_uid != os.geteuid():
                continue
            if _is_left(folder, time.time() - found.st_mtime):
                shutil.rmtree(folder, ignore_errors=True)
        except OSError:
            continue


def _is_left(folder: Path, age: float) -> bool:
    try:
        with open(folder / _LOCK, "rb") as lock:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except FileNotFoundError:
        return age > _FORGOTTEN
    except BlockingIOError:
        return False
    return age > _SETTLED
