"""Texts spliced, files replaced whole or not at all, flags out of a compilation database."""

from __future__ import annotations

import json
import os
import stat
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from retile.model import RetileError
from retile.source import flags_from_compile_commands, open_source, replace_file, splice
from retile.source.lex import tokenize


def test_splice_replaces_only_what_it_is_told() -> None:
    assert splice("abcdef", []) == "abcdef"
    assert splice("abcdef", [(4, 5, "!"), (0, 1, ""), (2, 2, "<"), (2, 2, ">")]) == "b<>cd!f"
    for edits in ([(0, 3, ""), (2, 4, "")], [(3, 9, "")], [(-1, 2, "")], [(3, 2, "")]):
        with pytest.raises(ValueError):
            splice("abcdef", edits)


@given(st.text(max_size=40), st.lists(st.tuples(st.integers(0, 40), st.text(max_size=5)), max_size=4))
def test_what_splice_inserts_can_be_taken_out_again(text: str, inserts: list[tuple[int, str]]) -> None:
    places = sorted((min(place, len(text)), new) for place, new in inserts)
    longer = splice(text, [(place, place, new) for place, new in places])
    shift, back = 0, []
    for place, new in places:
        back.append((place + shift, place + shift + len(new), ""))
        shift += len(new)
    assert splice(longer, back) == text


@given(st.text(alphabet="ab \t\r\n\\\"'/*#<>:%.1+-=(){};\f\x00\u00e9", max_size=60))
def test_tokens_cover_every_text(text: str) -> None:
    tokens = tokenize(text)
    assert "".join(token.text for token in tokens) == text
    position = 0
    for token in tokens:
        assert token.start == position < token.end and text[token.start : token.end] == token.text
        before = text[: token.start]
        assert (token.line, token.column) == (before.count("\n") + 1, token.start - (before.rfind("\n") + 1) + 1)
        position = token.end


def test_a_file_is_replaced_with_its_mode(tmp_path: Path) -> None:
    path = tmp_path / "survey.c"
    path.write_bytes(b"old\r\n")
    path.chmod(0o640)
    replace_file(str(path), b"new\n")
    assert path.read_bytes() == b"new\n" and stat.S_IMODE(path.stat().st_mode) == 0o640
    assert os.listdir(tmp_path) == ["survey.c"]


def test_a_link_stays_a_link(tmp_path: Path) -> None:
    (tmp_path / "real").mkdir()
    (tmp_path / "real" / "survey.c").write_bytes(b"old")
    link = tmp_path / "survey.c"
    link.symlink_to("real/survey.c")
    replace_file(str(link), b"new")
    assert link.is_symlink() and (tmp_path / "real" / "survey.c").read_bytes() == b"new"


def test_a_new_file_gets_the_usual_mode(tmp_path: Path) -> None:
    replace_file(str(tmp_path / "a.c"), b"x")
    (tmp_path / "b.c").write_bytes(b"x")
    assert (tmp_path / "a.c").stat().st_mode == (tmp_path / "b.c").stat().st_mode


def test_what_cannot_be_replaced_stays(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    with pytest.raises(RetileError, match="regular file"):
        replace_file(str(tmp_path), b"x")
    with pytest.raises(RetileError, match="nothing was changed"):
        replace_file(str(tmp_path / "gone" / "a.c"), b"x")
    path = tmp_path / "survey.c"
    path.write_bytes(b"old")

    def fail(*_: object) -> None:
        raise OSError(28, "No space left on device")

    for function in ("fsync", "replace"):
        monkeypatch.setattr(os, function, fail)
        with pytest.raises(RetileError, match="No space left on device"):
            replace_file(str(path), b"new")
        monkeypatch.undo()
        assert path.read_bytes() == b"old" and os.listdir(tmp_path) == ["survey.c"]


def database(folder: Path, *entries: dict[str, object]) -> str:
    (folder / "compile_commands.json").write_text(json.dumps(entries))
    return str(folder)


def test_flags_of_a_command(tmp_path: Path) -> None:
    (tmp_path / "src").mkdir()
    (tmp_path / "include").mkdir()
    (tmp_path / "include" / "depth.h").write_text("#define LIMIT 7\n")
    source = tmp_path / "src" / "survey.c"
    source.write_text("#include <depth.h>\nint f(void) { return LIMIT + EXTRA + sizeof NAME; }\n")
    build = tmp_path / "build"
    build.mkdir()
    database(
        build,
        {"directory": str(build), "file": "../src/other.c", "command": "cc -c ../src/other.c"},
        {"directory": str(build), "file": "../src/survey.c",
         "command": "ccache cc -I../include -I .. -DEXTRA=3 -D 'NAME=\"a b\"' -Wall -O2 -g -MD -MF x.d "
         "-std=c11 -isystem../sys -c "
                    "-o survey.o ../src/survey.c"},
    )  # fmt: skip
    call = flags_from_compile_commands(str(build), str(source))
    assert call.cc == "cc"
    assert call.flags == (f"-I{tmp_path}/include", "-I", f"{tmp_path}", "-DEXTRA=3", "-D", 'NAME="a b"', "-O2",
    "-std=c11",
                          f"-isystem{tmp_path}/sys")  # fmt: skip
    opened = open_source(str(source), call)
    assert opened.types.constant(opened.functions[0].body.block_items[0].expr) == 14


def test_flags_as_a_list_and_a_relative_directory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "a.c").write_text("int x;")
    database(
        tmp_path,
        {"directory": ".", "file": "a.c", "arguments": ["/opt/a tool/cc", "-U", "B", "-include", "pre.h", "a.c"]},
    )
    (tmp_path / "pre.h").write_text("")
    monkeypatch.chdir(tmp_path)
    call = flags_from_compile_commands(".", "a.c")
    assert call.command == ("/opt/a tool/cc",)
    assert call.flags == ("-U", "B", "-include", f"{tmp_path}/pre.h")


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (None, "no such file"),
        ("[", "not JSON"),
        ("{}", "a list"),
        ("[3]", "entry 1"),
        ('[{"directory": ".", "file": "a.c"}]', "entry 1"),
        ('[{"directory": ".", "file": "a.c", "arguments": []}]', "entry 1"),
        ('[{"directory": ".", "file": "a.c", "command": ""}]', "empty"),
        ('[{"directory": ".", "file": "a.c", "command": "cc \'"}]', "cannot be read"),
        ('[{"directory": ".", "file": "b.c", "command": "cc b.c"}]', "no entry for"),
        ("[]", "no entry for"),
    ],
)
def test_databases_that_do_not_help(tmp_path: Path, text: str | None, said: str) -> None:
    if text is not None:
        (tmp_path / "compile_commands.json").write_text(text)
    with pytest.raises(RetileError, match=said) as caught:
        flags_from_compile_commands(str(tmp_path), str(tmp_path / "a.c"))
    assert "compile_commands.json" in str(caught.value)
