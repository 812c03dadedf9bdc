"""What suggestions need to know of a machine, as plain numbers."""

from __future__ import annotations

from ..host import Host
from ..values import dataclass

# Where the machine does not say: what small machines have, so that a suggestion is rather too small than too large.
_LINE, _FIRST, _SECOND, _LAST = 64, 32 << 10, 256 << 10, 2 << 20
_WIDTH, _REGISTERS = 16, 16


@dataclass(frozen=True)
class Machine:
    """Caches and vector registers of the core that runs the loops."""

    line: int  # bytes of a cache line
    first: int  # bytes of the first data cache
    second: int
    last: int  # of the largest one
    page: int
    vector: int  # bytes of a vector register
    registers: int  # vector registers that a program can name
    guessed: tuple[str, ...] = ()  # what the machine did not say

    @staticmethod
    def of(host: Host) -> Machine:
        """The numbers of a host; what is not known is replaced by a small value and named in ``guessed``."""
        sizes = {level: cache.bytes for level in (1, 2, 3, 4) if (cache := host.cache(level)) and cache.bytes}
        first = sizes.get(1, _FIRST)
        second = sizes.get(2, max(_SECOND, first))
        last = max(sizes.values(), default=max(_LAST, second))
        width, registers = host.vector_bytes.value, host.vector_registers.value
        guessed = tuple(name for name, known in (("caches", bool(sizes)), ("vector registers", width is not None))
                        if not known)
        return Machine(host.line_bytes or _LINE, first, second, last, int(host.page_bytes.value or 4096),
                       int(width or _WIDTH), int(registers or _REGISTERS), guessed)
