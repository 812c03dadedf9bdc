"""Compiling kernels and the program that runs them, without a shell, in a folder of our own."""

from __future__ import annotations

import atexit
import os
import re
import subprocess
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ..host import ask
from ..model import RetileError
from ..processes import MIB, limit
from ..scratch import Scratch
from ..templating import environment
from .tolerance import STEPS, WIDTHS

if TYPE_CHECKING:
    from ..source import CompilerCall

_SANITIZERS = ("-fsanitize=address,undefined", "-fno-sanitize-recover=all")
# Size zero belongs to the domain, also where a variable-length array may formally not have it.
_SANITIZE = (*_SANITIZERS, "-fno-sanitize=vla-bound", "-fno-omit-frame-pointer", "-g1")
_RELAXES = re.compile(
    r"-O\w*|-ffast-math|-funsafe-math-optimizations|-fassociative-math|-freciprocal-math|"
    r"-ffp-contract=\w+|-ffinite-math-only|-fno-signed-zeros|-flto\S*|-fsanitize\S*"
)
_SECONDS = 120  # for one call of the compiler
_MEMORY = 4096 * MIB  # for the compiler
_OUTPUT = 256 * MIB  # of one file that a compiler or a kernel writes
# What kernels see of the user's environment: where libraries are, and how threads are to run.
_KEPT = re.compile(r"PATH|HOME|TMPDIR|LD_LIBRARY_PATH|DYLD_LIBRARY_PATH|(?:OMP|GOMP|KMP)_\w+")


@dataclass(frozen=True)
class Built:
    """A kernel ready to load, or what the compiler said."""

    path: Path | None
    complaint: str | None = None


@dataclass(frozen=True)
class Workshop:
    """A folder, a compiler and the flags of the user's file."""

    folder: Path
    call: CompilerCall  # the compiler and the flags of the file: -D, -I, -std
    beside: str  # folder of the user's file, where its quoted includes are looked for

    def kernel(self, name: str, text: bytes, flags: Sequence[str]) -> Built:
        """Compile a kernel's text to a library that can be loaded beside others; ``flags`` are all flags there are."""
        source, target = self.folder / f"{name}.c", self.folder / f"{name}.so"
        source.write_bytes(text)
        threads = ("-fopenmp",) if re.search(rb"^\s*#\s*pragma\s+omp\b", text, re.MULTILINE) else ()
        said = run(
            [
                *self.call.command,
                *flags,
                *threads,
                "-w",
                "-fPIC",
                "-shared",
                "-fvisibility=hidden",
                "-iquote",
                self.beside,
                "-o",
                str(target),
                str(source),
                "-lm",
            ],
            self.call.directory,
            self.folder,
        )
        return Built(target) if said is None else Built(None, said)

    def kernels(self, stem: str, texts: Sequence[bytes], flags: Sequence[str]) -> list[Built]:
        """Compile several, as many at a time as there are processors."""
        with ThreadPoolExecutor(max_workers=os.cpu_count() or 1) as pool:
            return list(pool.map(lambda pair: self.kernel(f"{stem}{pair[0]}", pair[1], flags), enumerate(texts)))


def strict_flags(flags: Sequence[str], sanitize: bool) -> list[str]:
    """The flags of a verification build: the user's without optimization levels and relaxed arithmetic.

    >>> strict_flags(["-O3", "-march=native", "-ffast-math"], sanitize=False)
    ['-march=native', '-O1', '-ffp-contract=off']
    """
    kept = [flag for flag in flags if not _RELAXES.fullmatch(flag)]
    return [*kept, "-O1", *(_SANITIZE if sanitize else ()), "-ffp-contract=off"]


def run(command: Sequence[str], directory: str | None = None, scratch: Path | None = None) -> str | None:
    """Run a compiler in a directory; None if all went well, else what it said (its first lines)."""
    try:
        process = subprocess.Popen(
            list(command),
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            errors="replace",
            # A compiler that is killed leaves its own temporary files behind.
            env={**os.environ, "LC_ALL": "C", **({"TMPDIR": str(scratch)} if scratch else {})},
            cwd=directory,
        )
    except FileNotFoundError:
        raise RetileError(f"the compiler {command[0]} is not there; name another with --cc") from None
    except OSError as problem:
        raise RetileError(f"the compiler {command[0]} cannot be run: {problem.strerror}") from None
    limit(process, seconds=_SECONDS, memory=_MEMORY, files=_OUTPUT)
    with process:
        try:
            said, complaint = process.communicate(timeout=_SECONDS)
        except subprocess.TimeoutExpired:
            process.kill()
            return f"the compiler took longer than {_SECONDS} s"
        except BaseException:
            process.kill()
            raise
    if process.returncode == 0:
        return None
    lines = [line for line in (complaint or said).splitlines() if line.strip()]
    return "\n".join(lines[:12]) or f"the compiler ended with status {process.returncode}"


@cache
def harness(command: tuple[str, ...], sanitize: bool, prefix: str) -> Path:
    """The program that runs kernels, built once per process; RetileError if it cannot be built."""
    folder = _shared_folder()
    stem = f"harness{len(list(folder.glob('*.c')))}{'-sanitized' if sanitize else ''}"
    source, target = folder / f"{stem}.c", folder / stem
    text = environment().get_template("trial_harness.c.j2").render(p=prefix, widths=WIDTHS, steps=STEPS)
    source.write_text(text, encoding="utf-8")
    flags = ("-fsanitize=address,undefined", "-O1") if sanitize else ("-O2",)
    said = run([*command, "-std=c11", "-w", *flags, "-o", str(target), str(source), "-ldl", "-lm"], None, folder)
    if said is not None:
        raise RetileError(f"{command[0]} cannot build the program that runs the trials:\n{said}")
    return target


@cache
def can_sanitize(command: tuple[str, ...]) -> bool:
    """True if programs built with the address and undefined-behaviour sanitizers run here."""
    try:
        program = harness(command, True, "trial")
        process = subprocess.Popen([str(program)], stdin=subprocess.DEVNULL, stdout=subprocess.PIPE,
                                   stderr=subprocess.DEVNULL, text=True, env=sanitizer_environment(), cwd=program.parent)
        limit_kernels(process, 20)
        with process:
            said, _ = process.communicate(timeout=20)
    except (RetileError, OSError, subprocess.SubprocessError):
        return False
    return said == "failed call\n"


def sanitizer_environment() -> dict[str, str]:
    """The environment in which kernels run: what the sanitizers find ends the program, and so does too much memory."""
    return {
        **{name: value for name, value in os.environ.items() if _KEPT.fullmatch(name)},
        "LC_ALL": "C",
        "ASAN_OPTIONS": "detect_leaks=0:halt_on_error=1:allocator_may_return_null=1:color=never:"
                        f"hard_rss_limit_mb={_physical() // MIB}",
        "UBSAN_OPTIONS": "halt_on_error=1:print_stacktrace=0:color=never",
    }


def limit_kernels(process: subprocess.Popen[Any], seconds: float, sanitized: bool = True) -> None:
    """Limit a program with kernels: computing, files, and as much memory as there is.

    The sanitizers reserve terabytes of private memory and so look after themselves.
    """
    limit(process, seconds=seconds, memory=None if sanitized else _physical(), files=_OUTPUT)


def _physical() -> int:
    """Bytes of memory of this machine."""
    return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")


@cache
def compiler_version(command: tuple[str, ...]) -> str | None:
    """The first line of what the compiler says about itself."""
    said = ask([*command, "--version"])
    return said.splitlines()[0].strip() if said and said.strip() else None


@cache
def _shared_folder() -> Path:
    scratch = Scratch("harness")
    atexit.register(scratch.remove)
    return scratch.folder
