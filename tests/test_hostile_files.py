"""Files that change, cannot be written, or are written while retile is killed: old or new, whole, and nothing beside them."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from command_line import ROOT, retile

NEST = "void level(int n, double *depth) {\n    for (int i = 0; i < n; i++)\n        depth[i] = i;\n}\n"
AT = {"before": "", "after": "real(*words, **more); "}
STEPS = ("mkstemp", "fsync", "replace", "fchmod")
KILLED = """\
import os, signal, sys, tempfile
sys.path.insert(0, {root!r})
place = tempfile if {step!r} == "mkstemp" else os
real = getattr(place, {step!r})
def end(*words, **more):
    {first}os.kill(os.getpid(), signal.SIGKILL)
setattr(place, {step!r}, end)
from retile.source import replace_file
replace_file("level.c", b"new text, whole")
"""


@pytest.fixture
def level(tmp_path):
    (tmp_path / "level.c").write_text(NEST)
    return tmp_path / "level.c"


@pytest.mark.parametrize("step", STEPS)
@pytest.mark.parametrize("moment", AT)
def test_killed_at_any_step_a_file_is_old_or_new(level, step, moment):
    program = KILLED.format(root=str(ROOT), step=step, first=AT[moment])
    assert subprocess.run([sys.executable, "-c", program], cwd=level.parent).returncode == -9
    assert level.read_text() in (NEST, "new text, whole")
    beside = set(os.listdir(level.parent)) - {"level.c"}
    assert len(beside) <= 1 and all(name.startswith(".retile-") and "." not in name[1:] for name in beside)


@pytest.mark.parametrize("where", (("--in-place",), ("-o", "out.c")))
def test_a_file_that_changes_after_it_was_read_is_left_alone(level, where, monkeypatch):
    from retile.cli import _run
    from retile.library import OpenNest

    real = OpenNest.rewrite

    def meanwhile(self, *words, **more):
        level.write_text(NEST + "/* an editor was faster */\n")
        return real(self, *words, **more)

    monkeypatch.chdir(level.parent)
    monkeypatch.setattr(OpenNest, "rewrite", meanwhile)
    assert _run(["rewrite", "level.c:2", "i:8 i", *where]) == 2
    assert level.read_text().endswith("faster */\n") and os.listdir(level.parent) == ["level.c"]


def test_a_link_stays_a_link(level):
    (level.parent / "link.c").symlink_to("level.c")
    assert retile("rewrite", "--in-place", "link.c:2", "i:8 i", cwd=level.parent).status == 0
    assert (level.parent / "link.c").is_symlink() and "i_from" in level.read_text()


@pytest.mark.parametrize("target", ("/proc/none/x.c", "none/x.c", ".", "level.c/x.c", "/dev/full", "x" * 300))
def test_a_place_that_cannot_be_written(level, target):
    done = retile("rewrite", "level.c:2", "i:8 i", "-o", target, cwd=level.parent)
    assert (done.status, done.out) == (2, "") and target in done.err
    assert os.listdir(level.parent) == ["level.c"]


def test_a_full_disk(level):
    program = ("import resource; resource.setrlimit(resource.RLIMIT_FSIZE, (64, 64)); from retile.cli import _run; "
               "raise SystemExit(_run(['rewrite', 'level.c:2', 'i:8 i', '--in-place']))")
    done = subprocess.run([sys.executable, "-c", program], cwd=level.parent, capture_output=True, text=True,
                          env={**os.environ, "PYTHONPATH": str(ROOT)})
    assert done.returncode == 2 and "nothing was changed" in done.stderr
    assert level.read_text() == NEST and os.listdir(level.parent) == ["level.c"]


@pytest.mark.parametrize(("shell", "status"), [
    ("nests level.c >&-", 0), ("--help >&-", 0), ("nests none.c 2>/dev/full", 2), ("nests level.c >/dev/full", 2),
    ("nests none.c >&- 2>&-", 2), ("nests level.c <&-", 0)])
def test_streams_that_are_closed_or_full(level, shell, status):
    done = subprocess.run(["sh", "-c", f"{sys.executable} -m retile {shell}"], cwd=level.parent, capture_output=True,
                          env={**os.environ, "PYTHONPATH": str(ROOT)})
    assert done.returncode == status and b"Traceback" not in done.stderr and b"error in retile" not in done.stderr
