"""The user's compiler as a preprocessor: one process, no shell, with limits on time, memory and output."""

from __future__ import annotations

import os
import resource
import selectors
import shlex
import signal
import subprocess
import time
from typing import IO

from ..model import RetileError
from ..processes import MIB, limit
from ..values import dataclass

HEADERS = os.path.join(os.path.dirname(os.path.abspath(__file__)), "headers")
SECONDS = 20.0  # for one run of the preprocessor
COMPUTING = 5.0  # seconds, of these
LARGEST_OUTPUT = 64 * MIB
MEMORY = 450 * MIB  # for the compiler, when it only reads


@dataclass(frozen=True)
class CompilerCall:
    """How the user's file is compiled."""

    cc: str = "cc"  # a program, or a program with arguments: ``ccache gcc``
    flags: tuple[str, ...] = ()  # -D, -I, -U, -std, -include and the like, as the compiler takes them
    directory: str | None = None  # where it runs, for flags with relative paths; None is where retile runs

    @property
    def command(self) -> tuple[str, ...]:
        """The program and its own arguments, without the flags; RetileError if there is none."""
        if os.path.sep in self.cc and os.path.exists(self.cc):
            return (self.cc,)
        try:
            words = tuple(shlex.split(self.cc))
        except ValueError as error:
            raise RetileError(f"the compiler {self.cc!r} cannot be read as a command: {error}") from None
        if not words:
            raise RetileError("the compiler's name is empty; name one with --cc, for example --cc gcc")
        return words


@dataclass(frozen=True)
class Preprocessed:
    """What the preprocessor answered."""

    output: str
    errors: str  # its messages
    status: int
    name: str  # of the user's file in the line markers


class Preprocessing:
    """A run of the preprocessor that has begun; other work can be done before its answer is asked for."""

    def __init__(self, run: Run, name: str) -> None:
        self._run, self._name = run, name

    def answer(self) -> Preprocessed:
        """Wait for the end; RetileError if it takes too long or writes too much."""
        output, errors, status = self._run.results()
        return Preprocessed(output.decode("utf-8", "replace"), errors.decode("utf-8", "replace"), status, self._name)

    def stop(self) -> None:
        """End it, unless it has ended."""
        self._run.stop()


def preprocess(call: CompilerCall, path: str, *, stubs: bool, text: bytes | None = None) -> Preprocessing:
    """Start ``cc -E -dD`` over a file, or over ``text`` that stands for the file at ``path``.

    With ``stubs`` our own short headers stand before those of the system (the user's -I directories come first still).
    A failure of the compiler is an answer; RetileError is raised if it cannot be started.
    """
    command = [*call.command, *call.flags, "-E", "-dD", "-w", "-x", "c"]
    if stubs:
        command += ["-isystem", HEADERS]
    name = os.path.join(".", path) if path.startswith("-") else _from(call.directory, path)
    if text is not None:
        name = "<stdin>"
        command += ["-iquote", os.path.dirname(os.path.abspath(path)), "-"]
    else:
        command.append(name)  # a path that starts with a dash would be taken for a flag
    return Preprocessing(Run(command, call, text), name)


def check_syntax(call: CompilerCall, path: str) -> str:
    """What the compiler says of a file that cannot be parsed; empty if it finds nothing wrong.

    Columns are to count characters, a tab as one.
    """
    name = os.path.join(".", path) if path.startswith("-") else _from(call.directory, path)
    try:
        command = [*call.command, *call.flags, "-fsyntax-only", "-w", "-ftabstop=1", "-x", "c", name]
        _, errors, status = Run(command, call, None).results()
    except RetileError:
        return ""
    return errors.decode("utf-8", "replace") if status else ""


def _from(directory: str | None, path: str) -> str:
    return os.path.abspath(path) if directory else path


class Run:
    """One process of the compiler, started when it is made; RetileError if that is not possible."""

    def __init__(self, command: list[str], call: CompilerCall, text: bytes | None) -> None:
        self._program, self._text = command[0], text
        self._deadline = time.monotonic() + SECONDS
        self._computed = _computed()
        try:
            self._process = subprocess.Popen(
                command,
                stdin=subprocess.PIPE if text is not None else subprocess.DEVNULL,
                stdout=subprocess.PIPE,
                stderr=subprocess.PIPE,
                cwd=call.directory,
                env={**os.environ, "LC_ALL": "C"},
                start_new_session=True,
            )
        except (OSError, ValueError) as error:
            raise RetileError(_cannot_start(command[0], call, error)) from None
        limit(self._process, seconds=COMPUTING, memory=MEMORY, files=LARGEST_OUTPUT)

    def results(self) -> tuple[bytes, bytes, int]:
        """Standard output, standard error and exit status; RetileError beyond the limits on time and output."""
        try:
            answer = _communicate(self._process, self._text, self._program, self._deadline)
            if answer[2] and _computed() - self._computed > COMPUTING - 1:
                raise RetileError(f"{self._program} computed for {COMPUTING:.0f} seconds and was not ready")
            return answer
        except subprocess.TimeoutExpired:
            raise RetileError(f"{self._program} did not end within {SECONDS:.0f} seconds") from None
        finally:
            self.stop()

    def stop(self) -> None:
        """Kill it if it still runs."""
        if self._process.returncode is None:
            _stop(self._process)
        for stream in (self._process.stdin, self._process.stdout, self._process.stderr):
            if stream:
                stream.close()


def _computed() -> float:
    """Seconds that the programs which this process started and that have ended computed."""
    return resource.getrusage(resource.RUSAGE_CHILDREN).ru_utime


def _cannot_start(program: str, call: CompilerCall, error: Exception) -> str:
    if call.directory and not os.path.isdir(call.directory):
        return f"{call.directory}: the directory in which the file is compiled does not exist"
    if isinstance(error, FileNotFoundError):
        return f"the compiler {program!r} was not found; install one, or name yours with --cc, for example --cc gcc"
    return f"the compiler {program!r} cannot be started: {error}; name another one with --cc, for example --cc gcc"


def _stop(process: subprocess.Popen[bytes]) -> None:
    try:
        os.killpg(process.pid, signal.SIGKILL)
    except (OSError, AttributeError):
        process.kill()
    process.wait()


def _communicate(
    process: subprocess.Popen[bytes], text: bytes | None, program: str, deadline: float
) -> tuple[bytes, bytes, int]:
    """Feed the process and read both its outputs within the limits."""
    assert process.stdout and process.stderr
    read: dict[IO[bytes], list[bytes]] = {process.stdout: [], process.stderr: []}
    pending, total = memoryview(text or b""), 0
    with selectors.DefaultSelector() as selector:
        for stream in read:
            selector.register(stream, selectors.EVENT_READ)
        if process.stdin:
            selector.register(process.stdin, selectors.EVENT_WRITE)
        while selector.get_map():
            ready = selector.select(max(0.0, deadline - time.monotonic()))
            if not ready:
                raise RetileError(f"{program} did not finish preprocessing within {SECONDS:.0f} seconds")
            for key, _ in ready:
                if key.fileobj is process.stdin:
                    pending = _feed(selector, process.stdin, pending)
                    continue
                stream = key.fileobj  # type: ignore[assignment]
                data = os.read(key.fd, 1 << 16)
                if not data:
                    selector.unregister(stream)
                read[stream].append(data)
                total += len(data)
                if total > LARGEST_OUTPUT:
                    raise RetileError(
                        f"{program} gave more than {LARGEST_OUTPUT >> 20} MiB of preprocessed text; "
                        "does a header include itself?"
                    )
    status = process.wait(max(0.1, deadline - time.monotonic()))
    return b"".join(read[process.stdout]), b"".join(read[process.stderr]), status


def _feed(selector: selectors.BaseSelector, stream: IO[bytes], pending: memoryview) -> memoryview:
    try:
        pending = pending[os.write(stream.fileno(), pending[: 1 << 16]) :] if pending else pending
    except BrokenPipeError:
        pending = memoryview(b"")
    if not pending:
        selector.unregister(stream)
        stream.close()
    return pending
