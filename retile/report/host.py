"""What is known about this machine, as lines of text."""

from __future__ import annotations

from typing import TYPE_CHECKING

from .table import Column, Look, table

if TYPE_CHECKING:
    from ..host import Cache, Fact, Host


def host_lines(host: Host, look: Look) -> list[str]:
    """A table of facts, each with where it came from."""
    rows = [("processor", *_fact(host.cpu)), ("logical processors", *_fact(host.logical_cpus)),
            ("physical cores", *_fact(host.physical_cores))]
    rows += [(f"level {cache.level} {cache.kind} cache", _cache(cache), cache.origin) for cache in host.caches]
    rows += [("vector register", *_fact(host.vector_bytes, " bytes")), ("vector registers", *_fact(host.vector_registers)),
             ("page", *_fact(host.page_bytes, " bytes")),
             *((f"compiler {c.command}", c.version or c.path, c.origin) for c in host.compilers),
             ("clock step", *_fact(_nanoseconds(host.timer_seconds), " ns")),
             ("virtual machine", *_fact(host.virtualised)),
             ("Python", *_fact(host.python)), ("system", *_fact(host.system))]
    return table((Column("what", whole=True), Column("found"), Column("from")), rows, look)


def _fact(fact: Fact, unit: str = "") -> tuple[str, str]:
    if fact.value is None:
        return "not known", ""
    value = {True: "yes", False: "no"}[fact.value] if isinstance(fact.value, bool) else str(fact.value)
    return value + unit, fact.origin or ""


def _nanoseconds(fact: Fact) -> Fact:
    from dataclasses import replace

    return replace(fact, value=round(fact.value * 1e9)) if isinstance(fact.value, float) else fact


def _cache(cache: Cache) -> str:
    parts = [_size(cache.bytes)]
    if cache.line_bytes:
        parts.append(f"lines of {cache.line_bytes} bytes")
    if cache.ways:
        parts.append(f"{cache.ways} ways")
    if cache.shared_by:
        parts.append(f"shared by {cache.shared_by}")
    return ", ".join(parts)


def _size(count: int | None) -> str:
    if count is None:
        return "size not known"
    for unit, factor in (("MiB", 1 << 20), ("KiB", 1 << 10)):
        if count >= factor and count % (factor // 4) == 0:
            return f"{count / factor:g} {unit}"
    return f"{count} bytes"
