"""The command line as a process: streams, exit statuses, messages."""

import json
import os
import pty
import signal
import subprocess
import sys
import time

import pytest
from command_line import ROOT, SAMPLES, line_of, retile

BEAMS = f"samples_c/beamform.c:{line_of('beamform.c', 'form_beams')}"
EIGHT = f"samples_c/relax.c:{line_of('relax.c', 'relax_eight')}"
RETURNS = f"samples_c/first_return.c:{line_of('first_return.c', 'first_returns')}"
BREAK = line_of("first_return.c", "first_returns", "break;")
COMMANDS = ("nests", "depend", "check", "suggest", "rewrite", "measure", "host")


@pytest.mark.parametrize("command", [(), *((name,) for name in COMMANDS)])
def test_help_goes_to_standard_output(command):
    done = retile(*command, "--help")
    assert (done.status, done.err) == (0, "")
    assert done.out.startswith(f"Usage: {' '.join(('retile', *command))} ")


def test_help_names_every_command():
    said = retile("--help").out
    assert [name for name in COMMANDS if f"\n  {name} " not in said] == []


def test_version():
    assert retile("--version").out == "retile 0.1.0\n"


# ---------------------------------------------------------------- the call is wrong

@pytest.mark.parametrize("arguments, said", [
    (["unroll"], "No such command 'unroll'"),
    (["nests"], "Missing argument 'FILE...'"),
    (["check", "x.c:1"], "Missing argument 'PLAN'"),
    (["nests", "--speed", "x.c"], "No such option"),
    (["check", "samples_c/relax.c", "i j"], "is not an address"),
    (["check", "samples_c/relax.c:0", "i j"], "count from 1"),
    (["nests", "samples_c/no_such_file.c"], "samples_c/no_such_file.c"),
    (["nests", "samples_c"], "samples_c"),
    (["check", "no:such:3", "i"], "no:such"),
    (["depend", EIGHT, "--dot", "--json"], "exclude each other"),
    (["rewrite", EIGHT, "i j", "--in-place", "--diff"], "excludes"),
    (["rewrite", EIGHT, "i j", "--remainder", "guess"], "guess"),
    (["check", EIGHT, "i q"], "'q'"),
    (["check", EIGHT, "i:0 i j"], "chunk"),
    (["check", EIGHT, ""], "plan"),
    (["measure", EIGHT, "i j", "--set", "n"], "NAME=VALUE"),
    (["measure", EIGHT, "i j", "--set", "n=ten"], "ten"),
    (["measure", EIGHT, "i j", "--set", "q=10"], "no size q"),
])
@pytest.mark.parametrize("json_flag", [[], ["--json"]])
def test_a_wrong_call_ends_with_2_and_an_empty_standard_output(arguments, said, json_flag):
    done = retile(*arguments, *json_flag)
    assert (done.status, done.out) == (2, "")
    assert said in done.err
    assert "Traceback" not in done.err


def test_nothing_is_listed_if_one_of_several_files_cannot_be_read():
    done = retile("nests", "samples_c/relax.c", "samples_c/none.c", "--json")
    assert (done.status, done.out) == (2, "")


def test_c_that_does_not_parse_is_shown_with_its_line(tmp_path):
    (tmp_path / "torn.c").write_text("void f(int n) {\n    for (int i = 0; i < n; i++ {\n    }\n}\n")
    done = retile("nests", "torn.c", cwd=tmp_path)
    assert (done.status, done.out) == (2, "")
    assert "torn.c:2" in done.err and "for (int i = 0; i < n; i++ {" in done.err


def test_a_line_without_a_for_is_told_the_nearest_nests():
    line = line_of("relax.c", "relax_eight")
    done = retile("check", f"samples_c/relax.c:{line - 1}", "i j")
    assert (done.status, done.out) == (2, "")
    assert f"samples_c/relax.c:{line}" in done.err


def test_an_error_of_retile_itself_is_owned_up_to(tmp_path):
    (tmp_path / "sitecustomize.py").write_text(
        "import retile.host\ndef fail(): raise ValueError('caches of a\\nkind')\nretile.host.describe = fail\n")
    done = retile("host", PYTHONPATH=f"{tmp_path}:{ROOT}")
    assert (done.status, done.out) == (70, "")
    assert "error in retile, not in your code (ValueError" in done.err and "Traceback" not in done.err
    assert "RETILE_TRACEBACK=1" in done.err
    done = retile("host", PYTHONPATH=f"{tmp_path}:{ROOT}", RETILE_TRACEBACK="1")
    assert done.status == 70 and "Traceback" in done.err


# ---------------------------------------------------------------- nests

def test_nests_prints_a_table_and_nothing_else():
    done = retile("nests", "samples_c/relax.c", "samples_c/first_return.c")
    assert (done.status, done.err) == (0, "")
    rows = done.out.splitlines()
    assert [row.split()[0] for row in rows if row.startswith("samples_c/")] == [
        f"samples_c/{sample}:{line_of(sample, function)}" for sample, function in
        (("relax.c", "relax_four"), ("relax.c", "relax_eight"), ("relax.c", "relax_colour"),
         ("first_return.c", "first_returns"), ("first_return.c", "first_returns_by_halving"),
         ("first_return.c", "sum_until_mark"))]
    assert "refused" in next(row for row in rows if row.startswith(RETURNS))
    assert "ready" in next(row for row in rows if row.startswith(EIGHT))


def test_nests_lists_inner_loops_with_all_and_in_json():
    outermost = retile("nests", "samples_c/relax.c").out.count("samples_c/relax.c:")
    every = retile("nests", "--all", "samples_c/relax.c").out.count("samples_c/relax.c:")
    listed = json.loads(retile("nests", "--json", "samples_c/relax.c").out)["nests"]
    assert (outermost, every, len(listed)) == (3, 7, 7)
    assert sum(nest["outermost"] for nest in listed) == 3


def test_the_document_of_nests_has_the_fields_of_the_contract():
    done = retile("nests", "--json", "samples_c/first_return.c", "samples_c/swath_transpose.c")
    assert (done.status, done.err) == (0, "")
    listed = json.loads(done.out)["nests"]
    assert listed[0].items() >= {
        "address": RETURNS, "file": "samples_c/first_return.c", "line": BREAK - 5, "function": "first_returns",
        "outermost": True, "loops": ["b", "s"], "status": "refused"}.items()
    assert [refusal["line"] for refusal in listed[0]["refusals"]] == [BREAK]
    assert all({"line", "code", "reason"} <= refusal.keys() for refusal in listed[0]["refusals"])
    turn = next(nest for nest in listed if nest["function"] == "turn_swath")
    assert (turn["status"], turn["refusals"]) == ("ready", [])
    assert [set(assumption) >= {"code", "text"} for assumption in turn["assumptions"]] == [True]


def test_definitions_reach_the_preprocessor(tmp_path):
    (tmp_path / "grid.c").write_text(
        "#ifndef CELLS\n#error how many cells?\n#endif\ndouble g[CELLS];\n"
        "void clear(void) {\n    for (int i = 0; i < CELLS; i++)\n        g[i] = 0;\n}\n")
    assert retile("nests", "grid.c", cwd=tmp_path).status == 2
    assert retile("nests", "-DCELLS=8", "grid.c", cwd=tmp_path).status == 0
    assert retile("nests", "-D", "CELLS=8", "-std=c99", "--cc", "gcc", "grid.c", cwd=tmp_path).status == 0
    assert retile("nests", "-D", "CELLS=8", "-U", "CELLS", "grid.c", cwd=tmp_path).status == 2
    (tmp_path / "compile_commands.json").write_text(json.dumps(
        [{"directory": str(tmp_path), "file": "grid.c", "command": "cc -DCELLS=8 -c grid.c"}]))
    assert retile("nests", "-p", ".", "grid.c", cwd=tmp_path).status == 0


# ---------------------------------------------------------------- depend

def test_depend_as_a_document():
    done = retile("depend", EIGHT, "--json")
    assert (done.status, done.err) == (0, "")
    said = json.loads(done.out)
    line = line_of("relax.c", "relax_eight", r"z\[i\]\[j\] =")
    assert said["address"] == EIGHT
    assert [(s["id"], s["line"]) for s in said["statements"]] == [(str(line), line)]
    assert {(d["kind"], d["array"], tuple(d["direction"])) for d in said["dependences"]} >= {
        ("flow", "z", ("<", ">")), ("flow", "z", ("<", "=")), ("anti", "z", ("=", "<"))}
    assert [1, -1] in [d["distance"] for d in said["dependences"] if d["kind"] == "flow"]


def test_depend_as_a_table_and_as_a_graph():
    table = retile("depend", EIGHT)
    assert (table.status, table.err) == (0, "")
    assert "carried by" in table.out and "flow" in table.out
    graph = retile("depend", EIGHT, "--dot")
    assert (graph.status, graph.err) == (0, "")
    assert graph.out.startswith("digraph ") and graph.out.endswith("}\n")


def test_depend_of_a_refused_nest_is_no():
    done = retile("depend", RETURNS, "--json")
    assert done.status == 1
    assert json.loads(done.out)["refusals"][0]["line"] == BREAK
    assert "break;" in done.err


# ---------------------------------------------------------------- check

def test_check_of_a_legal_plan():
    done = retile("check", BEAMS, "k:64 j:256 i k j")
    assert (done.status, done.err) == (0, "")
    assert done.out.startswith(f'legal: {BEAMS} with plan "k:64 j:256 i k j"\n')


def test_check_of_an_illegal_plan_shows_two_executions():
    done = retile("check", EIGHT, "j i")
    assert (done.status, done.err) == (1, "")
    assert done.out.startswith("illegal: ")
    assert "In the original order:" in done.out and "writes z[" in done.out and "reads z[" in done.out


def test_the_document_of_check_has_the_fields_of_the_contract():
    done = retile("check", EIGHT, "j  i", "--json")
    assert (done.status, done.err) == (1, "")
    said = json.loads(done.out)
    assert {"address", "plan", "options", "verdict", "violations", "unproven", "instead", "refusals",
            "assumptions"} <= said.keys()
    assert (said["address"], said["plan"], said["options"], said["verdict"]) == (EIGHT, "j i", "", "illegal")
    for violation in said["violations"]:
        assert {"kind", "array", "parameters", "source", "target"} <= violation.keys()
        for end in (violation["source"], violation["target"]):
            assert end.keys() == {"statement", "line", "iterators"} and end["iterators"].keys() == {"i", "j"}


def test_check_of_a_refused_nest_is_no():
    done = retile("check", RETURNS, "s b")
    assert (done.status, done.err) == (1, "")
    assert done.out.startswith("refused: ")
    assert f"samples_c/first_return.c:{BREAK}" in done.out


# ---------------------------------------------------------------- rewrite

def test_rewrite_prints_the_whole_file_byte_for_byte_outside_the_nest():
    done = retile("rewrite", BEAMS, "k:64 i k j")
    assert (done.status, done.err) == (0, "")
    text = (SAMPLES / "beamform.c").read_text()
    head, tail = text.split("    for (int i = 0; i < n; i++) {", 1)[0], text[text.index("/* The same for a window"):]
    assert done.out.endswith(tail)
    before = [line for line in done.out[:done.out.index("    for (")].splitlines() if not line.startswith("#include")]
    kept = [line for line in head.splitlines() if not line.startswith("#include")]
    assert kept and kept == before[:len(kept)]
    assert "beams[i][j] += weights[i][k] * echoes[k][j];" in done.out


def test_rewrite_keeps_foreign_bytes_and_line_ends(tmp_path):
    original = ("// tide of the h\xe4rbour\r\nvoid shift(int n, double *z)\r\n{\r\n    int i;\r\n"
                "    for (i = 0; i < n; i++)\r\n        z[i] += 1.0;\r\n}\r\n").encode("latin-1")
    (tmp_path / "tide level.c").write_bytes(original)
    done = retile("rewrite", "tide level.c:5", "i:8 i", "-o", "out.c", cwd=tmp_path)
    assert (done.status, done.out, done.err) == (0, "", "")
    written = (tmp_path / "out.c").read_bytes()
    assert b"h\xe4rbour\r\n" in written and written != original
    assert written.count(b"\n") == written.count(b"\r\n")
    assert (tmp_path / "tide level.c").read_bytes() == original
    shown = subprocess.run([sys.executable, "-m", "retile", "rewrite", "tide level.c:5", "i:8 i"], cwd=tmp_path,
                           capture_output=True)
    assert shown.stdout == written


@pytest.mark.parametrize("tool", [["git", "apply"], ["patch", "-p1", "--quiet", "--binary"]])
def test_a_patch_gives_what_rewriting_in_place_gives(tmp_path, tool):
    sample = tmp_path / "relax.c"
    sample.write_bytes((SAMPLES / "relax.c").read_bytes())
    address = f"relax.c:{line_of('relax.c', 'relax_eight')}"
    patch = retile("rewrite", address, "i:5 i j", "--diff", cwd=tmp_path)
    assert (patch.status, patch.err) == (0, "")
    subprocess.run(tool, cwd=tmp_path, input=patch.out.encode(), check=True)
    patched = sample.read_bytes()
    sample.write_bytes((SAMPLES / "relax.c").read_bytes())
    assert retile("rewrite", address, "i:5 i j", "--in-place", cwd=tmp_path) == type(patch)(0, "", "")
    assert sample.read_bytes() == patched != (SAMPLES / "relax.c").read_bytes()


def test_the_document_of_rewrite_has_the_fields_of_the_contract():
    done = retile("rewrite", BEAMS, "i:8 i j k", "--remainder", "peel", "--json")
    assert (done.status, done.err) == (0, "")
    said = json.loads(done.out)
    assert {"address", "plan", "options", "verdict", "text", "diff", "assumptions"} <= said.keys()
    assert (said["plan"], said["options"], said["verdict"]) == ("i:8 i j k", "remainder peel", "legal")
    assert said["text"] == retile("rewrite", BEAMS, "i:8 i j k; remainder peel").out
    assert said["diff"] == retile("rewrite", BEAMS, "i:8 i j k; remainder peel", "--diff").out


def test_options_of_a_plan_win_over_those_of_the_call():
    said = json.loads(retile("rewrite", BEAMS, "i:8 i j k; remainder clamp", "--remainder", "peel", "--json").out)
    assert said["options"] == "remainder clamp"


@pytest.mark.parametrize("address, plan, verdict", [(EIGHT, "j i", "illegal"), (RETURNS, "s b", "refused")])
def test_nothing_is_written_for_a_plan_that_is_not_legal(tmp_path, address, plan, verdict):
    out = tmp_path / "out.c"
    done = retile("rewrite", address, plan, "-o", out)
    assert (done.status, done.out, out.exists()) == (1, "", False)
    assert done.err.startswith(verdict)
    said = json.loads(retile("rewrite", address, plan, "--json").out)
    assert (said["verdict"], said["text"], said["diff"]) == (verdict, None, None)


def test_a_folder_that_cannot_be_written_to_is_said_so(tmp_path):
    done = retile("rewrite", BEAMS, "i:8 i j k", "-o", tmp_path / "none" / "out.c")
    assert (done.status, done.out) == (2, "")
    assert "none" in done.err and "Traceback" not in done.err


# ---------------------------------------------------------------- host

def test_host():
    done = retile("host")
    assert (done.status, done.err) == (0, "")
    assert "processor" in done.out and "clock step" in done.out
    assert {"cpu", "caches", "compilers"} <= json.loads(retile("host", "--json").out).keys()


# ---------------------------------------------------------------- terminals, pipes, signals

def test_a_closed_pipe_ends_quietly():
    process = subprocess.Popen([sys.executable, "-m", "retile", "nests", "samples_c/relax.c", "--json"], cwd=ROOT,
                               stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    assert process.stdout and process.stderr
    process.stdout.close()
    assert process.stderr.read() == b""
    assert process.wait(30) == 128 + signal.SIGPIPE


def on_a_terminal(*arguments, **environment):
    """What a call prints to a terminal 60 columns wide."""
    leader, follower = pty.openpty()
    plain = {name: value for name, value in os.environ.items() if name != "NO_COLOR"}
    process = subprocess.Popen([sys.executable, "-m", "retile", *arguments], cwd=ROOT, stdout=follower, stderr=follower,
                               stdin=follower, env={**plain, "TERM": "xterm", "COLUMNS": "60", **environment})
    os.close(follower)
    said = b""
    while True:
        try:
            part = os.read(leader, 4096)
        except OSError:  # Linux: the other end is closed
            break
        if not part:
            break
        said += part
    os.close(leader)
    process.wait(30)
    return said.decode()


def test_colour_and_width_of_a_terminal():
    said = on_a_terminal("check", EIGHT, "j i")
    assert "\x1b[" in said
    assert "\x1b[" not in on_a_terminal("check", EIGHT, "j i", NO_COLOR="1")
    assert "\x1b[" not in on_a_terminal("check", EIGHT, "j i", TERM="dumb")
    table = on_a_terminal("nests", "samples_c/relax.c", NO_COLOR="1")
    assert max(len(line.rstrip("\r")) for line in table.splitlines()) <= 60


def test_interrupting_ends_with_130(tmp_path):
    process = subprocess.Popen([sys.executable, "-m", "retile", "measure", BEAMS, "i j k", "--set", "n=500",
                                "--seconds", "60", "-o", str(tmp_path / "kept.json")], cwd=ROOT,
                               stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    time.sleep(3)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=120)
    assert process.returncode == 130
    assert b"Traceback" not in err
