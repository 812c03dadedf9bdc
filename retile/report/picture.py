"""Pictures as SVG: a few shapes with places, written through one template.

Places and sizes are in pixels, x to the right and y downwards.  The format is the W3C recommendation "Scalable Vector
Graphics (SVG) 1.1 (Second Edition)", 2011; the parts used are also those of SVG 2.  Letters all have one width, so that
the space a text needs is known without its font.
"""

from __future__ import annotations

import math
import textwrap
import unicodedata
from typing import ClassVar

from ..values import dataclass

LETTER = 7.9  # width of a letter of 13 pixels, of the widest of the fonts that the template names
SMALL = 6.7  # of 11 pixels
MARGIN = 24.0
_HEAD = 8.0  # length of an arrowhead


@dataclass(frozen=True)
class Rect:
    """A rectangle by its upper left corner."""

    tag: ClassVar[str] = "rect"
    x: float
    y: float
    width: float
    height: float
    look: str
    round: float = 0.0
    title: str = ""


@dataclass(frozen=True)
class Circle:
    """A circle by its centre."""

    tag: ClassVar[str] = "circle"
    x: float
    y: float
    radius: float
    look: str
    title: str = ""


@dataclass(frozen=True)
class Path:
    """Lines and curves, in the path language of SVG."""

    tag: ClassVar[str] = "path"
    data: str
    look: str
    title: str = ""


@dataclass(frozen=True)
class Words:
    """One line of text by its baseline."""

    tag: ClassVar[str] = "text"
    x: float
    y: float
    text: str
    look: str = ""
    anchor: str = "start"


Shape = Rect | Circle | Path | Words
Point = tuple[float, float]


@dataclass(frozen=True)
class Picture:
    """Shapes on a sheet, later ones above earlier ones."""

    width: float
    height: float
    title: str
    description: str  # what the picture shows, in words, for those who do not see it
    shapes: tuple[Shape, ...]


def svg(picture: Picture) -> str:
    """The picture as an SVG document; every text in it is escaped, what XML cannot hold is replaced."""
    from ..templating import environment

    return environment().get_template("picture.svg.j2").render(picture=_rounded(picture))


def _rounded(picture: Picture) -> dict[str, object]:
    shapes = [{"tag": shape.tag, **{name: _plain(value) for name, value in vars(shape).items()}}
              for shape in picture.shapes]
    return {"width": math.ceil(picture.width), "height": math.ceil(picture.height), "title": printable(picture.title),
            "description": printable(picture.description), "shapes": shapes}


def _plain(value: float | str) -> str:
    return printable(value) if isinstance(value, str) else number(value)


def number(value: float) -> str:
    """A coordinate, to a tenth of a pixel."""
    return f"{round(value, 1):.10g}"


def printable(text: str) -> str:
    """The text without characters that XML cannot hold, that end a line or that turn the direction of writing."""
    return "".join(" " if char in "\t\n\r\v\f" else "\ufffd" if unicodedata.category(char) in _UNSEEN else char
                   for char in text)


_UNSEEN = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})


def columns(text: str) -> int:
    """How many letters wide a text is; those of East Asian scripts count twice (Unicode Standard Annex #11)."""
    return sum(0 if unicodedata.combining(char) else 2 if unicodedata.east_asian_width(char) in "WF" else 1
               for char in printable(text))


def shortened(text: str, most: int) -> str:
    """The text, or its beginning and an ellipsis if it is wider than ``most`` letters."""
    if columns(text) <= most:
        return text
    kept = text
    while columns(kept) > most - 1:
        kept = kept[:-1]
    return kept.rstrip() + "…"


def paragraph(text: str, x: float, y: float, width: float, look: str = "small") -> tuple[list[Shape], float]:
    """A text broken into lines of a width, and the y below it."""
    lines = textwrap.wrap(printable(text), max(20, int(width / (SMALL if look == "small" else LETTER))))
    pitch = 16.0
    return [Words(x, y + 12 + pitch * at, line, look) for at, line in enumerate(lines)], y + pitch * len(lines)


def head(tip: Point, towards: Point, look: str, length: float = _HEAD) -> Path:
    """An arrowhead with its tip at a point, flying in a direction."""
    size = math.hypot(*towards) or 1.0
    dx, dy = towards[0] / size * length, towards[1] / size * length
    base = (tip[0] - dx, tip[1] - dy)
    left, right = (base[0] - dy * 0.45, base[1] + dx * 0.45), (base[0] + dy * 0.45, base[1] - dx * 0.45)
    return Path(f"M{_at(tip)} L{_at(left)} L{_at(right)} Z", f"{look} head")


def arrow(start: Point, end: Point, look: str, *, away: float = 0.0, bend: float = 0.0, title: str = "",
          length: float = _HEAD) -> list[Shape]:
    """An arrow between two points that keeps away from both; ``bend`` pushes its middle to the side, in pixels."""
    dx, dy = end[0] - start[0], end[1] - start[1]
    size = math.hypot(dx, dy) or 1.0
    middle = ((start[0] + end[0]) / 2 - dy / size * 2 * bend, (start[1] + end[1]) / 2 + dx / size * 2 * bend)
    first, tip = _moved(start, middle, away), _moved(end, middle, away)
    base = _moved(tip, middle, length * 0.8)
    curve = f"M{_at(first)} Q{_at(middle)} {_at(base)}" if bend else f"M{_at(first)} L{_at(base)}"
    return [Path(curve, look, title), head(tip, (tip[0] - base[0], tip[1] - base[1]), look, length)]


def _moved(start: Point, towards: Point, by: float) -> Point:
    dx, dy = towards[0] - start[0], towards[1] - start[1]
    size = math.hypot(dx, dy) or 1.0
    return start[0] + dx / size * by, start[1] + dy / size * by


def _at(point: Point) -> str:
    return f"{number(point[0])} {number(point[1])}"


def rounded_line(points: list[Point], radius: float) -> str:
    """Path data of a line through points, with round corners; at least two points."""
    parts = [f"M{_at(points[0])}"]
    for before, corner, after in zip(points, points[1:], points[2:], strict=False):
        room = min(radius, math.dist(before, corner) / 2, math.dist(corner, after) / 2)
        parts.append(f"L{_at(_moved(corner, before, room))} Q{_at(corner)} {_at(_moved(corner, after, room))}")
    return " ".join([*parts, f"L{_at(points[-1])}"])
