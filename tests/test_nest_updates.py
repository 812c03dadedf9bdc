"""Which updates may be reordered: never those that round or may overflow, unless the user gives that away."""

from __future__ import annotations

from pathlib import Path

import pytest

import retile

HEAD = (
    "void survey(int n, int m, const double echo[restrict n][m], double *restrict sum, float *restrict low, "
    "unsigned *restrict hits, int *restrict worst, unsigned char *restrict code)\n{\n"
    "    for (int i = 0; i < n; i++)\n        for (int j = 0; j < m; j++)\n            "
)


@pytest.mark.parametrize(
    "statement, by_default, given_away",
    [
        ("sum[0] += echo[i][j];", "illegal", "legal"),
        ("sum[0] = sum[0] - echo[i][j];", "illegal", "legal"),
        ("sum[0] = echo[i][j] - sum[0];", "illegal", "illegal"),  # not a sum: the sign alternates
        ("sum[0] = sum[0] + echo[i][j] * sum[0];", "illegal", "illegal"),
        ("sum[0] *= echo[i][j];", "illegal", "legal"),
        ("low[0] = low[0] < echo[i][j] ? low[0] : echo[i][j];", "illegal", "legal"),  # -0.0 and NaN depend on the order
        ("hits[0] += (unsigned)echo[i][j];", "legal", "legal"),  # wraps around: exact in any order (C11, 6.2.5)
        ("hits[0] ^= (unsigned)i * 3u;", "legal", "legal"),
        ("hits[0]++;", "legal", "legal"),
        ("hits[0] += echo[i][j];", "illegal", "legal"),  # computed in double
        ("code[0] += (unsigned)i;", "legal", "legal"),  # computed in unsigned, cut to 8 bits: exact modulo 256
        ("code[0] += i;", "illegal", "legal"),  # computed in int: an intermediate sum may overflow
        ("worst[0] += i;", "illegal", "legal"),
        ("worst[0] |= i;", "legal", "legal"),
        ("worst[0] = worst[0] > j ? worst[0] : j;", "legal", "legal"),
        ("worst[0] = j > worst[0] ? j : worst[0];", "legal", "legal"),
        ("worst[0] = worst[0] > j ? j : i;", "illegal", "illegal"),
        ("code[0] += code[i];", "illegal", "illegal"),  # not only updates touch the cells
        ("code[0] += (unsigned char)i;", "legal", "legal"),  # no sum of two bytes overflows an int
        ("code[0] = (unsigned char)j + code[0];", "legal", "legal"),
        ("code[0] *= (unsigned short)(i + j);", "legal", "legal"),  # 8 + 16 bits
        ("if (j > worst[0]) worst[0] = j;", "legal", "legal"),
        ("if (worst[0] >= i) { worst[0] = i; }", "legal", "legal"),
        ("if (echo[i][j] < low[0]) low[0] = echo[i][j];", "illegal", "legal"),
        ("if (j > worst[0]) worst[0] = i;", "illegal", "illegal"),
        ("if (j > worst[0]) worst[0] = j; else worst[0] = 0;", "illegal", "illegal"),
        ("if (j > worst[0]) { worst[0] = j; sum[0] = i; }", "illegal", "illegal"),
        ("if ((long)i * j > worst[0]) worst[0] = (long)i * j;", "illegal", "illegal"),  # cut when it is stored
        ("if (echo[i][j] > 0.5) hits[0]++;", "legal", "legal"),
        ("worst[0] = hits[0] > 3u ? worst[0] : j;", "illegal", "illegal"),
    ],
)
def test_order_of_updates(tmp_path: Path, statement: str, by_default: str, given_away: str) -> None:
    file = tmp_path / "updates.c"
    file.write_text(HEAD + statement + "\n}\n")
    nest = retile.open_file(file).nest(3)
    assert nest.check("j i").verdict.value == by_default
    assert nest.check("j i; reassociate yes").verdict.value == given_away


def test_two_kinds_of_update_keep_their_order(tmp_path: Path) -> None:
    file = tmp_path / "updates.c"
    file.write_text(HEAD + "{ hits[0] += (unsigned)i; hits[0] *= 5u; }\n}\n")
    assert retile.open_file(file).nest(3).check("j i").verdict.value == "illegal"


@pytest.mark.parametrize(
    "statement",
    [
        "sum[i * m + j] = echo[0][hits[0]++];",
        "low[i * m + j] = (float)(hits[0] += 3u);",
        "code[i * m + j] = (unsigned char)(hits[0] = hits[0] + 1u);",
        "sum[i * m + j] = (hits[0] ^= (unsigned)j) > 4u;",
    ],
)
def test_an_update_whose_value_is_looked_at_keeps_its_place(tmp_path: Path, statement: str) -> None:
    """C11, 6.5.16: an assignment is an expression; which value it has depends on the updates before it."""
    file = tmp_path / "updates.c"
    file.write_text(HEAD + statement + "\n}\n")
    nest = retile.open_file(file).nest(3)
    assert nest.check("j i").verdict.value == "illegal"
    assert nest.check("j i; reassociate yes").verdict.value == "illegal"


def test_updates_between_commas_are_updates(tmp_path: Path) -> None:
    file = tmp_path / "updates.c"
    file.write_text(HEAD + "hits[0]++, hits[1] += (unsigned)i;\n}\n")
    assert retile.open_file(file).nest(3).check("j i").verdict.value == "legal"


@pytest.mark.parametrize(
    "statement, told",
    [
        ("sum[0] += echo[i][j];", "may round differently"),
        ("worst[0] += i;", "may overflow at an intermediate value"),
        ("low[0] = low[0] < echo[i][j] ? low[0] : echo[i][j];", "NaN"),
    ],
)
def test_an_order_that_only_updates_need_is_named(tmp_path: Path, statement: str, told: str) -> None:
    file = tmp_path / "updates.c"
    file.write_text(HEAD + statement + "\n}\n")
    violations = retile.open_file(file).nest(3).check("j i").violations
    assert violations and all(told in v.note and "reassociate yes" in v.note for v in violations)


def test_an_order_that_values_need_has_no_such_note(tmp_path: Path) -> None:
    file = tmp_path / "updates.c"
    file.write_text(HEAD + "worst[i + 1] = worst[i + j] + 1;\n}\n")
    assert not any(v.note for v in retile.open_file(file).nest(3).check("j i").violations)
