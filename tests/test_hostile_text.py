"""Hostile texts: whatever stands in a file or in an option, an answer or a message comes, soon, and nothing is written."""

from __future__ import annotations

import os
import random
from pathlib import Path

import pytest
from command_line import SAMPLES, retile
from hostile import Call, Hammer, loops_of, mutant
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

HEAD = "void level(int n, double *a, double b[100][100]) {\n"
LOOP = "for (int i = 0; i < n; i++)\n"
REAL = [path.read_bytes() for path in sorted(SAMPLES.glob("*.c"))]


def _loops(depth: int, body: str) -> str:
    return HEAD + "".join(f"for (int i{k} = 0; i{k} < n; i{k}++)\n" for k in range(depth)) + body + "}\n"


def _one(body: str) -> str:
    return f"{HEAD}{LOOP}{body}\n}}\n"


NESTED = {
    "parentheses": _one("a[i] = " + "(" * 300 + "1" + ")" * 300 + ";"),
    "many parentheses": _one("a[i] = " + "(" * 20_000 + "1" + ")" * 20_000 + ";"),
    "blocks": _one("{" * 3_000 + "a[i] = 1;" + "}" * 3_000),
    "loops": _loops(250, "a[0] += 1;"),
    "ifs": _one("if (i > 3) " * 300 + "a[i] = 1;"),
    "else ifs": _one("".join(f"if (i == {k}) a[i] = {k}; else " for k in range(1_000)) + "a[i] = 1;"),
    "a long sum": _one("a[i] = " + "+".join(["a[i]"] * 2_000) + ";"),
    "signs": _one("a[i] = " + "-~" * 1_500 + "1;"),
    "casts": _one("a[i] = " + "(int)" * 500 + "1;"),
    "subscripts": _one("a[(int)" * 300 + "1" + "]" * 300 + " = 1;"),
    "pointers": f"void level(int n, int {'*' * 300}a) {{ {LOOP} a[i] = 0; }}\n",
    "dimensions": f"int a{'[1]' * 1_000};\nvoid level(int n) {{ {LOOP} a{'[i]' * 1_000} = 0; }}\n",
    "macros": "".join(f"#define M{k} M{k + 1}\n" for k in range(3_000)) + "#define M3000 1\n" + _one("a[i] = M0;"),
    "macro calls": "#define S(x) (x)\n" + _one("a[i] = " + "S(" * 500 + "1" + ")" * 500 + ";"),
    "structures": "struct s0 { int x; };\n" + "".join(f"struct s{k + 1} {{ struct s{k} y; }};\n" for k in range(500))
                  + f"void level(int n, struct s500 *a) {{ {LOOP} a[i]{'.y' * 500}.x = 1; }}\n",
}
NUMBERS = {
    "a bound": f"{HEAD}for (int i = 0; i < {'9' * 5_000}; i++) a[i] = 1;\n}}\n",
    "hexadecimal": _one(f"a[i + 0x{'f' * 900}] = 1;"),
    "a megabyte": "1" * 1_000_000,
    "products": _one("a[" + "*".join(["9999999999"] * 300) + "*i] = 1;"),
    "shifts": "int t[1LL << 4000000000000];\n" + _one("t[i << 2000000000] = 1 << 1000000000;"),
    "extents": "double t[2147483647][2147483647][2147483647];\n" + _one("t[i][n][i] = t[n][i][2147483646];"),
    "remainders": _one("a[" + "+".join(f"i % {k}" for k in range(2, 40)) + "] = 1;"),
}
LARGE = {
    "statements": _one("{" + "".join(f"a[i+{k}] = {k};\n" for k in range(300)) + "}"),
    "arrays": "void level(int n, " + ",".join(f"double *a{k}" for k in range(300)) + f") {{\n{LOOP}{{"
              + "".join(f"a{k}[i] = 1;\n" for k in range(300)) + "}\n}\n",
    "joined lines": _one("a[i] = 1;" + "\\\n" * 300_000),
    "comments": "/* note */\n" * 60_000 + _one("a[i] = 1;"),
    "a long line": _one("a[i] = 1; /* " + "x" * 1_000_000 + " */"),
    "macros": "".join(f"#define M{k} M{k + 1}\n" for k in range(20_000)) + _one("a[i] = 1;"),
    "functions": "".join(f"static int g{k}(int x) {{ return x * {k}; }}\n" for k in range(3_000)) + _one("a[i] = 1;"),
    "nests": HEAD + "".join(f"{LOOP} a[i] = {k};\n" for k in range(300)) + "}\n",
    "a string": _one('a[i] = "' + "x" * 200_000 + '"[0];'),
}
BROKEN = {
    "a comment that does not end": _one("a[i] = 1; /*") + "x\n" * 50_000,
    "many of those": "#/*" * 50_000,
    "a string that does not end": _one('a[i] = "abc'),
    "quotes": "'" * 50_000, "double quotes": '"' * 50_001, "backslashes": "\\" * 100_000, "hashes": "#\n" * 50_000,
    "braces": "{" * 50_000, "closing braces": "}" * 50_000, "zeros": "\0" * 500_000, "dots": "." * 100_000, "nothing": "",
    "itself": '#include "nest.c"\n' + _one("a[i] = 1;"),
    "a device": '#include "/dev/zero"\n' + _one("a[i] = 1;"),
    "old style": "level(a, n) double *a; int n; { int i; for (i = 0; i < n; i++) a[i] = 1; }\n",
}
TEXTS = {f"{kind}: {name}": text for kind, texts in (("nested", NESTED), ("numbers", NUMBERS), ("large", LARGE), ("broken", BROKEN))
         for name, text in texts.items()}


@pytest.fixture(scope="module")
def hammer():
    with Hammer() as running:
        yield running


def _asked(hammer: Hammer, folder: Path, text: bytes, plan: str = "j i", every: bool = False) -> list[Call]:
    """The faults of some calls on a text; nothing may be written."""
    (folder / "nest.c").write_bytes(text)
    calls = [hammer("nests", "--all", "nest.c", cwd=folder)]
    lines = list(loops_of(text))
    if calls[0].status == 0 and lines:
        address = f"nest.c:{lines[0 if every else len(text) % len(lines)]}"
        calls += [hammer(word, address, plan, cwd=folder) for word in (("check", "rewrite") if every else ("rewrite",))]
        calls.append(hammer("depend", address, cwd=folder))
    assert os.listdir(folder) == ["nest.c"]
    return calls


@pytest.mark.parametrize("name", TEXTS)
def test_a_hostile_text_gets_an_answer_or_a_message(hammer, tmp_path, name):
    calls = _asked(hammer, tmp_path, TEXTS[name].encode(), "i", every=True)
    assert [(call.arguments, call.faults(), call.err[-300:]) for call in calls if call.faults()] == []


@pytest.mark.parametrize(("name", "code"), [
    ("nested: loops", b"too-large"), ("large: statements", b"too-large"), ("large: arrays", b"too-large"),
    ("numbers: remainders", b"too-large")])
def test_what_would_take_minutes_is_refused(hammer, tmp_path, name, code):
    (tmp_path / "nest.c").write_text(TEXTS[name])
    assert code in hammer("nests", "--json", "nest.c", cwd=tmp_path).out


def test_as_many_loops_as_are_read(hammer, tmp_path):
    (tmp_path / "nest.c").write_text(_loops(12, "a[i0 + i11] += 1;"))
    assert hammer("check", "nest.c:2", "i0 i1 i2 i3 i4 i5 i6 i7 i8 i9 i10 i11", cwd=tmp_path).status == 0
    (tmp_path / "nest.c").write_text(_loops(13, "a[i0 + i12] += 1;"))
    assert hammer("depend", "nest.c:2", cwd=tmp_path).status == 1
    assert hammer("depend", "nest.c:3", cwd=tmp_path).status == 1  # the loop around it counts too


@pytest.mark.parametrize("ends", ["\r\n", "\r", "\n\r", " \\\n", "\v\n"])
def test_all_kinds_of_line_ends(hammer, tmp_path, ends):
    text = REAL[1].decode().replace("\n", ends).encode()
    assert [call.faults() for call in _asked(hammer, tmp_path, text) if call.faults()] == []


def test_text_in_other_letters(hammer, tmp_path):
    plain = _one("a[i] = 1;")
    for text in (plain.replace("{", "<%").replace("[", "<:").replace("]", ":>"), plain.replace("for", "f\\\nor"),
                 plain.replace("i++", "i+\\\n+"), "??=define X\n" + plain, '#line 1 "other.c"\n' + plain, plain.rstrip(),
                 '_Pragma("once")\n' + plain, plain.replace("\n", "\n\f"), plain.encode().decode() + "\x1a"):
        assert [call.faults() for call in _asked(hammer, tmp_path, text.encode()) if call.faults()] == []
    assert hammer("check", "nest.c:2", "i", cwd=tmp_path).status in (0, 2)


# ---------------------------------------------------------------- options

WORDS = st.one_of(
    st.sampled_from(["", " ", ":", ";", "i:", ":8", "i:8:8", "i:-1", "i:0", "i:" + "9" * 5_000, "i i", "(i", "(i+j)", "(i+j):8 i",
                     "i@", "i@3", "@", "i@99999999999999999999", "; ;", "; remainder", "; remainder x", "; hold", "i j; pack a",
                     "i--", "i{", "{{i}}", "%s", "\t", "\x00"[:0], "i\nj", "\u202e", "i,j", "i*j", "(" * 500, "i " * 2_000,
                     "for", "(i+" * 300 + "j" + ")" * 300]),
    st.text(alphabet="ijk abn0189:;@()+-*,.=<>!{}%$\\\"'\n\tπ", max_size=24))


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(words=st.tuples(WORDS, WORDS), option=st.sampled_from(
    ["plan", "--assume", "--distinct", "-D", "-U", "-I", "-include", "-std", "--cc", "-p", "--set", "address"]))
def test_hostile_options(hammer, tmp_path_factory, words, option):
    folder = tmp_path_factory.getbasetemp() / "options"
    folder.mkdir(exist_ok=True)
    (folder / "nest.c").write_bytes(REAL[1])
    line = next(loops_of(REAL[1]))
    value = words[0].replace("/", "")
    if option == "--cc":
        value = "cc " + value.replace("-", "")
    if option == "plan":
        call = hammer("rewrite", f"nest.c:{line}", *words[:1], cwd=folder)
    elif option == "address":
        call = hammer("check", f"nest.c{words[0]}:{words[1]}", "i", cwd=folder)
    elif option == "--set":
        call = hammer("depend", f"nest.c:{line}", "--space", "x.svg", "--set", f"n={words[0]}", "--set", words[1], cwd=folder)
    else:
        call = hammer("check", f"nest.c:{line}", "i j", option, value, cwd=folder)
    (folder / "x.svg").unlink(missing_ok=True)
    assert (call.faults(), call.err[-300:] if call.faults() else b"") == ([], b"")
    assert os.listdir(folder) == ["nest.c"]


# ---------------------------------------------------------------- damaged C

@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(seed=st.integers(0, 2**32))
def test_damaged_c_gets_an_answer_or_a_message(hammer, tmp_path_factory, seed):
    folder = tmp_path_factory.getbasetemp() / "damaged"
    folder.mkdir(exist_ok=True)
    choose = random.Random(seed)
    calls = _asked(hammer, folder, mutant(choose.choice(REAL), choose, REAL))
    assert [(call.arguments, call.faults(), call.err[-300:]) for call in calls if call.faults()] == []


@pytest.mark.long
def test_damaged_c_long(hammer, tmp_path, request):
    """``pytest -m long tests/test_hostile_text.py --pairs 20000 --seed 7``"""
    first, count = request.config.getoption("--seed"), request.config.getoption("--pairs")
    for seed in range(first * 1_000_000, first * 1_000_000 + count):
        choose = random.Random(seed)
        calls = _asked(hammer, tmp_path, mutant(choose.choice(REAL), choose, REAL))
        assert [(seed, call.arguments, call.faults(), call.err[-300:]) for call in calls if call.faults()] == []


def test_the_last_function_is_read_though_another_is_too_deep(tmp_path):
    (tmp_path / "nest.c").write_text(NESTED["many parentheses"] + NUMBERS["a bound"].replace("level", "other").replace("9" * 5_000, "n"))
    assert retile("check", "nest.c:6", "i", cwd=tmp_path).status == 0
