"""Tables as lines of text, set by rich: columns with a header, wrapped to a width."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from ..values import dataclass

_UNLIMITED = 100_000  # a width that no table reaches


@dataclass(frozen=True)
class Look:
    """How lines are to look where they are printed."""

    width: int | None = None  # characters of a line; None for as wide as it comes (files, pipes)
    colour: bool = False  # terminal escapes for colour and weight


@dataclass(frozen=True)
class Column:
    """One column of a table."""

    title: str
    right: bool = False  # numbers stand to the right
    whole: bool = False  # never broken into lines
    style: str = ""  # a style of rich, e.g. ``bold``


def table(columns: Sequence[Column], rows: Iterable[Sequence[str]], look: Look, *,
          best: int | None = None) -> list[str]:
    """The lines of a table; ``best`` is the number of a row to stress.  No line has blanks at its end."""
    from rich.box import Box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    rule = Box("    \n    \n -- \n    \n    \n    \n    \n    \n", ascii=True)
    sheet = Table(box=rule, show_edge=False, pad_edge=False, padding=(0, 1, 0, 0), header_style="bold")
    for column in columns:
        sheet.add_column(column.title, justify="right" if column.right else "left", no_wrap=column.whole,
                         overflow="fold", style=column.style)
    for number, row in enumerate(rows):
        sheet.add_row(*(Text(cell) for cell in row), style="bold green" if number == best else None)
    console = Console(width=look.width or _UNLIMITED, force_terminal=look.colour, no_color=not look.colour,
                      color_system="standard" if look.colour else None, highlight=False, legacy_windows=False)
    with console.capture() as captured:
        console.print(sheet)
    return [line.rstrip() for line in captured.get().splitlines()]


def coloured(text: str, style: str, look: Look) -> str:
    """The text in one of the styles ``good``, ``bad``, ``doubtful``, ``strong``; unchanged without colour."""
    codes = {"good": "32;1", "bad": "31;1", "doubtful": "33;1", "strong": "1"}
    return f"\x1b[{codes[style]}m{text}\x1b[0m" if look.colour else text


def paragraph(text: str, look: Look, first: str = "", rest: str | None = None) -> list[str]:
    """A sentence or more, broken at blanks to the width, behind the given indents."""
    import textwrap

    if look.width is None:
        return [first + text]
    return textwrap.wrap(text, max(look.width, 40), initial_indent=first,
                         subsequent_indent=first if rest is None else rest,
                         break_long_words=False, break_on_hyphens=False) or [first]
