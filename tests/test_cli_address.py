"""Addresses and compiler options, as users type them."""

import json

import pytest

from retile.commands.address import parse_address
from retile.commands.compiling import flags_from_database
from retile.model import Address, RetileError


@pytest.mark.parametrize("text, address", [
    ("drift.c:14", Address("drift.c", 14)),
    ("drift.c:14:9", Address("drift.c", 14, 9)),
    ("my survey/tide fit.c:3", Address("my survey/tide fit.c", 3)),
    ("line: two.c:3", Address("line: two.c", 3)),
    ("C:\\grids\\drift.c:14", Address("C:\\grids\\drift.c", 14)),
    ("a:b:c.c:14:2", Address("a:b:c.c", 14, 2)),
    ("new\nline.c:8", Address("new\nline.c", 8)),
])
def test_an_address_is_split_from_its_end(text, address):
    assert parse_address(text, lambda file: False) == address
    assert str(address) == text


def test_a_file_name_that_ends_like_a_line_is_taken_if_only_it_exists():
    assert parse_address("swath:7:14", lambda file: file == "swath:7") == Address("swath:7", 14)
    assert parse_address("swath:7:14", lambda file: file == "swath") == Address("swath", 7, 14)
    assert parse_address("swath:7:14", lambda file: True) == Address("swath", 7, 14)


@pytest.mark.parametrize("text", ["drift.c", "drift.c:", ":14", "drift.c:-3", "drift.c:two", "", "drift.c:0"])
def test_what_is_no_address_is_said_so(text):
    with pytest.raises(RetileError, match="is not an address"):
        parse_address(text)


def write_database(folder, **entry):
    (folder / "compile_commands.json").write_text(json.dumps([{"directory": str(folder), **entry}]))


def test_flags_come_from_a_compilation_database(tmp_path):
    words = ["gcc-12", "-O2", "-DTILTS=8", "-D", "RANGES=9", "-Iinclude", "-isystem", "/opt/x", "-std=c99", "-m32",
             "-Wall", "-c", "-o", "a.o", "src/a.c"]
    write_database(tmp_path, file="src/a.c", arguments=words)
    assert flags_from_database(tmp_path, str(tmp_path / "src" / "a.c")) == ("gcc-12", (
        "-D", "TILTS=8", "-D", "RANGES=9", "-I", str(tmp_path / "include"), "-isystem", "/opt/x", "-std=c99", "-m32"))


def test_a_command_of_the_database_is_split_as_a_shell_would(tmp_path):
    write_database(tmp_path, file="a.c", command="cc '-DNAME=\"two words\"' -c a.c")
    assert flags_from_database(tmp_path, str(tmp_path / "a.c")) == ("cc", ("-D", 'NAME="two words"'))


@pytest.mark.parametrize("text, said", [
    (None, "cannot be read"), ("{", "is not JSON"), ("{}", "is not a list"), ("[1]", "is not a list"),
    ('[{"directory": ".", "file": "a.c"}]', "is not a list"),
    ('[{"directory": ".", "file": "b.c", "command": "cc b.c"}]', "there is no entry for"),
])
def test_a_database_that_is_no_use_is_said_so(tmp_path, text, said):
    if text is not None:
        (tmp_path / "compile_commands.json").write_text(text)
    with pytest.raises(RetileError, match=said):
        flags_from_database(tmp_path, str(tmp_path / "a.c"))
