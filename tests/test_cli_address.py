"""Addresses, as users type them."""

import pytest

from retile.commands.address import parse_address
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
