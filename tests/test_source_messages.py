"""Every way in which a file cannot be used ends in one message with place, source line and remedy."""

from __future__ import annotations

import os
import random
import time
from pathlib import Path

import pytest
from source_marks import opened

from retile.model import RetileError
from retile.source import CompilerCall, complaint, open_source
from retile.source.compiler import preprocess


def message(path: str | Path, call: CompilerCall = CompilerCall(), bodies: bool = False) -> str:
    """What opening a file says."""
    with pytest.raises(RetileError) as caught:
        source = open_source(str(path), call)
        if bodies:
            for function in source.functions:
                function.body  # noqa: B018
    return str(caught.value)


def written(folder: Path, text: str | bytes) -> Path:
    path = folder / "survey.c"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    assert message(tmp_path / "gone.c") == f"{tmp_path}/gone.c: there is no such file"
    assert "directory" in message(tmp_path)
    assert "cannot be the name" in message("a\0b.c")


def test_a_file_that_is_no_file(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe.c")
    assert "not a regular file" in message(tmp_path / "pipe.c")


@pytest.mark.skipif(os.geteuid() == 0, reason="root reads everything")
def test_a_file_that_may_not_be_read(tmp_path: Path) -> None:
    path = written(tmp_path, "int x;")
    path.chmod(0)
    assert "cannot be read: Permission denied" in message(path)


def test_a_compiler_that_is_not_there(tmp_path: Path) -> None:
    path = written(tmp_path, "int x;")
    for cc in ("no-such-compiler", "/no/such/compiler -m64"):
        said = message(path, CompilerCall(cc))
        assert "not found" in said and "--cc" in said and "no" in said
    assert "--cc" in message(path, CompilerCall(""))
    assert "cannot be read as a command" in message(path, CompilerCall("cc '"))
    (tmp_path / "cc").write_text("int main;")
    assert "--cc" in message(path, CompilerCall(str(tmp_path / "cc")))


def test_a_compiler_with_arguments_of_its_own(tmp_path: Path) -> None:
    path = written(tmp_path, "int f(void) { return MARK; }")
    source = open_source(str(path), CompilerCall("env LC_ALL=C cc", ("-DMARK=3",)))
    assert source.types.constant(source.functions[0].body.block_items[0].expr) == 3


def test_a_compiler_that_does_not_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import retile.source.compiler as compiler

    path = written(tmp_path, "int x;")
    monkeypatch.setattr(compiler, "SECONDS", 0.2)
    assert "did not finish" in message(path, CompilerCall("sh -c 'sleep 30'"))
    monkeypatch.setattr(compiler, "SECONDS", 30.0)
    monkeypatch.setattr(compiler, "LARGEST_OUTPUT", 100_000)
    assert "preprocessed text" in message(path, CompilerCall("sh -c 'yes'"))


def test_a_missing_header_is_named_in_the_compilers_words(tmp_path: Path) -> None:
    path = written(tmp_path, 'int x;\n#include "chart/datum.h"\n')
    lines = message(path).splitlines()
    assert lines[0].startswith(f"{path}:2:10: ") and "chart/datum.h" in lines[0]
    assert lines[1:3] == ['    #include "chart/datum.h"', "             ^"]
    assert "-I" in lines[3] and len(lines) == 4


def test_an_error_of_the_preprocessor(tmp_path: Path) -> None:
    path = written(tmp_path, "#ifndef DEPTH\n#  error give -DDEPTH\n#endif\n")
    assert message(path).splitlines()[0].startswith(f"{path}:2:") and "give -DDEPTH" in message(path)
    open_source(str(path), CompilerCall(flags=("-DDEPTH=1",)))


@pytest.mark.parametrize(
    ("text", "line", "source_line"),
    [
        ("int f(void) {\n\tint a = 1 +;\n}\n", 2, "\tint a = 1 +;"),
        ("int x\nint y;\n", None, None),
        ("int f(void) { return 0; \n", None, None),
        ("typedef sounding depth;\nint x;\n", 1, "typedef sounding depth;"),
        ("#define BROKEN (1 +\nint f(void) {\n  return BROKEN );\n}\n", 3, "return BROKEN );"),
        ("int f(void) { @ }\n", 1, "int f(void) { @ }"),
        ("int f(void) { return 'a; }\n", 1, None),
    ],
)
def test_syntax_errors_name_their_line(tmp_path: Path, text: str, line: int | None, source_line: str | None) -> None:
    path = written(tmp_path, text)
    said = message(path, bodies=True).splitlines()
    assert said[0].startswith(f"{path}:") and "error:" not in said[0]
    assert line is None or said[0].startswith(f"{path}:{line}")
    if source_line is not None:
        assert any(source_line.strip() in row for row in said[1:]), said
        assert any(row.strip() == "^" for row in said)
        assert "\t" not in source_line or said[2] == "    \t           ^"


def test_what_only_the_parser_does_not_read(tmp_path: Path) -> None:
    """Nested functions are an extension of GCC: the compiler finds nothing wrong, retile does not read them."""
    path = written(tmp_path, "int f(int n) {\n  int half(int m) { return m / 2; }\n  return half(n);\n}\n")
    said = message(path, CompilerCall("gcc"), bodies=True)
    assert said.startswith(f"{path}:2:") and "    int half(int m) { return m / 2; }" in said.replace("      ", "    ")
    assert "retile reads C11" in said


def test_an_error_in_one_function_leaves_the_others(tmp_path: Path) -> None:
    source = opened(tmp_path, "int f(void) { return 1 + ; }\nint g(void) { return 2; }\n")
    assert source.functions[1].body.block_items
    with pytest.raises(RetileError, match="survey.c:1:"):
        source.functions[0].body  # noqa: B018


def test_types_that_only_the_real_header_has(tmp_path: Path) -> None:
    """A name that our own headers lack is looked up in the system's."""
    source = opened(
        tmp_path,
        "#define _GNU_SOURCE\n#include <stdio.h>\n#include <stdlib.h>\n"
        "int f(int n) { cookie_io_functions_t hooks = { 0 }; for (int i = 0; i < n; i++) n += hooks.read != "
        "0; return n; }\n"
        "int g(drand48_dummy) int drand48_dummy; { struct drand48_data d; return sizeof d > 3; }\n",
    )
    loop = source.functions[0].body.block_items[1]
    assert source.slice(source.span(loop)).startswith("for (")  # type: ignore[arg-type]
    assert source.functions[1].body.block_items


def test_the_form_of_a_complaint() -> None:
    assert complaint("a.c", 3, 5, "\tx = y;", "no", "Do.") == "a.c:3:5: no\n    \tx = y;\n    \t   ^\nDo."
    assert complaint("a.c", 3, None, "x", "no", "") == "a.c:3: no\n    x"
    assert complaint("a.c", 3, 1, "  ", "no", "Do.") == "a.c:3:1: no\nDo."
    long = complaint("a.c", 1, 5000, "x" * 4999 + "!" + "y" * 5000, "no", "").splitlines()
    assert len(long[1]) < 200 and long[1][len(long[2]) - 1] == "!"
    assert "\x1b" not in complaint("a.c", 1, 1, "\x1b[31mred\udc80", "no", "")


FUZZ_PIECES = ["for(", ";", ")", "{", "}", "int ", "x", "=", "1", "\n", "#if 1\n", "#else\n", "#endif\n",
    "#define x ", "\\\n", '"',
               "'", "/*", "*/", "//", "typedef ", "struct ", "if(", "else ", "case ", ":", "(", "[", "]", "*",
               "&&", "...", "?", "x(",
               "while(", "do ", "switch(", "#line 3\n", "__attribute__((", "asm(", "typeof(", "enum ", "\0",
               "\xff", "0x", "1e+",
               "_Pragma(", "#pragma x\n", "## ", "# ", "return ", "goto ", "void f(int n)", "\f", "\r\n"]  # fmt: skip


def survives(folder: Path, data: bytes) -> None:
    path = written(folder, data)
    try:
        source = open_source(str(path), CompilerCall(flags=("-ftabstop=8",)))
        assert source.encode(source.text) == data
        assert "".join(token.text for token in source.tokens) == source.text
        for function in source.functions:
            for item in function.body.block_items or ():
                span = source.span(item)
                assert span is None or source.slice(span).strip()
        source.identifiers  # noqa: B018
    except RetileError as error:
        assert str(error).startswith(str(path)) or "compiler" in str(error)
        str(error).encode("utf-8")


@pytest.mark.parametrize("seed", range(40))
def test_no_text_ends_in_a_traceback(tmp_path: Path, seed: int) -> None:
    chance = random.Random(seed)
    if seed % 4 == 0:
        data = chance.randbytes(chance.randrange(400))
    elif seed % 4 == 1:
        sample = sorted((Path(__file__).parent.parent / "samples_c").glob("*.c"))[seed % 8].read_bytes()
        data = sample[: chance.randrange(len(sample))]
    else:
        data = "".join(chance.choices(FUZZ_PIECES, k=chance.randrange(60))).encode("latin-1")
    survives(tmp_path, data)


@pytest.mark.long
@pytest.mark.parametrize("seed", range(1000, 2500))
def test_no_text_ends_in_a_traceback_long(tmp_path: Path, seed: int) -> None:
    chance = random.Random(seed)
    body = "".join(chance.choices(FUZZ_PIECES, k=chance.randrange(25)))
    survives(tmp_path, f"int g; void f(int n) {{ for (int i = 0; i < n; i++) {{ {body} }} }}\n".encode("latin-1"))


def test_deep_nesting_is_refused_not_crashed_on(tmp_path: Path) -> None:
    for text in ("int x = " + "(" * 3000 + "1" + ")" * 3000 + ";", "void f(void) {" + "{" * 3000 + "}" * 3000 + "}",
                 "int f(int n) {" + "if (n) ; else " * 3000 + "; }", "int x = " + "1+" * 5000 + "1;"):  # fmt: skip
        path = written(tmp_path, text)
        try:
            source = open_source(str(path))
            for function in source.functions:
                source.span(function.body)
        except RetileError as error:
            assert str(path) in str(error)


def test_the_compiler_works_while_other_things_are_done(tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    begun = preprocess(CompilerCall(f"sh -c 'echo int depth\\; && touch {mark}'"), "line.c", stubs=False)
    end = time.monotonic() + 20
    while not mark.exists() and time.monotonic() < end:
        time.sleep(0.01)
    assert mark.exists()  # nobody has asked for the answer yet
    assert begun.answer().output == "int depth;\n"


def test_a_run_that_nobody_asks_for_is_stopped(tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    begun = preprocess(CompilerCall(f"sh -c 'sleep 1; touch {mark}'"), "line.c", stubs=False)
    begun.stop()
    begun.stop()
    time.sleep(1.3)
    assert not mark.exists()
