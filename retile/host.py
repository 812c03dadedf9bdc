"""What can be found out about this machine: processor, caches, compilers, clock.

Every fact carries where it came from; what could not be found out is None, never a guess.  Nothing here knows of loops.
"""

from __future__ import annotations

import os
import platform
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

_CACHES = Path("/sys/devices/system/cpu/cpu0/cache")
_CPUINFO = Path("/proc/cpuinfo")
_COMPILERS = ("cc", "gcc", "clang")
_SECONDS = 10  # no question to another program may take longer


@dataclass(frozen=True)
class Fact:
    """One finding and where it came from; both are None if nothing was found."""

    value: str | int | float | bool | None
    origin: str | None

    @staticmethod
    def unknown() -> Fact:
        """The fact that nothing is known."""
        return Fact(None, None)


@dataclass(frozen=True)
class Cache:
    """One cache of the first processor core."""

    level: int
    kind: str  # ``data``, ``instruction`` or ``unified``
    bytes: int | None
    line_bytes: int | None
    ways: int | None
    shared_by: int | None  # logical processors that use the same one
    origin: str


@dataclass(frozen=True)
class Compiler:
    """A C compiler on the search path."""

    command: str
    path: str
    version: str | None  # first line of what it says about itself
    origin: str


@dataclass(frozen=True)
class Host:
    """All that is known about the machine."""

    cpu: Fact
    logical_cpus: Fact  # that this process may use
    physical_cores: Fact
    caches: tuple[Cache, ...]
    page_bytes: Fact
    compilers: tuple[Compiler, ...]
    timer_seconds: Fact  # smallest step of the monotonic clock that could be seen
    virtualised: Fact
    python: Fact
    system: Fact
    vector_bytes: Fact = Fact.unknown()  # of one register for vectors
    vector_registers: Fact = Fact.unknown()  # how many of them a program can name

    def cache(self, level: int) -> Cache | None:
        """The cache of a level that holds data; None if unknown."""
        return next((c for c in self.caches if c.level == level and c.kind in ("data", "unified")), None)

    @property
    def line_bytes(self) -> int | None:
        """Bytes of a line of the data cache nearest to the core."""
        return next((c.line_bytes for c in self.caches if c.line_bytes and c.kind != "instruction"), None)

    def line_elements(self, element_bytes: int) -> int | None:
        """How many elements of this size a cache line holds: 8 doubles in 64 bytes."""
        return self.line_bytes // element_bytes if self.line_bytes else None

    def as_json(self) -> dict[str, Any]:
        """Plain dictionaries and lists, ready for ``json.dumps``."""
        found = asdict(self)
        return {name: list(value) if isinstance(value, tuple) else value for name, value in found.items()}


def describe() -> Host:
    """Find out about this machine; takes some tens of milliseconds, mostly for asking the compilers."""
    cpuinfo = _read(_CPUINFO) or ""
    width, count = vectors_of(cpuinfo, platform.machine())
    return Host(
        cpu=_cpu(cpuinfo),
        logical_cpus=_logical_cpus(),
        physical_cores=_physical_cores(cpuinfo),
        caches=_caches(),
        page_bytes=_page_bytes(),
        compilers=tuple(compilers()),
        timer_seconds=timer_step(),
        virtualised=_virtualised(cpuinfo),
        python=Fact(f"{platform.python_implementation()} {platform.python_version()}", "the running interpreter"),
        system=Fact(f"{platform.system()} {platform.release()} {platform.machine()}", "uname"),
        vector_bytes=width,
        vector_registers=count,
    )


def compilers(commands: Iterable[str] = _COMPILERS) -> list[Compiler]:
    """The compilers among these commands that are on the search path."""
    found = []
    for command in commands:
        path = shutil.which(command)
        if path:
            said = ask([path, "--version"])
            version = said.splitlines()[0].strip() if said and said.strip() else None
            found.append(Compiler(command, path, version, f"{command} --version" if version else "search path"))
    return found


def timer_step(readings: int = 2000) -> Fact:
    """The smallest step between two readings of the monotonic clock, in seconds: no shorter time can be told apart."""
    ticks = [time.perf_counter_ns() for _ in range(readings)]
    steps = [b - a for a, b in zip(ticks, ticks[1:]) if b > a]
    if not steps:
        return Fact.unknown()
    return Fact(min(steps) * 1e-9, f"smallest step between {readings} readings of the monotonic clock")


def ask(command: list[str]) -> str | None:
    """Standard output of a short program; None if it cannot be run, fails or hangs."""
    try:
        done = subprocess.run(
            command,
            capture_output=True,
            text=True,
            errors="replace",
            timeout=_SECONDS,
            stdin=subprocess.DEVNULL,
            env={**os.environ, "LC_ALL": "C"},
        )
    except (OSError, subprocess.SubprocessError):
        return None
    return done.stdout if done.returncode == 0 else None


def _read(path: Path) -> str | None:
    try:
        return path.read_text(encoding="utf-8", errors="replace").strip()
    except OSError:
        return None


def _cpu(cpuinfo: str) -> Fact:
    for key in ("model name", "Model", "cpu model", "uarch"):
        match = re.search(rf"^{key}\s*:\s*(.+)$", cpuinfo, re.MULTILINE)
        if match:
            return Fact(match.group(1).strip(), str(_CPUINFO))
    said = ask(["sysctl", "-n", "machdep.cpu.brand_string"]) if sys.platform == "darwin" else None
    if said and said.strip():
        return Fact(said.strip(), "sysctl machdep.cpu.brand_string")
    return Fact(platform.processor(), "uname") if platform.processor() else Fact.unknown()


def _logical_cpus() -> Fact:
    if hasattr(os, "sched_getaffinity"):
        return Fact(len(os.sched_getaffinity(0)), "affinity of this process")
    count = os.cpu_count()
    return Fact(count, "operating system") if count else Fact.unknown()


def _physical_cores(cpuinfo: str) -> Fact:
    pairs = set(
        zip(
            re.findall(r"^physical id\s*:\s*(\d+)", cpuinfo, re.MULTILINE),
            re.findall(r"^core id\s*:\s*(\d+)", cpuinfo, re.MULTILINE),
        )
    )
    return Fact(len(pairs), str(_CPUINFO)) if pairs else Fact.unknown()


def _virtualised(cpuinfo: str) -> Fact:
    flags = re.search(r"^flags\s*:\s*(.+)$", cpuinfo, re.MULTILINE)
    if flags is None:
        return Fact.unknown()
    return Fact("hypervisor" in flags.group(1).split(), f"flag in {_CPUINFO}")


# Instruction sets for vectors by their flag in ``/proc/cpuinfo``, widest first: bytes of a register, and how many a
# program can name (Intel, "Intel 64 and IA-32 Architectures Software Developer's Manual", vol. 1; Arm, "Arm
# Architecture Reference Manual for A-profile architecture").  In 32-bit mode x86 names 8 of them.
_VECTORS = (("avx512f", 64, 32), ("avx", 32, 16), ("sse2", 16, 16), ("asimd", 16, 32))


def vectors_of(cpuinfo: str, machine: str) -> tuple[Fact, Fact]:
    """Width in bytes and number of the vector registers; unknown where the width is no constant of the architecture."""
    flags = re.search(r"^(?:flags|Features)\s*:\s*(.+)$", cpuinfo, re.MULTILINE)
    said = set(flags.group(1).split()) if flags else set()
    for flag, width, count in _VECTORS:
        if flag in said:
            few = re.fullmatch(r"i[3-6]86", machine) is not None
            origin = f"flag {flag} in {_CPUINFO}"
            return Fact(width, origin), Fact(8 if few else count, origin)
    return Fact.unknown(), Fact.unknown()


def _page_bytes() -> Fact:
    try:
        return Fact(os.sysconf("SC_PAGE_SIZE"), "sysconf")
    except (AttributeError, OSError, ValueError):
        return Fact.unknown()


# ---------------------------------------------------------------- caches


def _caches() -> tuple[Cache, ...]:
    found = caches_of_sysfs(_CACHES)
    if not found:
        found = caches_of_getconf(ask(["getconf", "-a"]) or "")
    if not found and sys.platform == "darwin":
        found = caches_of_sysctl(ask(["sysctl", "hw"]) or "")
    return tuple(sorted(found, key=lambda cache: (cache.level, cache.kind)))


def caches_of_sysfs(folder: Path) -> list[Cache]:
    """The caches that the Linux kernel lists in a folder like ``/sys/devices/system/cpu/cpu0/cache``."""
    found = []
    for index in sorted(folder.glob("index*")):
        level, kind = _read(index / "level"), _read(index / "type")
        if not level or not level.isdigit() or not kind:
            continue
        shared = _read(index / "shared_cpu_list")
        found.append(
            Cache(
                int(level),
                kind.lower(),
                bytes_of(_read(index / "size")),
                _positive(_read(index / "coherency_line_size")),
                _positive(_read(index / "ways_of_associativity")),
                cpus_of(shared) if shared else None,
                str(index),
            )
        )
    return found


def caches_of_getconf(said: str) -> list[Cache]:
    """The caches in the output of ``getconf -a`` (names as in the GNU C library)."""
    values = {name: int(value) for name, value in re.findall(r"^(\w+)\s+(\d+)\s*$", said, re.MULTILINE)}
    found = []
    for level, name, kind in (
        (1, "LEVEL1_DCACHE", "data"),
        (1, "LEVEL1_ICACHE", "instruction"),
        (2, "LEVEL2_CACHE", "unified"),
        (3, "LEVEL3_CACHE", "unified"),
        (4, "LEVEL4_CACHE", "unified"),
    ):
        if values.get(f"{name}_SIZE"):
            found.append(
                Cache(
                    level,
                    kind,
                    values[f"{name}_SIZE"],
                    values.get(f"{name}_LINESIZE") or None,
                    values.get(f"{name}_ASSOC") or None,
                    None,
                    f"getconf {name}_SIZE",
                )
            )
    return found


def caches_of_sysctl(said: str) -> list[Cache]:
    """The caches in the output of ``sysctl hw`` (names as on BSD systems)."""
    values: Mapping[str, int] = {
        name: int(value) for name, value in re.findall(r"^(hw\.\w+)\s*[:=]\s*(\d+)\s*$", said, re.MULTILINE)
    }
    line = values.get("hw.cachelinesize") or None
    return [
        Cache(level, kind, values[name], line, None, None, f"sysctl {name}")
        for level, name, kind in (
            (1, "hw.l1dcachesize", "data"),
            (1, "hw.l1icachesize", "instruction"),
            (2, "hw.l2cachesize", "unified"),
            (3, "hw.l3cachesize", "unified"),
        )
        if values.get(name)
    ]


def bytes_of(text: str | None) -> int | None:
    """``32K`` is 32768; None for anything that is no positive size."""
    match = re.fullmatch(r"(\d+)\s*([KMG]?)B?", text or "")
    if not match:
        return None
    return int(match.group(1)) * {"": 1, "K": 1 << 10, "M": 1 << 20, "G": 1 << 30}[match.group(2)] or None


def cpus_of(text: str) -> int | None:
    """How many processors a list such as ``0-3,8`` names."""
    count = 0
    for part in text.split(","):
        match = re.fullmatch(r"\s*(\d+)(?:-(\d+))?\s*", part)
        if not match:
            return None
        count += int(match.group(2) or match.group(1)) - int(match.group(1)) + 1
    return count


def _positive(text: str | None) -> int | None:
    return int(text) if text and text.isdigit() and int(text) > 0 else None
