"""The examples of the README: find them, run them, and (``python tests/readme.py``) write their output anew.

An example is a fenced block of the language ``console``: lines that begin with ``$ `` are commands, those behind them
their output.  In a block ``console measured`` the output depends on the machine.
"""

from __future__ import annotations

import re
import shlex
import tempfile
from dataclasses import dataclass
from pathlib import Path

from command_line import ROOT, Ended, retile

README = ROOT / "README.md"
_BLOCK = re.compile(r"^```console( measured)?\n(.*?)^```$", re.MULTILINE | re.DOTALL)
_CODE = re.compile(r"^```(sh|python)\n(.*?)^```$", re.MULTILINE | re.DOTALL)


@dataclass(frozen=True)
class Example:
    """A command of the README with the output that it shows."""

    command: str
    output: str
    measured: bool

    def run(self, *more: str, replacing: tuple[str, str] = ("", "")) -> Ended:
        """Run it, in the checkout, with more options, and with a piece of the command replaced."""
        words = shlex.split(self.command.replace(*replacing) if replacing[0] else self.command)
        assert words[0] == "retile"
        return retile(*words[1:], *more, seconds=300, COLUMNS="110")


def examples(text: str) -> list[Example]:
    """All commands of all console blocks."""
    found = []
    for measured, block in _BLOCK.findall(text):
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, output = part.partition("\n")
            found.append(Example(command, output, bool(measured)))
    return found


def code_blocks(text: str, language: str) -> list[str]:
    """The blocks of a language, ``sh`` or ``python``."""
    return [block for name, block in _CODE.findall(text) if name == language]


def rewritten(text: str) -> str:
    """The text with the output of every example as it is now."""
    def block(match: re.Match[str]) -> str:
        parts = []
        for example in examples(match.group()):
            with tempfile.TemporaryDirectory() as folder:
                kept = ("-o", str(Path(folder) / "kept.json")) if example.measured else ()
                out = re.sub(r"\S*kept\.json", "retile-result-20260314T091500Z.json", example.run(*kept).out)
            parts.append(f"$ {example.command}\n{out}")
        return f"```console{match[1] or ''}\n{''.join(parts)}```"
    return _BLOCK.sub(block, text)


if __name__ == "__main__":
    README.write_text(rewritten(README.read_text(encoding="utf-8")), encoding="utf-8")
