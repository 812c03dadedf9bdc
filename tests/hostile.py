"""Hostile texts, and a way to run retile on thousands of them: each in a process of its own, with its use measured.

``python tests/hostile.py`` is the server behind ``Hammer``: it has loaded retile once and forks for every call.
"""

from __future__ import annotations

import json
import os
import random
import re
import resource
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

CPU_SECONDS = 10.0  # one call may take, its compiler included; elapsed time says little on a busy machine
MEGABYTES = 500
_WAIT = 60.0  # elapsed seconds after which a call is ended

_TOKEN = re.compile(rb'"(?:[^"\\\n]|\\.)*"|//[^\n]*|/\*.*?\*/|\w+|\s+|[-+<>=!&|]{2}|.', re.DOTALL)


# ---------------------------------------------------------------- running

@dataclass(frozen=True)
class Call:
    """What one call of retile did."""

    arguments: tuple[str, ...]
    status: int  # negative: the signal that ended it
    out: bytes
    err: bytes
    seconds: float  # of computing, the compiler's included
    megabytes: float  # at most in use, of retile or of its compiler

    def faults(self) -> list[str]:
        """What retile must never do, whatever it is given."""
        return [what for what, bad in (
            (f"status {self.status}", self.status not in (0, 1, 2)),
            ("a traceback", b"Traceback" in self.err or b"error in retile" in self.err),
            ("silence about a refusal", self.status in (1, 2) and not self.err.strip() and not self.out.strip()),
            ("an answer beside an error", self.status == 2 and bool(self.out)),
            (f"{self.seconds:.1f} s", self.seconds > CPU_SECONDS),
            (f"{self.megabytes:.0f} MB", self.megabytes > MEGABYTES)) if bad]


class Hammer:
    """A process that has retile loaded and runs calls of it in forks of itself."""

    def __init__(self) -> None:
        self._server = subprocess.Popen([sys.executable, __file__], stdin=subprocess.PIPE, stdout=subprocess.PIPE)

    def __enter__(self) -> Hammer:
        return self

    def __exit__(self, *_: object) -> None:
        assert self._server.stdin and self._server.stdout
        self._server.stdin.close()
        self._server.wait()
        self._server.stdout.close()

    def __call__(self, *arguments: str | Path, cwd: Path) -> Call:
        """Run ``retile`` with these arguments in a folder."""
        assert self._server.stdin and self._server.stdout
        words = [str(word) for word in arguments]
        self._server.stdin.write((json.dumps([words, str(cwd)]) + "\n").encode("ascii"))
        self._server.stdin.flush()
        status, out, err, seconds, megabytes = json.loads(self._server.stdout.readline())
        return Call(tuple(words), status, out.encode("latin-1"), err.encode("latin-1"), seconds, megabytes)


def _serve() -> None:
    import retile.cli
    import retile.commands.check
    import retile.commands.depend
    import retile.commands.nests
    import retile.commands.rewrite
    import retile.dependence
    import retile.nest
    import retile.plan
    import retile.rewrite
    import retile.sets
    import retile.source  # noqa: F401

    for line in sys.stdin:
        words, folder = json.loads(line)
        with tempfile.TemporaryFile() as out, tempfile.TemporaryFile() as err:
            child = os.fork()
            if child == 0:
                os.chdir(folder)
                os.dup2(os.open(os.devnull, os.O_RDONLY), 0)
                os.dup2(out.fileno(), 1)
                os.dup2(err.fileno(), 2)
                resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
                status = 99
                try:
                    status = retile.cli._run(words)
                    sys.stdout.flush()
                finally:
                    os._exit(status)
            answer = _waited(child)
            texts = []
            for file in (out, err):
                file.seek(0)
                texts.append(file.read().decode("latin-1"))
        print(json.dumps([answer[0], *texts, *answer[1:]]), flush=True)


def _waited(child: int) -> tuple[int, float, float]:
    deadline = time.monotonic() + _WAIT
    while True:
        found, status, used = os.wait4(child, os.WNOHANG)
        if found:
            return os.waitstatus_to_exitcode(status), used.ru_utime + used.ru_stime, used.ru_maxrss / 1024
        if time.monotonic() > deadline:
            os.kill(child, signal.SIGKILL)
        time.sleep(0.002)


# ---------------------------------------------------------------- texts

ODD: tuple[bytes, ...] = (
    b"\0", b"\xff\xfe", b"\xc3\x28", b"\xef\xbb\xbf", b"\r", b"\r\n", b"\x1a", b"\f", b"\v", b"\x7f", b"\xe2\x80\xae",
    b"??/\n", b"??=", b"<%", b"%>", b"<:", b":>", b"%:", b"\\\n", b"\\ \n", b"\\\r\n", b"\\", b"/*", b"*/", b"//", b'"',
    b"'", b'L"', b'R"(', b"'\\", b"#", b"\n#\n", b"\n#line 7\n", b'\n#line 1 "other.c"\n', b'\n# 3 "x.c" 1 3\n',
    b"\n#include __FILE__\n", b"\n#if 0\n", b"\n#endif\n", b"\n#else\n", b"\n#pragma omp parallel for\n",
    b"\n#define for while\n", b"\n#define i j\n", b"\n#undef N\n", b'_Pragma("omp simd")', b"_Pragma(", b"__LINE__",
    b"\n#define HALF for (int i = 0;\nHALF", b"\n#define OPEN {\nOPEN", b"\n#define SHUT }\nSHUT",
    b"\n#define M(x) M(x x)\nM(1)", b"\n#define E(\n", b"\n#error no\n", b"\n#pragma pack(1)\n", b"\n#include <math.h>\n",
    b"9" * 400, b"0x" + b"f" * 300, b"1e99999", b"0b102", b"08", b"1'000", b"0x1p", b"4294967296", b"-9223372036854775808",
    b"18446744073709551616u", b"i", b"n", b"0", b"1", b";", b"{", b"}", b"(", b")", b"[", b"]", b",", b"for(;;)", b"for(",
    b"while (1)", b"do", b"else", b"if (n)", b"switch (n)", b"case 1:", b"default:", b"goto here;", b"here:", b"break;",
    b"continue;", b"return;", b"return", b"int", b"long long", b"unsigned", b"double", b"float", b"char", b"void", b"struct",
    b"struct { int a : 3; }", b"union", b"enum { A, B }", b"typedef", b"static", b"extern", b"const", b"volatile",
    b"restrict", b"_Atomic", b"_Complex", b"_Generic(n, int: 1, default: 2)", b"_Alignas(64)", b"_BitInt(9)",
    b"__attribute__((aligned(", b"__attribute__((noinline))", b"asm(\"nop\")", b"__typeof__(n)", b"sizeof", b"sizeof(int)",
    b"({ n; })", b"(int)", b"(double *)", b"&", b"*", b"->x", b".x", b"++", b"--", b"+=", b"/=", b"%", b"/ 0", b"% 0", b"<<",
    b">> 70", b"?:", b"? 1 : 2", b"&&", b"||", b"!", b"~", b"=", b"==", b"<", b"<=", b"!=", b"\xe4\xbd\xa0", b"\\u00e9", b"$",
    b"@", b"`", b"{{ n }}", b"{% for %}", b"%s", b"%n", b"</svg>",
)  # fmt: skip


def mutant(text: bytes, choose: random.Random, others: Sequence[bytes] = ()) -> bytes:
    """A text with one to some damages; half of them are such that it mostly stays C."""
    damages = _MILD if choose.randrange(2) else _DAMAGES
    for _ in range(choose.choice((1, 1, 1, 2, 2, 3, 5, 12))):
        text = choose.choice(damages)(text, choose, others)
    return text[:200_000]


def _tokens(text: bytes) -> list[bytes]:
    return _TOKEN.findall(text)


def _span(count: int, choose: random.Random) -> tuple[int, int]:
    start = choose.randrange(count + 1)
    return start, min(count, start + choose.choice((1, 1, 1, 2, 3, 8, 30)))


def _drop(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    start, stop = _span(len(words), choose)
    return b"".join(words[:start] + words[stop:])


def _twice(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    start, stop = _span(len(words), choose)
    return b"".join(words[:stop] + words[start:])


def _swap(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    solid = [place for place, word in enumerate(words) if word.strip()]
    if len(solid) > 1:
        one = choose.randrange(len(solid))
        other = min(len(solid) - 1, max(0, one + choose.choice((-7, -3, -2, -1, 1, 2, 3, 7))))
        one, other = solid[one], solid[other]
        words[one], words[other] = words[other], words[one]
    return b"".join(words)


def _same_word(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    """One word of the text takes the place of another: still C, mostly, and no longer what it meant."""
    words = _tokens(text)
    solid = [place for place, word in enumerate(words) if re.match(rb"\w", word)]
    if solid:
        words[choose.choice(solid)] = words[choose.choice(solid)]
    return b"".join(words)


def _odd(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    place = choose.randrange(len(words) + 1)
    return b"".join(words[:place] + [choose.choice(ODD)] + words[place + choose.randrange(2):])


def _inside(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    place = choose.randrange(len(text) + 1)
    return text[:place] + choose.choice(ODD) + text[place:]


def _byte(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    place = choose.randrange(len(text) + 1)
    return text[:place] + bytes([choose.randrange(256)]) + text[place + 1:]


def _cut(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    return text[:choose.randrange(len(text) + 1)]


def _ends(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    new = choose.choice((b"\r\n", b"\r", b" \\\n", b"\n\n", b" ", b"\n\r", b"\x0b\n", None))
    if new is not None:
        return text.replace(b"\n", new)
    return b"".join(line + choose.choice((b"\n", b"\r\n", b"\r")) for line in text.split(b"\n"))


def _from_another(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    if not others:
        return text
    foreign = choose.choice(others).split(b"\n")
    lines = text.split(b"\n")
    place, start = choose.randrange(len(lines)), choose.randrange(len(foreign))
    return b"\n".join(lines[:place] + foreign[start:start + choose.randrange(1, 9)] + lines[place:])


def _other_operator(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    for operators in choose.sample(_OPERATORS, len(_OPERATORS)):
        places = [place for place, word in enumerate(words) if word in operators]
        if places:
            words[choose.choice(places)] = choose.choice(operators)
            break
    return b"".join(words)


def _other_number(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    words = _tokens(text)
    places = [place for place, word in enumerate(words) if word.isdigit()]
    if places:
        words[choose.choice(places)] = choose.choice(_NUMBERS)
    return b"".join(words)


def _statement(text: bytes, choose: random.Random, others: Sequence[bytes]) -> bytes:
    """Another statement between two."""
    places = [match.end() for match in re.finditer(rb"[;{}]\n", text)]
    if not places:
        return text
    place = choose.choice(places)
    word = choose.choice(re.findall(rb"\b[a-z]\w*", text) or [b"n"])
    return text[:place] + choose.choice(_STATEMENTS).replace(b"@", word) + text[place:]


_OPERATORS = ((b"+", b"-", b"*", b"/", b"%", b"&", b"|", b"^"), (b"<", b">", b"<=", b">=", b"==", b"!="),
              (b"++", b"--"), (b"+=", b"-=", b"="), (b"&&", b"||"), (b"int", b"long", b"double", b"float", b"char"))
_NUMBERS = (b"0", b"1", b"2", b"3", b"7", b"64", b"1000000", b"2147483647", b"2147483648", b"4294967295",
            b"9223372036854775807", b"18446744073709551615u", b"0x7fffffff", b"1.5", b"n", b"i", b"sizeof(int)", b"'a'",
            b"(1 << 30)", b"-1", b"(n, m)", b"(n ? 1 : 2)", b"1e3")
_STATEMENTS = (b"@ = 0;\n", b"@++;\n", b";\n", b"if (@) break;\n", b"if (@ > 3)\n", b"{ int @ = 1; (void)@; }\n",
               b"for (int @ = 0; @ < 4; @++)\n", b"for (@ = 9; @ > 0; @ -= 2)\n", b"while (@) @--;\n", b"return;\n",
               b"continue;\n", b"goto out; out:;\n", b"@[0] = @[1];\n", b"*@ = *(@ + 1);\n", b"@ += @ * 2;\n",
               b"switch (@) { case 1: break; }\n", b"do { } while (0);\n", b"int @;\n", b"static int @;\n", b"@(@);\n",
               b"#pragma omp simd\n", b"#ifdef @\n#endif\n", b"#define @ 3\n", b"/* @ */\n", b"@->@ = 1;\n",
               b"double @[4] = { 0 };\n", b"_Static_assert(1, \"\");\n", b"(void)sizeof(@);\n", b"@ = @ ? @ : -@;\n")
_MILD = (_same_word, _other_operator, _other_number, _statement)
_DAMAGES = (_drop, _drop, _twice, _swap, _swap, _same_word, _same_word, _same_word, _odd, _odd, _odd, _inside, _byte,
            _cut, _ends, _from_another)


def loops_of(text: bytes) -> Iterator[int]:
    """The lines on which the word ``for`` stands."""
    return (number for number, line in enumerate(text.split(b"\n"), 1) if re.search(rb"\bfor\b", line))


if __name__ == "__main__":
    _serve()
