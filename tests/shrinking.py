"""Make a failing nest and plan small: lines, blocks, operands, terms and options left out as long as it still fails."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path

from random_nests import RandomNest

Fails = Callable[[RandomNest, str], bool]


def shrunk(nest: RandomNest, plan: str, fails: Fails, trials: int = 400) -> tuple[RandomNest, str]:
    """A smaller case that fails too; lines keep their numbers until the end, because plans name them."""
    found = True
    while found and trials > 0:
        found = False
        for candidate, text in _smaller(nest, plan):
            trials -= 1
            if trials <= 0:
                break
            if fails(candidate, text):
                nest, plan, found = candidate, text, True
                break
    dense = _without_blank_lines(nest, plan)
    return dense if fails(*dense) else (nest, plan)


def keep(folder: Path, name: str, nest: RandomNest, plan: str) -> Path:
    """Save a case as a C file whose last line says which nest and which plan."""
    path = folder / f"{name}.c"
    path.write_text(f"{nest.text}/* nest at line {nest.line}, plan: {plan} */\n")
    return path


def _smaller(nest: RandomNest, plan: str) -> Iterator[tuple[RandomNest, str]]:
    order, _, options = plan.partition(";")
    terms, words = order.split(), [option.strip() for option in options.split(",") if option.strip()]
    for at in range(len(words)):
        yield nest, _plan(terms, [*words[:at], *words[at + 1:]])
    for at, term in enumerate(terms):
        if ":" in term:
            yield nest, _plan([*terms[:at], *terms[at + 1:]], words)
    lines = nest.text.split("\n")
    for less in _fewer_lines(lines, nest.line):
        yield replace(nest, text="\n".join(less)), plan
        gone = _loops_of(lines) - _loops_of(less)
        if gone:
            kept = [term for term in terms if not any(re.search(rf"\b{re.escape(name)}(?![\w@])", term) for name in gone)]
            yield replace(nest, text="\n".join(less)), _plan(kept, words)
    for at, line in enumerate(lines):
        for shorter in _shorter(line):
            yield replace(nest, text="\n".join([*lines[:at], shorter, *lines[at + 1:]])), plan


def _plan(terms: list[str], words: list[str]) -> str:
    return " ".join(terms) + ("; " + ", ".join(words) if words else "")


def _loops_of(lines: list[str]) -> set[str]:
    found = [(number, match[1]) for number, line in enumerate(lines, 1) if (match := re.search(r"for \((?:[\w ]+ )?(\w+) =", line))]
    return {name for _, name in found} | {f"{name}@{number}" for number, name in found}


def _fewer_lines(lines: list[str], nest_line: int) -> Iterator[list[str]]:
    for at, line in enumerate(lines):
        if not line.strip() or line.startswith(("void", "double", "}")):
            continue
        end = _end_of(lines, at)
        if at + 1 != nest_line:
            yield [*lines[:at], *[""] * (end - at + 1), *lines[end + 1:]]
        if end > at and line.rstrip().endswith("{") and at + 1 != nest_line:
            yield [*lines[:at], "", *lines[at + 1:end], "", *lines[end + 1:]]


def _end_of(lines: list[str], at: int) -> int:
    """The line on which what begins on a line ends."""
    depth = 0
    for number in range(at, len(lines)):
        depth += lines[number].count("{") - lines[number].count("}")
        if depth <= 0:
            return number
    return at


def _shorter(line: str) -> Iterator[str]:
    if match := re.fullmatch(r"(\w+ survey\()(.*)(\) \{)", line):
        parameters = re.split(r", (?=[a-z])", match[2])
        for at in range(len(parameters)):
            yield match[1] + ", ".join([*parameters[:at], *parameters[at + 1:]]) + match[3]
        return
    if match := re.fullmatch(r"( *for \([\w ]*= )(.*)(; .*; )(.*)\)( \{)?", line):
        yield f"{match[1]}0{match[3]}{match[4]}){match[5] or ''}"
    for match in re.finditer(r" [-+*] [^-+*;()]+| \? .* : [^;)]*|(?:fabs|0\.5 \* |0\.25 \* )(?=\()", line):
        yield line[:match.start()] + line[match.end():]
    if match := re.fullmatch(r"( *[^=]+ \S?= )(.*\W.*);", line):
        yield f"{match[1]}1;"


def _without_blank_lines(nest: RandomNest, plan: str) -> tuple[RandomNest, str]:
    lines = nest.text.split("\n")
    kept = [number for number, line in enumerate(lines, 1) if line.strip()]
    new = {old: at for at, old in enumerate(kept, 1)}
    text = "\n".join(lines[old - 1] for old in kept) + "\n"
    plan = re.sub(r"@(\d+)", lambda m: f"@{new.get(int(m[1]), 0)}", plan)
    plan = re.sub(r"place (\d+)", lambda m: f"place {new.get(int(m[1]), 0)}", plan)
    return replace(nest, text=text, line=new[nest.line], outermost=new.get(nest.outermost, new[nest.line])), plan
