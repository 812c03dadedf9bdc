"""Limits for the programs that retile starts: compilers, and kernels on trial.

Every program is started as a list of words, without a shell, with nothing on standard input that is not meant for it.
What it may use is limited by the system (``setrlimit``, IEEE 1003.1), so that a text which makes a compiler run wild,
or a nest that never ends, gives a message.
"""

from __future__ import annotations

import resource
from collections.abc import Callable

MIB = 2**20


def limited(*, seconds: float | None = None, memory: int | None = None, files: int | None = None) -> Callable[[], None]:
    """What a child process does before its program starts (``preexec_fn``): take limits on for itself and its children.

    ``seconds`` of computing, bytes of ``memory`` (private data, so that address space which is only reserved does not
    count: the sanitizers reserve terabytes) and bytes of each of the ``files`` that it writes.  No core is left behind.
    A limit that is lower already stays.
    """
    wanted = [(resource.RLIMIT_CORE, 0)]
    if seconds is not None:
        wanted.append((resource.RLIMIT_CPU, max(1, int(seconds))))
    if memory is not None:
        wanted.append((resource.RLIMIT_DATA, memory))
    if files is not None:
        wanted.append((resource.RLIMIT_FSIZE, files))

    def take() -> None:
        for what, limit in wanted:
            _, most = resource.getrlimit(what)
            lower = limit if most == resource.RLIM_INFINITY else min(limit, most)
            # A second between the two: the signal of the first can be told from the kill of the second.
            resource.setrlimit(what, (lower, lower + 1 if what == resource.RLIMIT_CPU and most < 0 else lower))

    return take
