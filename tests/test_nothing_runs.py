"""Nothing runs by surprise: which programs retile starts, with which words, limits and environment, and what it leaves."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from command_line import ROOT, retile

from retile.model import RetileError
from retile.processes import MIB, limit
from retile.scratch import Scratch, clear
from retile.source import flags_from_compile_commands
from retile.trial.build import sanitizer_environment

NEST = """\
void level(int n, int m, double depth[n][m]) {
    for (int i = 0; i < n; i++)
        for (int j = 0; j < m; j++)
            depth[i][j] = 2 * depth[i][j];
}
"""
RUNS = '__attribute__((constructor)) static void at_start(void) { extern int system(const char *); system("touch ran"); }\n'
RECORDER = """\
#!{python}
import json, os, sys
with open({log!r}, "a") as log:
    log.write(json.dumps(sys.argv[1:]) + "\\n")
os.execvp("cc", ["cc", *sys.argv[1:]])
"""
LOOK_ONLY = {"-E", "-fsyntax-only", "--version"}


@pytest.fixture
def recorded(tmp_path):
    """A compiler that writes down how it is called, and a way to read that."""
    log, program = tmp_path / "calls", tmp_path / "bin" / "recorder"
    program.parent.mkdir()
    program.write_text(RECORDER.format(python=sys.executable, log=str(log)))
    program.chmod(0o755)
    return program, lambda: [json.loads(line) for line in log.read_text().splitlines()] if log.exists() else []


# ---------------------------------------------------------------- analysing runs nothing

@pytest.mark.parametrize("words", [("nests",), ("depend",), ("check", "j i"), ("rewrite", "j:8 i j"), ("suggest",)])
def test_analysing_only_asks_the_compiler_to_read(tmp_path, recorded, words):
    program, calls = recorded
    (tmp_path / "level.c").write_text(RUNS + NEST)
    where = "level.c" if words[0] == "nests" else "level.c:3"
    assert retile(words[0], where, *words[1:], "--cc", program, cwd=tmp_path).status == 0
    assert calls() and all(LOOK_ONLY.intersection(call) for call in calls())
    assert not (tmp_path / "ran").exists()


def test_text_that_is_no_c_is_only_read(tmp_path, recorded):
    program, calls = recorded
    (tmp_path / "level.c").write_text(NEST.replace("int j", "int int"))
    assert retile("nests", "level.c", "--cc", program, cwd=tmp_path).status == 2
    assert {"-E", "-fsyntax-only"} == {word for call in calls() for word in call} & LOOK_ONLY
    assert all(LOOK_ONLY.intersection(call) for call in calls())


def test_measure_says_that_it_runs_the_code(tmp_path):
    (tmp_path / "level.c").write_text(NEST)
    done = retile("measure", "level.c:2", "j i", "--set", "n=20", "--set", "m=20", "--seconds", "0.05", cwd=tmp_path)
    assert done.status == 0 and "Building and running the loops of level.c:2" in done.err
    refused = retile("measure", "level.c:2", "j i", cwd=tmp_path)
    assert refused.status == 2 and "no value for n, m" in refused.err


# ---------------------------------------------------------------- names

NAMES = ("-o.c", "$(touch ran).c", 'a"b.c', "a'b.c", "%s.c", "@file.c", "{{ 7 * 7 }}.c", "<script>.c", "a\nb.c", ";touch ran;.c",
         "-fplugin=x.c", "a\\b.c", "--help")


@pytest.mark.parametrize("name", NAMES)
def test_a_files_name_is_only_a_name(tmp_path, name):
    (tmp_path / name).write_text(NEST)
    address = f"{name}:2"
    assert retile("nests", "--", name, cwd=tmp_path).status == 0
    assert retile("check", "--", address, "j i", cwd=tmp_path).status == 0
    assert retile("depend", "--graph", "graph.svg", "--", address, cwd=tmp_path).status == 0
    assert retile("rewrite", "--in-place", "--", address, "j:8 i j", cwd=tmp_path).status == 0
    assert "j_from" in (tmp_path / name).read_text()
    assert "<script>" not in (tmp_path / "graph.svg").read_text()
    assert set(os.listdir(tmp_path)) == {name, "graph.svg"}


@pytest.mark.parametrize("name", ("$(touch ran) -o x.c", 'a"b\\.c'))
def test_a_files_name_is_only_a_name_when_measuring_too(tmp_path, name):
    (tmp_path / name).write_text(NEST)
    done = retile("measure", f"{name}:2", "j i", "--set", "n=9", "--set", "m=9", "--seconds", "0.05", "-o", "r.json",
                  cwd=tmp_path)
    assert done.status == 0, done.err
    assert set(os.listdir(tmp_path)) == {name, "r.json"}


# ---------------------------------------------------------------- compilation databases

HOSTILE = ["-fplugin=evil.so", "-wrapper", "touch,ran", "-B.", "-B", ".", "@response", "-specs=evil", "-Xclang", "-load",
           "-Wp,-MD,ran", "-MD", "-MF", "ran", "-o", "ran", "-save-temps", "-fdump-tree-all", "-dumpdir", "x", "-E", "-S",
           "-fplugin-arg-a-b", "-fpass-plugin=evil.so", "-imultilib", "x", "-x", "assembler", "-fuse-ld=evil", "-no-canonical-prefixes",
           "-fdebug-prefix-map=a=b", "-fprofile-use=ran", "-ftest-coverage", "--coverage", "-fmodules-cache-path=x",
           "-fcrash-diagnostics-dir=x", "-foptimization-record-file=ran", "-fsave-optimization-record", "-fstack-usage",
           "-fdump-rtl-all", "-mllvm", "-load=evil.so", "-femit-class-debug-always", "-fauto-profile=x"]
READING = ["-DDEPTH=2", "-UDEBUG", "-std=c11", "-O2", "-march=native", "-msse2", "-fopenmp", "-funsigned-char", "-fwrapv", "-pthread",
           "-fno-strict-aliasing", "-ffast-math", "-fshort-enums", "-ansi", "-nostdinc", "-m32"]


def _flags(folder: Path, *words: str, compiler: str = "cc") -> tuple[str, ...]:
    (folder / "level.c").write_text(NEST)
    (folder / "compile_commands.json").write_text(json.dumps(
        [{"directory": str(folder), "file": "level.c", "arguments": [compiler, *words, "level.c"]}]))
    return flags_from_compile_commands(str(folder), str(folder / "level.c")).flags


def test_only_flags_that_say_how_text_reads_are_taken_from_a_database(tmp_path):
    assert _flags(tmp_path, *READING) == tuple(READING)
    assert _flags(tmp_path, *HOSTILE) == ()


def test_a_shell_line_in_a_database_is_words(tmp_path):
    (tmp_path / "level.c").write_text(NEST)
    (tmp_path / "compile_commands.json").write_text(json.dumps([{
        "directory": str(tmp_path), "file": "level.c",
        "command": "cc -DDEPTH=$(touch\\ ran) level.c; touch ran && `touch ran` | touch ran > ran"}]))
    assert retile("nests", "-p", ".", "level.c", cwd=tmp_path).status == 0
    assert set(os.listdir(tmp_path)) == {"level.c", "compile_commands.json"}


@pytest.mark.parametrize("compiler", ("rm", "/bin/sh", "touch", "python3", "./evil", "/tmp/../bin/rm", "env", "cc;rm", "ccache"))
def test_a_database_names_no_program_but_a_compiler(tmp_path, compiler):
    (tmp_path / "evil").write_text("#!/bin/sh\ntouch ran\n")
    (tmp_path / "evil").chmod(0o755)
    with pytest.raises(RetileError, match="--cc"):
        _flags(tmp_path, compiler=compiler)
    assert retile("nests", "-p", ".", "level.c", cwd=tmp_path).status == 2
    assert not (tmp_path / "ran").exists()
    assert retile("nests", "-p", ".", "--cc", "cc", "level.c", cwd=tmp_path).status == 0


@pytest.mark.parametrize("compiler", ("gcc", "/usr/bin/cc", "gcc-12", "clang-17", "x86_64-linux-gnu-gcc-12", "arm-none-eabi-gcc", "icx", "c99", "tcc"))
def test_compilers_are_known_by_their_names(tmp_path, compiler):
    assert _flags(tmp_path, "-DA", compiler=compiler) == ("-DA",)


@pytest.mark.parametrize("text", ("[" * 100_000, '[{"directory": 1}]', "\x00", '[{"directory": "\\u0000", "file": "level.c", "command": "cc"}]',
                                  '[{"directory": "/", "file": "level.c", "arguments": ["cc", "\\u0000"]}]', '{"a": NaN}', "9" * 5000))
def test_a_database_that_is_none_gives_a_message(tmp_path, text):
    (tmp_path / "level.c").write_text(NEST)
    (tmp_path / "compile_commands.json").write_text(text)
    done = retile("nests", "-p", ".", "level.c", cwd=tmp_path)
    assert (done.status, done.out) == (2, "") and "error in retile" not in done.err and done.err


# ---------------------------------------------------------------- limits

@pytest.mark.parametrize(("program", "signals"), [
    ("\nwhile True: pass", {signal.SIGXCPU, signal.SIGKILL}),
    ("x = bytearray(400 << 20)", {1}),
    ("import sys; open('big', 'wb').write(bytes(9 << 20))", {1, signal.SIGXFSZ})])
def test_a_program_that_takes_too_much_is_ended(tmp_path, program, signals):
    process = subprocess.Popen([sys.executable, "-S", "-c", "input();" + program], cwd=tmp_path, stdin=subprocess.PIPE,
                               stderr=subprocess.DEVNULL)
    limit(process, seconds=1, memory=200 * MIB, files=MIB)
    process.communicate(b"go\n", timeout=60)
    assert abs(process.returncode) in signals


def test_kernels_see_little_of_the_environment(monkeypatch):
    for name in ("LD_PRELOAD", "SECRET_TOKEN", "OMP_NUM_THREADS", "LD_LIBRARY_PATH"):
        monkeypatch.setenv(name, "3")
    seen = sanitizer_environment()
    assert {"LD_PRELOAD", "SECRET_TOKEN"}.isdisjoint(seen) and {"OMP_NUM_THREADS", "LD_LIBRARY_PATH", "PATH"} <= seen.keys()


def test_a_preprocessor_that_never_ends_gives_a_message(tmp_path):
    bomb = "#define A0 1\n" + "".join(f"#define A{k + 1} A{k} + A{k}\n" for k in range(26))
    (tmp_path / "level.c").write_text(bomb + "int x = A26;\n")
    begun = os.times()
    done = retile("nests", "level.c", cwd=tmp_path)
    used = os.times()
    assert (done.status, done.out) == (2, "") and done.err.count("\n") == 1
    assert used.children_user - begun.children_user < 20


# ---------------------------------------------------------------- scratch folders

def test_a_folder_is_removed_and_those_of_killed_runs_are_cleared(tmp_path, monkeypatch):
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    mine, killed, other = Scratch("test"), Scratch("test"), Scratch("else")
    killed._lock.close()  # as the system does when the process ends
    long_ago = time.time() - 3600
    for scratch in (mine, killed, other):
        os.utime(scratch.folder, (long_ago, long_ago))
    (tmp_path / "retile-test-link").symlink_to(other.folder)
    clear("test")
    assert mine.folder.is_dir() and other.folder.is_dir() and not killed.folder.exists()
    mine.remove()
    assert not mine.folder.exists() and (tmp_path / "retile-test-link").is_symlink()
    other.remove()


def test_a_folder_that_is_just_being_made_is_left_alone(tmp_path, monkeypatch):
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    young = Scratch("test")
    young._lock.close()
    (tmp_path / "retile-test-empty").mkdir()
    clear("test")
    assert young.folder.is_dir() and (tmp_path / "retile-test-empty").is_dir()


@pytest.mark.parametrize("number", (signal.SIGINT, signal.SIGTERM, signal.SIGKILL))
def test_what_an_ended_measurement_leaves(tmp_path, number):
    scratch, work = tmp_path / "scratch", tmp_path / "work"
    scratch.mkdir()
    work.mkdir()
    (work / "level.c").write_text(NEST)
    command = [sys.executable, "-m", "retile", "measure", "level.c:2", "j i", "--set", "n=400", "--set", "m=400",
               "--seconds", "60", "-o", "r.json"]
    process = subprocess.Popen(command, cwd=work, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
                               env={**os.environ, "TMPDIR": str(scratch), "PYTHONPATH": str(ROOT)})
    deadline = time.monotonic() + 50
    while not list(scratch.glob("retile-harness-*")) and time.monotonic() < deadline:
        time.sleep(0.05)
    process.send_signal(number)
    process.wait(60)
    left = {folder.name.split("-")[1] for folder in scratch.iterdir()}
    assert left <= ({"trial", "harness"} if number == signal.SIGKILL else set())
    assert {file.name for file in work.iterdir()} <= {"level.c", "r.json"}
    for folder in scratch.iterdir():
        os.utime(folder, (0, 0))
    for kind in ("trial", "harness"):
        subprocess.run([sys.executable, "-c", f"import retile.scratch; retile.scratch.clear({kind!r})"], check=True,
                       env={**os.environ, "TMPDIR": str(scratch), "PYTHONPATH": str(ROOT)})
    assert not list(scratch.iterdir())
