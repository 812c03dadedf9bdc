"""Running kernels in a process of their own, and understanding what it answers."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import threading
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from .build import limit_kernels, sanitizer_environment


@dataclass
class Run:
    """One process of the harness: what it answered and how it ended."""

    answers: list[list[str]] = field(default_factory=list)
    status: int | None = None
    complaint: str = ""  # what it wrote to standard error
    late: bool = False  # ended by us, for taking too long

    @property
    def finished(self) -> bool:
        """True if all of the job was done."""
        return self.status == 0 and bool(self.answers) and self.answers[-1] == ["done"]

    def of(self, word: str) -> Iterator[list[str]]:
        """The rest of every answer that begins with a word."""
        return (answer[1:] for answer in self.answers if answer[0] == word)

    def last_kernel(self) -> int | None:
        """The number of the kernel that ran last."""
        ran = list(self.of("run"))
        return int(ran[-1][0]) if ran else None

    def reason(self) -> str:
        """In one line why it did not finish."""
        if self.late:
            return "it did not end within the time limit"
        found = re.search(r"^.*(?:runtime error|ERROR: \w+Sanitizer): .*$", self.complaint, re.MULTILINE)
        if found:
            place = re.search(r"^\s+#\d+ .* in (\w+_kernel\S*) (\S+:\d+)", self.complaint, re.MULTILINE)
            text = re.sub(r"^==\d+==\s*ERROR: ", "", found.group().strip())
            text = re.sub(r" on address 0x.*", "", re.sub(r" \(pc 0x.*", "", text))
            return text + (f" at {place.group(2)}" if place and place.group(2) not in text else "")
        if self.status is not None and self.status < 0:
            return f"it was ended by {signal.Signals(-self.status).name}"
        if any(answer[:2] == ["failed", "memory"] for answer in self.answers):
            return "there was not enough memory"
        unloadable = next(self.of("unloadable"), None)
        if unloadable:
            return "it cannot be loaded: " + " ".join(unloadable[1:])
        return f"it ended with status {self.status}"


def run(
    program: Path, prefix: str, kernels: Sequence[Path], job: str, seconds: float, into: Run | None = None
) -> Run:
    """Run a job; after ``seconds`` the process is ended.  Answers land in ``into`` as they come, also on Ctrl-C.

    The process has a session of its own, so that Ctrl-C reaches only us, and its own alarm in case we are killed.
    """
    found = into if into is not None else Run()
    job_file = kernels[0].parent / "job"
    job_file.write_text(f"limit {int(seconds) + 5}\n{job}", encoding="ascii")
    with open(job_file, encoding="ascii") as given, open(kernels[0].parent / "said", "w+b") as said:
        process = subprocess.Popen(
            [str(program), f"{prefix}_entry", *map(str, kernels)],
            stdin=given,
            stdout=subprocess.PIPE,
            stderr=said,
            env=sanitizer_environment(),
            start_new_session=True,
            cwd=kernels[0].parent,
        )
        limit_kernels(process, (os.cpu_count() or 1) * (seconds + 5), "sanitized" in program.name)
        timer = threading.Timer(seconds, _end, (process, found))
        timer.start()
        try:
            assert process.stdout is not None
            for line in process.stdout:
                if line.endswith(b"\n") and line.strip():
                    found.answers.append(line.decode("utf-8", "replace").split())
            found.status = process.wait()
        finally:
            timer.cancel()
            if process.poll() is None:
                _kill(process)
            process.wait()
            if process.stdout is not None:
                process.stdout.close()
            said.seek(0)
            found.complaint = said.read(200_000).decode("utf-8", "replace")
    return found


def _end(process: subprocess.Popen[bytes], found: Run) -> None:
    if process.poll() is None:
        found.late = True
        _kill(process)


def _kill(process: subprocess.Popen[bytes]) -> None:
    try:
        os.killpg(process.pid, signal.SIGKILL)
    except (ProcessLookupError, PermissionError):
        pass
