"""The dependence graph as a picture: SVG that needs no other program, and DOT for Graphviz.

Statements stand below each other.  Those that depend on each other in a cycle are framed together, since no order can
part their loops; what is not in one cycle stands on levels, so that between levels all arrows point down.  Cycles are
strongly connected components, levels are those of the graph of components (Tarjan, "Depth-first search and linear graph
algorithms", 1972; use on loops: Allen & Kennedy, "Automatic translation of Fortran programs to vector form", 1987).
Arrows of one kind between the same two statements are drawn as one, with a line of text for each of them.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable
from typing import TYPE_CHECKING

from ..model import Nest, Statement
from ..values import dataclass
from .picture import LETTER, MARGIN, Path, Picture, Rect, Shape, Words, columns, head, paragraph, printable, \
    rounded_line, shortened

if TYPE_CHECKING:
    from ..dependence import Dependences, Edge

KINDS = {"flow": "written, then read", "anti": "read, then written", "output": "written twice"}
_DOT_STYLE = {"flow": "solid", "anti": "dashed", "output": "dotted"}
_STAYS = "a cycle: these stay in one loop"


# ---------------------------------------------------------------- what is drawn

@dataclass(frozen=True)
class Bundle:
    """All dependences of one kind between two statements."""

    source: str
    target: str
    kind: str
    lines: tuple[str, ...]  # what to say of each: the cells, the distance or direction, and the loop that carries it


def bundles(dependences: Dependences) -> tuple[Bundle, ...]:
    """The edges, those of one kind between the same statements together."""
    together: dict[tuple[str, str, str], dict[str, list[str]]] = defaultdict(lambda: defaultdict(list))
    for edge in dependences.edges:
        cells = together[edge.source, edge.target, edge.kind][_way(edge)]
        cells.append(edge.storage + ("" if edge.exact else " (any cell)"))
    return tuple(Bundle(source, target, kind, tuple(f"{', '.join(dict.fromkeys(cells))}  {way}".rstrip()
                                                    for way, cells in ways.items()))
                 for (source, target, kind), ways in together.items())


def _way(edge: Edge) -> str:
    vector = map(str, edge.distance) if edge.distance is not None else edge.direction
    carrier = f"carried by {edge.carried_by}" if edge.carried_by is not None else "in one iteration"
    return (f"({', '.join(vector)})  " if edge.common else "") + (carrier if edge.common else "")


def levels(nest: Nest, dependences: Dependences) -> tuple[tuple[tuple[Statement, ...], ...], ...]:
    """Per level the components on it, each with its statements; all in text order."""
    import networkx

    components = networkx.condensation(networkx.DiGraph(dependences.graph))
    at = {statement.id: place for place, statement in enumerate(nest.statements)}
    members = {node: sorted(ids, key=at.__getitem__) for node, ids in components.nodes(data="members")}
    return tuple(tuple(tuple(nest.statement(id) for id in members[node])
                       for node in sorted(level, key=lambda node: at[members[node][0]]))
                 for level in networkx.topological_generations(components))


# ---------------------------------------------------------------- DOT

def graph_dot(nest: Nest, dependences: Dependences) -> str:
    """The graph in the DOT language of Graphviz, any text in it escaped."""
    lines = ["digraph dependences {", "  graph [fontname=monospace, labeljust=l];",
             "  node [shape=box, fontname=monospace];", "  edge [fontname=monospace, fontsize=11];"]
    for number, component in enumerate(component for level in levels(nest, dependences) for component in level):
        nodes = [f"{_quoted(s.id)} [label={_quoted(f'{s.id}  {s.text}')}];" for s in component]
        if len(component) == 1:
            lines.append(f"  {nodes[0]}")
            continue
        lines += [f"  subgraph cluster_{number} {{", f"    label={_quoted(_STAYS)};", "    style=rounded;",
                  *(f"    {node}" for node in nodes), "  }"]
    for bundle in bundles(dependences):
        label = "".join(_escaped(line) + "\\l" for line in _label(bundle))
        lines.append(f"  {_quoted(bundle.source)} -> {_quoted(bundle.target)} "
                     f"[label=\"{label}\", style={_DOT_STYLE[bundle.kind]}];")
    return "\n".join([*lines, "}", ""])


def _quoted(text: str) -> str:
    return f'"{_escaped(text)}"'


def _escaped(text: str) -> str:
    """Text between the quotes of a DOT string: labels read backslashes and the entities of HTML."""
    return printable(text).replace("&", "&amp;").replace("\\", "\\\\").replace('"', '\\"')


def _label(bundle: Bundle) -> list[str]:
    """The lines beside an arrow: the kind, then what the dependences of the bundle are."""
    opening = f"{bundle.kind:<6}" + (f"  from {bundle.source}" if bundle.source != bundle.target else "")
    return [f"{opening if not at else ' ' * len(opening)}  {line}" for at, line in enumerate(bundle.lines)]


# ---------------------------------------------------------------- SVG

_TEXT = 64  # letters of a statement that are shown
_PAD = 12.0
_ROW, _GAP, _LEVEL_GAP = 30.0, 14.0, 34.0
_EXIT, _LINE = 9.0, 15.0  # height that an arrow needs where it leaves, and a line of its label where it arrives
_LANE = 13.0
_FRAME_TOP, _FRAME = 24.0, 9.0


@dataclass(frozen=True)
class _Box:
    """A statement's place."""

    statement: Statement
    y: float
    height: float
    exits: tuple[Bundle, ...]  # from the top, before the entries
    entries: tuple[Bundle, ...]


def graph_svg(nest: Nest, dependences: Dependences) -> Picture:
    """The picture of the graph: arrows leave a statement at its right, pass a lane, and arrive at its right."""
    arrows = bundles(dependences)
    heading = f"Dependences of {nest.address} in {nest.function}"
    width = _PAD * 2 + LETTER * max((columns(_said(s)) for s in nest.statements), default=0)
    labels = LETTER * (3 + max((columns(line) for bundle in arrows for line in _label(bundle)), default=0))
    left = MARGIN + _FRAME
    boxes, background, bottom = _stacked(nest, dependences, arrows, left, width, left + width + labels)
    lanes = _lanes(_spans(boxes))
    first_lane = left + width + _FRAME + labels + _LANE
    right = first_lane + _LANE * max(lanes.values(), default=0) + MARGIN
    total = max(right, MARGIN * 2 + LETTER * columns(heading), 620.0)
    shapes: list[Shape] = [Words(MARGIN, MARGIN + 10, heading, "heading"), *background]
    for box in boxes:
        shapes += _box_shapes(box, left, width)
    for bundle, (start, end) in _spans(boxes).items():
        shapes += _arrow_shapes(bundle, start, end, left + width, first_lane + _LANE * lanes[bundle])
    legend, bottom = _legend(arrows, bottom + _LEVEL_GAP, total, any(isinstance(shape, Path) for shape in background))
    shapes += legend
    return Picture(total, bottom + MARGIN, heading, _described(nest, arrows),
                   (Rect(0, 0, total, bottom + MARGIN, "paper"), *shapes))


def _said(statement: Statement) -> str:
    return f"{statement.id}  {shortened(statement.text, _TEXT)}"


def _stacked(nest: Nest, dependences: Dependences, arrows: Iterable[Bundle], left: float, width: float,
             right: float) -> tuple[list[_Box], list[Shape], float]:
    """The boxes below each other, the frames and rules behind them, and where they end."""
    boxes: list[_Box] = []
    behind: list[Shape] = []
    y = MARGIN + 34
    order = [s.id for level in levels(nest, dependences) for component in level for s in component]
    for number, level in enumerate(levels(nest, dependences)):
        if number:
            behind.append(Path(f"M{MARGIN:g} {y + _LEVEL_GAP / 2 - _GAP:g} H{right:g}", "rule"))
            y += _LEVEL_GAP - _GAP
        for component in level:
            framed = len(component) > 1
            top, y = y, y + (_FRAME_TOP if framed else 0)
            for statement in component:
                box = _box(statement, y, arrows, order)
                boxes.append(box)
                y += box.height + _GAP
            if framed:
                behind.append(Rect(left - _FRAME, top, width + 2 * _FRAME, y - _GAP + _FRAME - top, "frame", 8.0))
                behind.append(Words(left, top + 16, _STAYS, "small"))
                y += _FRAME
    return boxes, behind, y - _GAP


def _box(statement: Statement, y: float, arrows: Iterable[Bundle], order: list[str]) -> _Box:
    def far(bundle: Bundle) -> int:
        return abs(order.index(bundle.source) - order.index(bundle.target))

    arrows = list(arrows)
    # Exits stand in the opposite order of entries, so that arrows between the same two boxes nest and do not cross.
    exits = tuple(sorted((b for b in reversed(arrows) if b.source == statement.id), key=far, reverse=True))
    entries = tuple(sorted((b for b in arrows if b.target == statement.id), key=far))
    height = _EXIT * len(exits) + sum(_entry_height(bundle) for bundle in entries)
    return _Box(statement, y, max(_ROW, height + _PAD), exits, entries)


def _entry_height(bundle: Bundle) -> float:
    return _LINE * len(bundle.lines) + 7


def _box_shapes(box: _Box, left: float, width: float) -> list[Shape]:
    statement = box.statement
    middle = box.y + box.height / 2 + 4.5
    shortly = shortened(statement.text, _TEXT)
    return [Rect(left, box.y, width, box.height, "box", 4.0, f"line {statement.id}: {statement.text}"),
            Words(left + _PAD, middle, statement.id, "strong"),
            Words(left + _PAD + LETTER * (columns(statement.id) + 2), middle, shortly)]


def _spans(boxes: Iterable[_Box]) -> dict[Bundle, tuple[float, float]]:
    """Per bundle the heights at which it leaves one statement and arrives at the other."""
    leaves: dict[Bundle, float] = {}
    arrives: dict[Bundle, float] = {}
    for box in boxes:
        y = box.y + _PAD / 2
        for bundle in box.exits:
            leaves[bundle] = y + _EXIT / 2
            y += _EXIT
        for bundle in box.entries:
            y += _entry_height(bundle)
            arrives[bundle] = y - 3
    return {bundle: (leaves[bundle], arrives[bundle]) for bundle in leaves}


def _lanes(spans: dict[Bundle, tuple[float, float]]) -> dict[Bundle, int]:
    """A lane for each bundle such that no two of one lane meet; short ones get the inner lanes."""
    taken: list[list[tuple[float, float]]] = []
    lanes: dict[Bundle, int] = {}
    for bundle, (start, end) in sorted(spans.items(), key=lambda item: abs(item[1][1] - item[1][0])):
        low, high = min(start, end) - 2, max(start, end) + 2
        lane = next((at for at, others in enumerate(taken) if all(high < a or b < low for a, b in others)), len(taken))
        taken += [[]] if lane == len(taken) else []
        taken[lane].append((low, high))
        lanes[bundle] = lane
    return lanes


def _arrow_shapes(bundle: Bundle, start: float, end: float, edge: float, lane: float) -> list[Shape]:
    line = rounded_line([(edge, start), (lane, start), (lane, end), (edge + 7, end)], 6)
    title = f"{bundle.kind} from line {bundle.source} to line {bundle.target}: {'; '.join(bundle.lines)}"
    label = _label(bundle)
    top = end - 5 - _LINE * (len(label) - 1)
    said = [Words(edge + _FRAME + 10, top + _LINE * at, text) for at, text in enumerate(label)]
    return [Path(line, bundle.kind, title), head((edge, end), (-1, 0), bundle.kind), *said]


def _legend(arrows: tuple[Bundle, ...], y: float, width: float, ruled: bool) -> tuple[list[Shape], float]:
    """What the lines and vectors mean, and the y below it."""
    if not arrows:
        return paragraph("No dependences: every order of the iterations is legal.", MARGIN, y, width - 2 * MARGIN)
    shapes: list[Shape] = []
    for kind in [kind for kind in KINDS if any(bundle.kind == kind for bundle in arrows)]:
        shapes += [*line_sample(MARGIN, y + 7, kind), Words(MARGIN + 58, y + 11, f"{kind}: {KINDS[kind]}", "small")]
        y += 18
    text = "(1, 0): iterations from the first to the second, outermost loop first; where these vary < later, = same, " \
           "> earlier, <= same or later, >= same or earlier, != not same, * any."
    if ruled:
        text += " Between statements parted by a rule all arrows point down."
    more, y = paragraph(text, MARGIN, y + 4, width - 2 * MARGIN)
    return [*shapes, *more], y


def line_sample(x: float, y: float, kind: str) -> list[Shape]:
    """A short arrow that shows how a kind of dependence is drawn."""
    return [Path(f"M{x:g} {y:g} H{x + 40:g}", kind), head((x + 48, y), (1, 0), kind)]


def _described(nest: Nest, arrows: tuple[Bundle, ...]) -> str:
    statements = "; ".join(f"line {s.id}: {s.text}" for s in nest.statements)
    said = "; ".join(f"{b.kind} from line {b.source} to line {b.target}: {', '.join(b.lines)}" for b in arrows)
    return f"Statements: {statements}. Dependences: {said or 'none'}."
