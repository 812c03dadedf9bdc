"""An iteration space as a picture: a point per iteration, inner loop to the right, the one around it downwards.

Of three loops the outermost has a panel for each of its values.  With a plan, points carry their number in its order,
steps between neighbours are lines, and chunks are shaded; with none, points are dots.
"""

from __future__ import annotations

from math import gcd

from ..values import dataclass
from .graph import KINDS, line_sample
from .links import PANELS_IN_A_ROW, Link, Values
from .picture import LETTER, MARGIN, SMALL, Circle, Path, Picture, Point, Rect, Shape, Words, arrow, columns, number, \
    paragraph, shortened
from .space import Axis, Space

_CELL = {False: 30.0, True: 36.0}  # distance of two points, without and with a plan
_RADIUS = {False: 4.5, True: 11.0}
_LINE = 18.0
_BETWEEN = 30.0  # panels


@dataclass(frozen=True)
class _Grid:
    """Where points lie."""

    space: Space
    top: float

    @property
    def numbered(self) -> bool:
        """True if the points carry numbers."""
        return self.space.walk is not None

    @property
    def cell(self) -> float:
        """Distance of two neighbours."""
        return _CELL[self.numbered]

    @property
    def radius(self) -> float:
        """Of a point."""
        return _RADIUS[self.numbered]

    @property
    def panels(self) -> tuple[int | None, ...]:
        """The values of the outermost of three loops."""
        return self.space.axes[0].values if len(self.space.axes) == 3 else (None,)

    @property
    def rows(self) -> Axis | None:
        """The loop that goes down."""
        return self.space.axes[-2] if len(self.space.axes) > 1 else None

    @property
    def columns(self) -> Axis:
        """The loop that goes to the right."""
        return self.space.axes[-1]

    @property
    def gutter(self) -> float:
        """Room for the values of the rows."""
        rows = self.rows
        return 10.0 + SMALL * max(len(str(v)) for v in (*rows.values, rows.loop.id + " ↓")) if rows else 10.0

    @property
    def header(self) -> float:
        """Room above a panel for its value, the name of the loop to the right, and that loop's values."""
        return _LINE * (3 if len(self.panels) > 1 else 2)

    @property
    def pitch(self) -> tuple[float, float]:
        """Distance of two panels, to the right and down."""
        height = len(self.rows.values) if self.rows else 1
        width = max(self.cell * len(self.columns.values), LETTER * len(f"{self.space.axes[0].loop.id} = -00"))
        return self.gutter + width + _BETWEEN, self.header + self.cell * height + _BETWEEN

    def corner(self, panel: int) -> Point:
        """Upper left corner of a panel's cells."""
        dx, dy = self.pitch
        return (MARGIN + self.gutter + dx * (panel % PANELS_IN_A_ROW),
                self.top + self.header + dy * (panel // PANELS_IN_A_ROW))

    def place(self, point: Values) -> tuple[int, int, int]:
        """Panel, row and column of a point."""
        at = [axis.values.index(value) for axis, value in zip(self.space.axes, point, strict=True)]
        panel, row, column = [0] * (3 - len(at)) + at
        return panel, row, column

    def centre(self, point: Values) -> Point:
        """The middle of a point's cell."""
        panel, row, column = self.place(point)
        x, y = self.corner(panel)
        return x + self.cell * (column + 0.5), y + self.cell * (row + 0.5)

    @property
    def size(self) -> Point:
        """Width and height of all panels, with the margins left and right."""
        dx, dy = self.pitch
        count = len(self.panels)
        return (2 * MARGIN - _BETWEEN + dx * min(count, PANELS_IN_A_ROW),
                dy * (-(-count // PANELS_IN_A_ROW)) - _BETWEEN)


def space_picture(space: Space) -> Picture:
    """The picture of an iteration space."""
    heading = f"Iterations of line {space.statement.id}, {space.nest.address} in {space.nest.function}"
    shown = [f"{space.statement.id}  {shortened(space.statement.text, 72)}", *_facts(space)]
    grid = _Grid(space, MARGIN + 18 + _LINE * len(shown) + 20)
    width = max(grid.size[0], 2 * MARGIN + LETTER * max(columns(heading), *map(columns, shown)), 520.0)
    shapes: list[Shape] = [Words(MARGIN, MARGIN + 10, heading, "heading")]
    shapes += [Words(MARGIN, MARGIN + 32 + _LINE * at, line) for at, line in enumerate(shown)]
    shapes += [*_chunks(grid), *_steps(grid)]
    for link in space.links:
        shapes += _link_shapes(grid, link)
    shapes += [*_axes(grid), *_points(grid)]
    y = grid.top + grid.size[1] + 26
    for look, text in _legend(space):
        lines, below = paragraph(text, MARGIN + 58, y - 1, width - 2 * MARGIN - 58)
        shapes += [*line_sample(MARGIN, y + 7, look), *lines]
        y = below + 3
    for note in space.notes:
        more, y = paragraph(note, MARGIN, y + 2, width - 2 * MARGIN)
        shapes += more
    return Picture(width, y + MARGIN, heading, _described(space, shown),
                   (Rect(0, 0, width, y + MARGIN, "paper"), *shapes))


def _facts(space: Space) -> list[str]:
    sizes = ", ".join(f"{name} = {value}" for name, value in space.sizes)
    facts = [f"at {sizes}"] if sizes else []
    if space.walk is not None:
        facts.append(f'plan "{space.walk.judgement.plan.text}": {space.walk.judgement.verdict.value}; '
                     f"points are numbered in its order")
        named = dict.fromkeys((term.chunk, numbered.chunk) for term, numbered in
                              zip(space.walk.judgement.plan.terms, space.walk.plan.terms, strict=True)
                              if isinstance(term.chunk, str))
        if named:
            facts.append("with " + ", ".join(f"{name} = {value}" for name, value in named))
    return facts


def _axes(grid: _Grid) -> list[Shape]:
    """Names and values of the loops around each panel, on a ground of their own, since arrows may pass below."""
    shapes: list[Shape] = []
    for panel, value in enumerate(grid.panels):
        x, y = grid.corner(panel)
        said = [Words(x + 4, y - _LINE - 5, f"{grid.columns.loop.id} →", "small")]
        if value is not None:
            said.append(Words(x, y - 2 * _LINE - 5, f"{grid.space.axes[0].loop.id} = {value}", "strong"))
        said += [Words(x + grid.cell * (at + 0.5), y - 5, str(v), "small", "middle")
                 for at, v in enumerate(grid.columns.values)]
        if grid.rows is not None:
            said.append(Words(x - 6, y - 5, f"{grid.rows.loop.id} ↓", "small", "end"))
            said += [Words(x - 6, y + grid.cell * (at + 0.5) + 4, str(v), "small", "end")
                     for at, v in enumerate(grid.rows.values)]
        shapes += [shape for words in said for shape in (_ground(words), words)]
    return shapes


def _ground(words: Words) -> Rect:
    width = LETTER * columns(words.text)
    left = words.x - width * {"start": 0.0, "middle": 0.5, "end": 1.0}[words.anchor]
    return Rect(left, words.y - 10, width, 13, "paper")


def _chunks(grid: _Grid) -> list[Shape]:
    """Cells shaded by their outer chunk, and lines where a chunk ends."""
    walk = grid.space.walk
    if walk is None or not any(walk.chunks.values()):
        return []
    at = {grid.place(point): point for point in walk.points}
    cells: list[Shape] = []
    borders: list[Shape] = []
    half = grid.cell / 2
    for (panel, row, column), point in at.items():
        x, y = grid.centre(point)
        cells.append(Rect(x - half, y - half, grid.cell, grid.cell, "odd" if sum(walk.outer[point]) % 2 else "even"))
        left, top, right, bottom = map(number, (x - half, y - half, x + half, y + half))
        for beside, line in (((panel, row, column + 1), f"M{right} {top} V{bottom}"),
                             ((panel, row + 1, column), f"M{left} {bottom} H{right}")):
            other = at.get(beside)
            if other is not None and walk.chunks[other] != walk.chunks[point]:
                borders.append(Path(line, "border" if walk.outer[other] != walk.outer[point] else "minor"))
    return [*cells, *borders]


def _steps(grid: _Grid) -> list[Shape]:
    """The plan's steps inside a panel: arrows between neighbours, faint curves over larger distances."""
    near: list[Shape] = []
    far: list[Shape] = []
    walk = grid.space.walk.points if grid.space.walk is not None else ()
    for before, after in zip(walk, walk[1:], strict=False):
        one, other = grid.place(before), grid.place(after)
        if one[0] != other[0]:
            continue
        start, end = grid.centre(before), grid.centre(after)
        if max(abs(one[1] - other[1]), abs(one[2] - other[2])) == 1:
            near += arrow(start, end, "walk", away=grid.radius, length=6)
        else:
            far += arrow(start, end, "jump", away=grid.radius, bend=4, length=6)
    return [*far, *near]


def _points(grid: _Grid) -> list[Shape]:
    loops = [axis.loop.id for axis in grid.space.axes]
    shapes: list[Shape] = []
    for at, point in enumerate(grid.space.walk.points if grid.space.walk else grid.space.points):
        x, y = grid.centre(point)
        where = ", ".join(f"{loop} = {value}" for loop, value in zip(loops, point, strict=True))
        shapes.append(Circle(x, y, grid.radius, "box", f"{at + 1}: {where}" if grid.numbered else where))
        if grid.numbered:
            shapes.append(Words(x, y + 3.2, str(at + 1), "number", "middle"))
    return shapes


def _link_shapes(grid: _Grid, link: Link) -> list[Shape]:
    """An arrow of a dependence; it bends where a straight one would run over other points or along the plan's steps."""
    one, other = grid.place(link.source), grid.place(link.target)
    start, end = grid.centre(link.source), grid.centre(link.target)
    size = ((end[0] - start[0]) ** 2 + (end[1] - start[1]) ** 2) ** 0.5
    straight = one[0] == other[0] and gcd(one[1] - other[1], one[2] - other[2]) == 1 and not grid.numbered
    bend = 0.0 if straight else grid.cell / 2 if one[0] != other[0] else max(9.0, 0.09 * size)
    look = "wrong" if link.reversed else link.kinds[0]
    return arrow(start, end, look, away=grid.radius + 1, bend=bend, title=_said(link))


def _said(link: Link) -> str:
    ends = ", ".join(map(str, link.distance))
    return f"{_listed(link.kinds)} ({ends}) on {', '.join(link.cells)}" + \
        (", reversed by the plan" if link.reversed else "")


def _listed(words: tuple[str, ...]) -> str:
    return " and ".join((*([", ".join(words[:-1])] if words[1:] else []), words[-1]))


def _legend(space: Space) -> list[tuple[str, str]]:
    """Per way of drawing an arrow: the look, and what it says."""
    groups: dict[tuple[str, tuple[str, ...], tuple[str, ...]], list[Values]] = {}
    for link in space.links:
        look = "wrong" if link.reversed else link.kinds[0]
        distances = groups.setdefault((look, link.kinds, link.cells), [])
        distances += [link.distance] if link.distance not in distances else []
    order = ["wrong", *KINDS]
    return [(look, ("reversed by the plan: " if look == "wrong" else "") + f"{_listed(kinds)} on {', '.join(cells)}: "
             + ", ".join(f"({', '.join(map(str, d))})" for d in distances))
            for (look, kinds, cells), distances in sorted(groups.items(), key=lambda item: order.index(item[0][0]))]


def _described(space: Space, shown: list[str]) -> str:
    loops = "; ".join(f"{axis.loop.id} from {axis.values[0]} to {axis.values[-1]}" for axis in space.axes)
    links = "; ".join(dict.fromkeys(_said(link) for link in space.links)) or "none between these iterations"
    return f"{'. '.join(shown)}. {len(space.points)} iterations: {loops}. Dependences: {links}. {' '.join(space.notes)}"
