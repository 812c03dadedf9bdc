"""Messages about the user's C: one form for all of them."""

from __future__ import annotations


def complaint(path: str, line: int, column: int | None, source_line: str, what: str, remedy: str) -> str:
    """``file:line:column: what``, the source line with a caret under the column, and what to do.

    ``line`` and ``column`` count from 1; without a column there is no caret.  An empty ``remedy`` is left out.
    """
    place = f"{path}:{line}" + (f":{column}" if column else "")
    rows = [f"{place}: {what}"]
    if source_line.strip():
        shown, pad = _shown(source_line, column or 1)
        rows.append(f"    {shown}")
        if column:
            rows.append(f"    {pad}^")
    if remedy:
        rows.append(remedy)
    return "\n".join(rows)


_WIDEST = 160  # longer lines (generated tables) are cut around the column


def _shown(source_line: str, column: int) -> tuple[str, str]:
    """The line as it can be printed, and the blanks that lead to the column.

    Tabs stay tabs in both, so that the caret stands right whatever the terminal's tab width; other control characters
    and lone surrogates become ``?``.
    """
    line = "".join(_printable(character) for character in source_line.rstrip())
    start = max(0, column - _WIDEST // 2) if len(line) > _WIDEST else 0
    line = line[start : start + _WIDEST]
    before = line[: column - 1 - start].ljust(column - 1 - start)
    return line, "".join("\t" if character == "\t" else " " for character in before)


def _printable(character: str) -> str:
    if character == "\t" or character.isprintable():
        return character
    return "" if character == "\ufeff" else "?"
