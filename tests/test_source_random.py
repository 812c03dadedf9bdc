"""Random programs whose extents are known because they were built with them."""

from __future__ import annotations

import random
from pathlib import Path

import pytest
from source_marks import COMPILERS, extents, opened, unmarked

HEAD = """\
#define ONE 1
#define TWO (ONE + ONE)
#define AT(a, i) ((a)[(i)])
#define PICK(c, x, y) ((c) ? (x) : (y))
#define PASTE(a, b) a##b
#define EMPTY
#define EMPTY_CALL(x)
#define LIST(first, ...) (first, ##__VA_ARGS__)
#define EACH(i) for (i = 0; i < n; i++)
#define SET(x, v) do { (x) = (v); if (x) (x)++; } while (0)
#define STEP(x) (x)++; (x)--
#define AGAIN(x) PICK(x, AT(a, ONE), AGAIN(x))
int AGAIN_(int);
"""


class Writer:
    """Writes random statements with marks around loops and branches that stand in the text."""

    def __init__(self, seed: int) -> None:
        self.chance = random.Random(seed)

    def gap(self) -> str:
        return self.chance.choice(
            [" ", " ", " ", "\n", "\t", "  ", " /* ; } */ ", " // { for (\n", " \\\n ", "\r\n", "\f "]
        )

    def join(self, *parts: str) -> str:
        return self.gap().join(parts)

    def expression(self, depth: int = 0) -> str:
        simple = ["n", "k", "ONE", "TWO", "7", "'}'", "a[n]", "PASTE(1, 0)", "__LINE__", 'sizeof "for (;;) {"']
        if depth > 2:
            return self.chance.choice(simple)
        inner = self.expression(depth + 1)
        other = self.expression(depth + 1)
        return self.chance.choice(
            [*simple, self.join(inner, "+", other), self.join("AT", f"(a, {inner})"), f"AT(a,{self.gap()}{inner})",
             self.join("(", inner, ")"), f"PICK({inner},{self.gap()}{other}, {inner}{self.gap()})",
             f"LIST({inner}, {other})",
             "EMPTY " + inner, f"EMPTY_CALL({other}){self.gap()}{inner}", f"LIST({inner})"]
        )  # fmt: skip

    def statement(self, depth: int = 0) -> str:
        kind = self.chance.randrange(15 if depth < 3 else 6)
        e = self.expression
        if kind < 2:
            return self.join("k", "=", e(), ";")
        if kind == 2:
            return self.chance.choice([";", "{ }", "EMPTY ;", "STEP(k);" if depth == 0 else ";"])
        if kind == 3:
            return f"SET(k, {e()});"
        if kind == 4:
            return self.join("{", "int m = " + e() + ", p[3] = { 1, 2 };", "(void)m; (void)p;", "}")
        if kind == 5:
            return f"EACH(k) {{ {self.statement(depth + 1)} }}"
        body = self.statement(depth + 1)
        match kind:
            case 6 | 7:
                return "⟦" + self.join("for", "(", "int i = 0", ";", "i < " + e(), ";", "i++", ")", body) + "⟧"
            case 8:
                return "⟦" + self.join("while", "(", e(), ")", body) + "⟧"
            case 9:
                return "⟦" + self.join("do", body, "while", f"({e()})", ";") + "⟧"
            case 10:
                return "⟦" + self.join("if", f"({e()})", "{", body, "}", "else", self.statement(depth + 1)) + "⟧"
            case 11:
                return "⟦" + self.join("if", f"({e()})", "{", body, "}") + "⟧"
            case 12:
                return (
                    "⟦"
                    + self.join("switch", "(k)", "{", "case 1:", body, "default:", self.statement(depth + 1), "}")
                    + "⟧"
                )
        return self.join(
            "{", body, *(self.statement(depth + 1) for _ in range(self.chance.randrange(3))), self.branch(), "}"
        )

    def branch(self) -> str:
        live = self.statement(3)
        junk = self.chance.choice(
            ["for (;;) }", "if (x) {", "k = AT(;", "it's", self.statement(3).replace("⟦", "").replace("⟧", "")]
        )
        one, other = self.chance.choice(
            [("#if ONE", "#else"), ("#ifdef ONE", "#elif TWO"), ("#if 0\n#elif 1", "#else")]
        )
        redefine = self.chance.choice(["", "\n#undef TWO\n#define TWO 1 \\\n + ONE\n"])
        return f"\n{one}\nk++; {live}\n{other}\n{junk if other == '#else' else 'k--; }'}\n#endif\n{redefine}"

    def program(self) -> str:
        functions = [
            f"int f{number}(int n, int *a) {{ int k = 0;\n{self.statement()}\n{self.statement()}\nreturn k; }}\n"
            for number in range(3)
        ]
        return HEAD + "\n".join(functions)


def check(folder: Path, seed: int) -> None:
    text, expected = unmarked(Writer(seed).program())
    source = opened(folder, text, cc=COMPILERS[seed % len(COMPILERS)])
    found = extents(source)
    assert found - expected == set(), [text[a:b] for a, b in found - expected]
    assert expected - found == set(), [text[a:b] for a, b in expected - found]


@pytest.mark.parametrize("seed", range(30))
def test_extents_of_random_programs(tmp_path: Path, seed: int) -> None:
    check(tmp_path, seed)


@pytest.mark.long
@pytest.mark.parametrize("seed", range(1000, 2000))
def test_extents_of_random_programs_long(tmp_path: Path, seed: int) -> None:
    check(tmp_path, seed)
