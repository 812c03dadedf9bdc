"""What the README shows is what the program does."""

import ast
import re
import subprocess
import sys

import pytest
from command_line import ROOT
from readme import README, code_blocks, examples

TEXT = README.read_text(encoding="utf-8")
EXACT = [example for example in examples(TEXT) if not example.measured]
MEASURED = [example for example in examples(TEXT) if example.measured]


@pytest.mark.parametrize("example", EXACT, ids=lambda example: example.command)
def test_an_example_prints_what_the_readme_shows(example):
    done = example.run()
    assert done.err == ""
    assert done.status in (0, 1)
    assert done.out == example.output


@pytest.mark.parametrize("example", MEASURED, ids=lambda example: example.command)
def test_a_measured_example_prints_the_same_table_with_other_numbers(example, tmp_path):
    done = example.run("--seconds", "0.2", "-o", str(tmp_path / "kept.json"), replacing=("n=1000", "n=70"))
    assert done.status == 0
    assert re.fullmatch(r"Building and running the loops of \S+ and of its variants\.\n", done.err)
    assert plans_and_verified(done.out) == plans_and_verified(example.output)
    assert re.sub(r"n = \d+", "n", done.out.splitlines()[0]) == re.sub(r"n = \d+", "n", example.output.splitlines()[0])


def plans_and_verified(output: str) -> list[tuple[str, bool]]:
    """The first column of the table, and whether the row says that the variant was verified."""
    lines = output.splitlines()
    start = next(number for number, line in enumerate(lines) if line.startswith("---"))
    rows = lines[start + 1:lines.index("", start)]
    return [(re.split(r"\s{2,}", row)[0], " yes " in row) for row in rows]


def test_there_are_examples_of_each_kind():
    assert {example.command.split()[1] for example in EXACT} >= {"nests", "check", "depend", "rewrite"}
    assert MEASURED and MEASURED[0].command.startswith("retile measure")


def test_the_python_example_runs():
    block, = code_blocks(TEXT, "python")
    lines = [line for line in block.splitlines() if line]
    assert len(lines) <= 12
    done = subprocess.run([sys.executable, "-c", block.replace('"n": 200', '"n": 40')], cwd=ROOT, capture_output=True,
                          text=True, timeout=300)
    assert (done.returncode, done.stderr) == (0, "")
    assert "legal ['weights and beams do not overlap'" in done.stdout
    assert "\n+++ b/samples_c/beamform.c\n" in done.stdout


def test_the_two_commands_stand_at_the_top():
    job, tests = (block.strip() for block in code_blocks(TEXT, "sh"))
    assert job.startswith("python3 -m venv ") and tests.startswith("python3 -m venv ")
    assert "\n" not in job + tests
    assert job.split("/bin/")[-1] == MEASURED[0].command  # the worked example shows the output of the first command
    assert (ROOT / ".ci" / "run").stat().st_mode & 0o100


def test_the_readme_lists_the_codes_of_refusals():
    part = TEXT.split("### What is refused")[1].split("\n## ")[0]
    rows = re.findall(r"^\| (`.*?) \|", part, re.MULTILINE)
    listed = {code for row in rows for code in re.findall(r"`([a-z-]+)`", row)}
    files = [*(ROOT / "retile").glob("nest/*.py"), *(ROOT / "retile").glob("plan/*.py")]
    texts = [file.read_text(encoding="utf-8") for file in files]
    assert {code for text in texts for code in codes_in(text)} - listed == set()
    assert [code for code in sorted(listed) if not any(f'"{code}"' in text for text in texts)] == []


def codes_in(text: str) -> set[str]:
    """The codes that a module refuses with, where they are written out in the call."""
    calls = [node for node in ast.walk(ast.parse(text)) if isinstance(node, ast.Call)
             and isinstance(node.func, ast.Name) and node.func.id in ("refused", "refusal", "Refusal")]
    words = [argument.value for call in calls for argument in call.args[1:3] if isinstance(argument, ast.Constant)]
    return {word for word in words if isinstance(word, str) and re.fullmatch(r"[a-z-]+", word)}
