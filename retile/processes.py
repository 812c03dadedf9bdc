"""Limits for the programs that retile starts: compilers, and kernels on trial.

Every program is started as a list of words, without a shell, with nothing on standard input that is not meant for it.
What it may use is limited by the system, so that a text which makes a compiler run wild, or a nest that never ends,
gives a message.  The limits are set from outside right after the start (``prlimit`` of Linux; elsewhere there are only
those on elapsed time): code between fork and exec would be run with other threads' locks held.
"""

from __future__ import annotations

import resource
import subprocess
from typing import Any

MIB = 2**20


def limit(process: subprocess.Popen[Any], *, seconds: float, memory: int | None = None, files: int) -> None:
    """Limit a process that has just been started, and with it what it starts.

    ``seconds`` of computing, bytes of ``memory`` (private data, so that address space which is only reserved does not
    count: the sanitizers reserve terabytes) and bytes of each of the ``files`` that it writes.  No core is left behind.
    A limit that is lower already stays.
    """
    wanted = [(resource.RLIMIT_CORE, 0), (resource.RLIMIT_CPU, max(1, int(seconds))), (resource.RLIMIT_FSIZE, files)]
    if memory is not None:
        wanted.append((resource.RLIMIT_DATA, memory))
    if not hasattr(resource, "prlimit"):
        return
    for what, most in wanted:
        try:
            _, hard = resource.prlimit(process.pid, what)
            lower = most if hard == resource.RLIM_INFINITY else min(most, hard)
            resource.prlimit(process.pid, what, (lower, lower))
        except (OSError, ValueError):  # it has ended, or may not be limited
            return
