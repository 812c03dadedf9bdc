"""The pictures of ``depend``: all of the graph is in them, they can be read, and their order is that of the loops."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
import xml.etree.ElementTree as ElementTree
from collections import Counter
from functools import cache
from dataclasses import replace
from itertools import combinations, pairwise, product

import pytest

from retile.dependence import analyse
from retile.library import OpenFile
from retile.model import Nest, RetileError
from retile.plan import build_tree, judge, parse_plan
from retile.report.graph import graph_dot, graph_svg, levels
from retile.report.picture import LETTER, SMALL, Circle, Path, Picture, Rect, Words, columns, printable, shortened, svg
from retile.report.space import Space, iteration_space
from retile.report.space_picture import space_picture
from retile.source import open_source

from command_line import SAMPLES, line_of, retile
from hand_nests import BACKWARD, CLEARED, DOWN, DRIFT, FACTORISATION, PRODUCT, TRIANGLE, A, chain, i, j, n
from walk import runs

analysed = cache(analyse)
SVG = "{http://www.w3.org/2000/svg}"
# Backslashes that labels read, entities, ends of quotes, comments and tags, and what XML 1.0 cannot hold (section 2.2).
HOSTILE = 'a["\\l\\N"] = x<y>>&alpha; -- ]]> \' \x01\x00\ud800\ufffe\u202e\u2028 </text><script>"; } %> {{ x }} {% y %}'

RECTANGLE = chain([("i", A(1), n - 2, 1), ("j", A(0), n - 3, 1)],
                  [[("a", True, (i, j)), ("a", False, (i - 1, j - 2)), ("b", False, (j,))], [("b", True, (j,))]])
DEEP = chain([(name, A(0), n - 1, 1) for name in "ijkl"], [[("a", True, tuple(A(x) for x in "ijkl"))]])
LINE = chain([("i", A(2), n - 1, 1)], [[("a", True, (i,)), ("a", False, (i - 2,))]])
FAR = chain([("i", A(0), A(99), 1), ("j", 100 - i, A(100), 1)], [[("a", True, (i, j))]])
HAND = {"product": PRODUCT, "backward": BACKWARD, "triangle": TRIANGLE, "down": DOWN, "drift": DRIFT,
        "cleared": CLEARED, "factorisation": FACTORISATION, "rectangle": RECTANGLE, "line": LINE}
PLACES = [("beamform.c", "form_beams"), ("beamform.c", "form_beams_afresh"), ("drift.c", "drift_transect"),
          ("drift.c", "drift_area"), ("relax.c", "relax_four"), ("relax.c", "relax_colour"),
          ("tidal_factor.c", "tidal_lu"), ("tidal_factor.c", "tidal_cholesky"), ("track_match.c", "match_tracks"),
          ("tide_normal.c", "tide_normal_matrix")]


@pytest.fixture(scope="module", params=[*HAND, *PLACES], ids=str)
def nest(request: pytest.FixtureRequest) -> Nest:
    if isinstance(request.param, str):
        return HAND[request.param]
    return sample(*request.param)


def sample(file: str, function: str) -> Nest:
    return OpenFile(open_source(str(SAMPLES / file))).nest(line_of(file, function)).nest


def hostile(nest: Nest, text: str = HOSTILE) -> Nest:
    return replace(nest, function="f<&\"", statements=tuple(replace(s, text=text) for s in nest.statements))


def parsed(picture: Picture) -> ElementTree.Element:
    """The picture's elements, as a parser of XML sees them; with a title and a description for screen readers."""
    root = ElementTree.fromstring(svg(picture).encode("utf-8"))
    assert root.tag == f"{SVG}svg" and root.attrib["role"] == "img"
    assert root[0].tag == f"{SVG}title" and root[1].tag == f"{SVG}desc" and root[0].text and root[1].text
    assert root.attrib["aria-labelledby"].split() == [root[0].attrib["id"], root[1].attrib["id"]]
    return root


def extent(words: Words) -> tuple[float, float, float, float]:
    letter = {"small": SMALL, "number": 9 * 0.602}.get(words.look, LETTER)
    width = letter * columns(words.text)
    left = words.x - width * {"start": 0.0, "middle": 0.5, "end": 1.0}[words.anchor]
    return left, words.y - 9, left + width, words.y + 2


def assert_readable(picture: Picture) -> None:
    """No two texts overlap, and all shapes lie on the sheet."""
    texts = [shape for shape in picture.shapes if isinstance(shape, Words)]
    for one, other in combinations(texts, 2):
        a, b = extent(one), extent(other)
        assert a[2] <= b[0] or b[2] <= a[0] or a[3] <= b[1] or b[3] <= a[1], (one, other)
    for shape in texts:
        left, top, right, bottom = extent(shape)
        assert 0 <= left and right <= picture.width and 0 <= top and bottom <= picture.height, shape
    for shape in picture.shapes:
        if isinstance(shape, Rect):
            assert 0 <= shape.x and shape.x + shape.width <= picture.width + 1e-6
            assert 0 <= shape.y and shape.y + shape.height <= picture.height + 1e-6


# ---------------------------------------------------------------- the graph

def said_of(edge) -> tuple[str, str]:
    vector = edge.distance if edge.distance is not None else edge.direction
    return edge.storage, f"({', '.join(map(str, vector))})"


def test_every_statement_and_every_edge_is_in_the_picture(nest):
    dependences = analysed(nest)
    root = parsed(graph_svg(nest, dependences))
    boxes = [box.findtext(f"{SVG}title") for box in root.iter(f"{SVG}rect") if box.attrib["class"] == "box"]
    assert sorted(boxes) == sorted(f"line {s.id}: {s.text}" for s in nest.statements)
    shown = Counter(text.text for text in root.iter(f"{SVG}text"))
    for statement in nest.statements:
        assert shown[statement.id] and shown[shortened(statement.text, 64)]
    paths = {path.findtext(f"{SVG}title"): path.attrib["class"] for path in root.iter(f"{SVG}path")
             if path.find(f"{SVG}title") is not None}
    for edge in dependences.edges:
        start = f"{edge.kind} from line {edge.source} to line {edge.target}: "
        title, look = next((title, look) for title, look in paths.items() if title.startswith(start))
        storage, vector = said_of(edge)
        carrier = f"carried by {edge.carried_by}" if edge.carried_by else "in one iteration"
        assert look == edge.kind
        assert re.search(rf"\b{re.escape(storage)}\b[^;]*" + (re.escape(f"{vector}  {carrier}") if edge.common else ""),
                         title.removeprefix(start))
        if edge.common:
            assert any(storage in text and f"{vector}  {carrier}" in text for text in shown), (edge, shown)
    assert len(paths) == len({(edge.source, edge.target, edge.kind) for edge in dependences.edges})


def test_graph_can_be_read(nest):
    picture = graph_svg(nest, analysed(nest))
    assert_readable(picture)
    routes = [shape for shape in picture.shapes if isinstance(shape, Path) and shape.title]
    boxes = [shape for shape in picture.shapes if isinstance(shape, Rect) and shape.look == "box"]
    spots = [numbers(route.data) for route in routes]
    for upright, other in combinations([(max(x for x, _ in route), [y for _, y in route]) for route in spots], 2):
        if upright[0] == other[0]:  # arrows in one lane do not meet
            assert max(upright[1]) < min(other[1]) or max(other[1]) < min(upright[1])
    for route in spots:
        for box in boxes:  # arrows pass beside the boxes
            assert all(x >= box.x + box.width - 0.1 for x, _ in route)


def numbers(data: str) -> list[tuple[float, float]]:
    found = [float(number) for number in re.findall(r"-?\d+(?:\.\d+)?", data)]
    return list(zip(found[::2], found[1::2], strict=True))


def test_cycles_are_framed_and_between_levels_arrows_point_down(nest):
    """Components by brute force: two statements are in one if each reaches the other (Warshall's closure, 1962)."""
    dependences = analysed(nest)
    ids = [s.id for s in nest.statements]
    reach = {(edge.source, edge.target) for edge in dependences.edges}
    for via, one, other in product(ids, ids, ids):
        if (one, via) in reach and (via, other) in reach:
            reach.add((one, other))
    together = {frozenset(o for o in ids if o == one or {(one, o), (o, one)} <= reach) for one in ids}
    placed = [[frozenset(s.id for s in component) for component in level] for level in levels(nest, dependences)]
    assert {component for level in placed for component in level} == together
    at = {id: number for number, level in enumerate(placed) for component in level for id in component}
    inside = {(a, b) for component in together for a in component for b in component}
    between = {(edge.source, edge.target) for edge in dependences.edges} - inside
    assert all(at[source] < at[target] for source, target in between)
    picture = graph_svg(nest, dependences)
    frames = [shape for shape in picture.shapes if isinstance(shape, Rect) and shape.look == "frame"]
    assert len(frames) == sum(len(component) > 1 for component in together)


def test_frames_hold_their_statements_only():
    nest = sample("track_match.c", "match_tracks")
    picture = graph_svg(nest, analysed(nest))
    frame, = [shape for shape in picture.shapes if isinstance(shape, Rect) and shape.look == "frame"]
    boxes = [shape for shape in picture.shapes if isinstance(shape, Rect) and shape.look == "box"]
    inside = [box.title for box in boxes if frame.y < box.y and box.y + box.height < frame.y + frame.height]
    assert len(boxes) == len(nest.statements) == 7
    assert len(inside) == 6 and not any("apart = first" in title for title in inside)


def test_hostile_texts_stay_text():
    nest = hostile(FACTORISATION)
    root = parsed(graph_svg(nest, analysed(nest)))
    boxes = [box.findtext(f"{SVG}title") for box in root.iter(f"{SVG}rect") if box.attrib["class"] == "box"]
    assert boxes == [f"line {s.id}: {printable(HOSTILE)}" for s in nest.statements]
    assert "</text><script>" in boxes[0] and "{{ x }}" in boxes[0] and "&alpha;" in boxes[0]
    assert not list(root.iter(f"{SVG}script")) and "\u202e" not in boxes[0]
    parsed(space_picture(iteration_space(nest, analysed(nest), {})))


@pytest.mark.parametrize("text", ["", "深" * 80, "e\u0301" * 90, "x" * 300, "\t a  b\r\n"])
def test_texts_of_any_width_keep_their_place(text):
    nest = hostile(CLEARED, text)
    assert_readable(graph_svg(nest, analysed(nest)))
    assert columns(shortened(text, 64)) <= 64
    parsed(graph_svg(nest, analysed(nest)))


# The DOT language, graphviz.org, "The DOT Language": a double-quoted string ends at a quote without a backslash, and
# only \" is replaced in it.  What labels do with the rest: "escString" (\\ and \l) and "entities" (&amp;), same place.
_DOT_TOKEN = re.compile(r'\s*(?:"((?:[^"\\]|\\.)*)"|([A-Za-z_]\w*|-?\d+)|(->|[{}\[\];,=]))', re.DOTALL)


def dot_tokens(text: str) -> list[tuple[str, str]]:
    tokens, at = [], 0
    while at < len(text.rstrip()):
        match = _DOT_TOKEN.match(text, at)
        assert match, f"not DOT: {text[at:at + 40]!r}"
        tokens.append(("string", match[1]) if match[1] is not None else ("word", match[2] or match[3]))
        at = match.end()
    return tokens


def label_text(label: str) -> str:
    text = re.sub(r"\\(.)", lambda m: {"l": "\n", "n": "\n", "r": "\n"}.get(m[1], m[1]), label)
    assert not re.search(r"&(?!amp;)\w+;", text)
    return text.replace("&amp;", "&")


@pytest.mark.parametrize("text", ["a[i] = 1;", HOSTILE, "\\", "\\\\\"", '"', "&amp;", "&lt;b&gt;", "ends \\"])
def test_dot_escapes_any_text(text):
    nest = hostile(FACTORISATION, text)
    tokens = dot_tokens(graph_dot(nest, analysed(nest)))
    labels = [label_text(tokens[at + 2][1]) for at, token in enumerate(tokens) if token == ("word", "label")]
    for statement in nest.statements:
        assert f"{statement.id}  {printable(text)}" in labels
    assert all(token in ("{", "}", "[", "]", ";", ",", "=", "->", "digraph", "subgraph", "dependences", "graph", "node",
                         "edge", "label", "style", "shape", "box", "solid", "dashed", "dotted", "rounded", "fontname",
                         "monospace", "fontsize", "11", "labeljust", "l") or token.startswith("cluster_")
               for kind, token in tokens if kind == "word")


def test_dot_holds_every_edge(nest):
    dependences = analysed(nest)
    tokens = dot_tokens(graph_dot(nest, dependences))
    arrows = {(tokens[at - 1][1], tokens[at + 1][1], tokens[at + 9][1]): label_text(tokens[at + 5][1])
              for at, token in enumerate(tokens) if token == ("word", "->")}
    style = {"flow": "solid", "anti": "dashed", "output": "dotted"}
    for edge in dependences.edges:
        label = arrows[edge.source, edge.target, style[edge.kind]]
        assert label.startswith(edge.kind) and edge.storage in label
        assert not edge.common or said_of(edge)[1] in label
    assert len(arrows) == len({(edge.source, edge.target, edge.kind) for edge in dependences.edges})


@pytest.mark.skipif(shutil.which("dot") is None, reason="Graphviz is not installed")
@pytest.mark.parametrize("text", ["a[i] = 1;", HOSTILE, "ends \\"])
def test_graphviz_reads_dot(text):
    nest = hostile(FACTORISATION, text)
    written = graph_dot(nest, analysed(nest)).encode()
    done = subprocess.run(["dot", "-Tplain"], input=written, capture_output=True, timeout=60)
    assert (done.returncode, done.stderr) == (0, b"")
    assert done.stdout.decode().count("\nnode ") == len(nest.statements)


# ---------------------------------------------------------------- the iteration space

PLANS = {
    "product": ["i j k", "k:3 i k j", "i:4 j:4 k:4 i j k", "(i+j):3 k i j"],
    "backward": ["i j", "i:3 j:3 i j", "(i+j):4 i:2 i j", "j i"],
    "triangle": ["j i", "i:3 j:2 i j", "i:4 i:2 i j"],
    "down": ["j i", "i:2 j:2 i j"],
    "drift": ["(t+i):4 t:3 t i", "t i:3 i", "t (t+i)"],
    "cleared": ["i:2 k:3 j i k", "k j i"],
    "factorisation": ["j:3 k i@21 i@23 j"],
    "rectangle": ["j:3 i:3 j i", "i:5 i:2 i j"],
    "line": ["i:3 i"],
}
CASES = [(name, plan) for name, plans in PLANS.items() for plan in plans]


def space_of(nest: Nest, plan: str | None = None, **sizes: int) -> Space:
    dependences = analysed(nest)
    judgement = None if plan is None else judge(nest, dependences, parse_plan(plan, nest))
    return iteration_space(nest, dependences, sizes, judgement)


def executed(tree, space: Space, sizes: dict[str, int]) -> list[tuple[int, ...]]:
    """The points that a tree executes for the statement, in order, found by running it."""
    return [tuple(dict(values)[loop] for loop in space.statement.loops)
            for statement, values in runs(tree, sizes) if statement == space.statement.id]


def all_sizes(nest: Nest, space: Space) -> dict[str, int]:
    return {**{p.symbol: 5 for p in nest.parameters}, **dict(space.sizes)}


@pytest.mark.parametrize(("name", "plan"), CASES)
def test_walk_is_the_order_of_the_rewritten_loops(name, plan):
    nest = HAND[name]
    space = space_of(nest, plan)
    sizes = all_sizes(nest, space)
    order = executed(build_tree(nest, space.walk.judgement.plan), space, sizes)
    assert list(space.walk.points) == order
    assert sorted(order) == list(space.points) == sorted(executed(nest.tree, space, sizes))
    numbered = [shape for shape in space_picture(space).shapes if isinstance(shape, Words) and shape.look == "number"]
    assert [words.text for words in numbered] == [str(at + 1) for at in range(len(order))]


def test_walk_with_named_chunks_takes_their_given_size():
    for size in (2, 5):
        space = space_of(RECTANGLE, "i:ROWS j:ROWS i j", ROWS=size, n=9)
        plain = space_of(RECTANGLE, f"i:{size} j:{size} i j", n=9)
        assert (space.walk.points, space.walk.chunks) == (plain.walk.points, plain.walk.chunks)
    assert any(f"with ROWS = {size}" in words.text for words in space_picture(space).shapes if isinstance(words, Words))


def test_chunks_are_consecutive_runs_of_their_size():
    space = space_of(RECTANGLE, "i:5 j:3 i:2 i j", n=11)
    for (row, column), (of_row, of_column, of_inner) in space.walk.chunks.items():
        assert (of_row, of_column, of_inner) == ((row - 1) // 5, column // 3, (row - 1) // 2)
        assert space.walk.outer[row, column] == ((row - 1) // 5, column // 3)
    picture = space_picture(space)
    cells = Counter(shape.look for shape in picture.shapes if isinstance(shape, Rect))
    assert cells["even"] + cells["odd"] == len(space.points) == 81
    assert cells["odd"] == sum((row + column) % 2 for row, column in space.walk.outer.values())
    borders = Counter(shape.look for shape in picture.shapes if isinstance(shape, Path))
    assert borders["border"] == 9 + 2 * 9  # between the rows 5 and 6, and the columns 2 and 3, 5 and 6
    assert borders["minor"] == 4 * 9  # below the rows 2, 4, 6 and 8


def pairs_by_hand(nest: Nest, space: Space) -> dict[tuple, set[str]]:
    """All dependent pairs of points of the space, by running the original and noting what touches which cell."""
    sizes = all_sizes(nest, space)
    inner = {s.id: s for s in nest.statements if s.loops == space.statement.loops}
    touched: dict[tuple, list[tuple[tuple[int, ...], bool]]] = {}
    found: dict[tuple, set[str]] = {}
    for statement, values in runs(nest.tree, sizes):
        if statement in inner:
            point = tuple(dict(values)[loop] for loop in space.statement.loops)
            own = sorted(inner[statement].accesses, key=lambda access: access.write)
            for access in own:
                cell = (access.storage, *(form.evaluate({**sizes, **dict(values)}) for form in access.subscripts))
                for earlier, write in touched.setdefault(cell, []):
                    if earlier != point and (write or access.write):
                        kind = "anti" if not write else "output" if access.write else "flow"
                        found.setdefault((earlier, point), set()).add(kind)
                touched[cell].append((point, access.write))
    return found


@pytest.mark.parametrize("name", sorted(HAND))
def test_arrows_are_dependences_and_imply_all_others(name):
    nest = HAND[name]
    space = space_of(nest)
    by_hand = pairs_by_hand(nest, space)
    for link in space.links:
        assert set(link.kinds) <= by_hand[link.source, link.target]
    assert bool(by_hand) == bool(space.links)
    assert {kind for link in space.links for kind in link.kinds} == set().union(*by_hand.values())
    if any("shortest are drawn" in note for note in space.notes):
        return
    drawn = {tuple(b - a for a, b in zip(link.source, link.target, strict=True)) for link in space.links}
    sums = set(drawn)
    for _ in range(12):
        sums |= {tuple(x + y for x, y in zip(one, other, strict=True)) for one in sums for other in drawn}
        sums = {ahead for ahead in sums if max(map(abs, ahead)) <= 12}
    assert {tuple(b - a for a, b in zip(*pair, strict=True)) for pair in by_hand} <= sums


@pytest.mark.parametrize(("name", "plan"), CASES)
def test_reversed_arrows_are_reversed_by_the_walk(name, plan):
    space = space_of(HAND[name], plan)
    at = {point: number for number, point in enumerate(space.walk.points)}
    looks = [shape.look for shape in space_picture(space).shapes if isinstance(shape, Path) and shape.title]
    assert [link.reversed for link in space.links] == [at[link.target] < at[link.source] for link in space.links]
    assert looks.count("wrong") == sum(link.reversed for link in space.links)
    assert space.walk.judgement.verdict.value == "illegal" or "wrong" not in looks


def test_an_illegal_order_shows_a_reversed_arrow():
    space = space_of(BACKWARD, "i:3 j:3 i j")
    assert space.walk.judgement.verdict.value == "illegal"
    assert [link.distance for link in space.links if link.reversed] == [(1, -1)]
    assert not any(link.reversed for link in space_of(BACKWARD, "i j").links)


def test_space_can_be_read(nest):
    space = space_of(nest)
    picture = space_picture(space)
    parsed(picture)
    assert_readable(picture)
    dots = [shape for shape in picture.shapes if isinstance(shape, Circle)]
    assert len(dots) == len(space.points) == len({(dot.x, dot.y) for dot in dots})
    assert all(3 <= len(axis.values) <= 12 for axis in space.axes)
    assert all(axis.whole == len(axis.values) for axis in space.axes)


@pytest.mark.parametrize(("name", "plan"), [("product", "i:4 j:4 k:4 i j k"), ("drift", "(t+i):4 t:3 t i")])
def test_numbered_space_can_be_read(name, plan):
    assert_readable(space_picture(space_of(HAND[name], plan)))


def test_directions_of_the_axes_follow_the_loops():
    picture = space_picture(space_of(DOWN))
    place = {shape.title: (shape.x, shape.y) for shape in picture.shapes if isinstance(shape, Circle)}
    points = [{name: int(value) for name, value in re.findall(r"(\w+) = (-?\d+)", title)} for title in place]
    for one, other in pairwise(sorted(points, key=lambda point: -point["i"])):
        if one["i"] != other["i"]:  # i counts down
            assert place[f"i = {one['i']}, j = {one['j']}"][1] < place[f"i = {other['i']}, j = {other['j']}"][1]
    for one, other in product(points, points):
        if one["j"] < other["j"]:
            assert place[f"i = {one['i']}, j = {one['j']}"][0] < place[f"i = {other['i']}, j = {other['j']}"][0]


def test_large_spaces_are_drawn_in_part():
    space = space_of(PRODUCT, "i:4 j:4 i j k", n=1000)
    assert [(len(axis.values), axis.whole) for axis in space.axes] == [(6, 1000)] * 3
    assert len(space.walk.points) == 216 and len(set(space.walk.chunks.values())) == 4
    assert "Of k the first 6 of 1000 iterations are drawn." in space.notes


def test_a_chunk_larger_than_the_picture_is_said():
    assert any("one chunk" in note for note in space_of(RECTANGLE, "i:64 j:64 i j").notes)
    assert not any("one chunk" in note for note in space_of(RECTANGLE, "i:4 j:4 i j").notes)


def test_given_sizes_are_kept():
    space = space_of(DRIFT, m=3, n=7)
    assert dict(space.sizes) == {"m": 3, "n": 7} and len(space.points) == 3 * 5


@pytest.mark.parametrize(("nest", "sizes", "said"), [
    (DEEP, {}, "draws one, two or three"), (DEEP, {}, "survey.c:21 (loop j)"),
    (FAR, {}, "not executed in the first iterations"), (PRODUCT, {"q": 3}, "no size q; it has n"),
    (PRODUCT, {"n": 0}, "not executed at n = 0"),
])
def test_what_cannot_be_drawn_is_said(nest, sizes, said):
    with pytest.raises(RetileError) as error:
        space_of(nest, **sizes)
    assert said in str(error.value)


def test_chunks_have_at_least_one_iteration():
    with pytest.raises(RetileError, match="at least one iteration"):
        space_of(RECTANGLE, "i:ROWS i j", ROWS=0)


# ---------------------------------------------------------------- the command

EIGHT = f"samples_c/relax.c:{line_of('relax.c', 'relax_eight')}"


def test_pictures_are_written_and_nothing_is_printed(tmp_path):
    graph, dot, space = tmp_path / "g.svg", tmp_path / "g.DOT", tmp_path / "s.svg"
    done = retile("depend", EIGHT, "--graph", graph, "--space", space, "--plan", "i:3 j:3 i j", "--set", "n=7",
                  "--set", "m=8")
    assert (done.status, done.out, done.err) == (0, "", "")
    assert ElementTree.parse(graph).getroot().tag == f"{SVG}svg"
    texts = [text.text for text in ElementTree.parse(space).getroot().iter(f"{SVG}text")]
    assert "at n = 7, m = 8" in texts and '30' in texts and '31' not in [t for t in texts[3:]]
    done = retile("depend", EIGHT, "--graph", dot)
    assert (done.status, done.out, done.err) == (0, "", "")
    assert dot.read_text() == retile("depend", EIGHT, "--dot").out
    assert sorted(path.name for path in tmp_path.iterdir()) == ["g.DOT", "g.svg", "s.svg"]


def test_json_names_the_pictures(tmp_path):
    space = tmp_path / "s.svg"
    done = retile("depend", EIGHT, "--json", "--space", space, "--plan", "i:3 j:3 i j", "--set", "n=7")
    said = json.loads(done.out)
    assert done.status == 0 and said["dependences"]
    picture, = said["pictures"]
    assert picture["file"] == str(space) and space.exists()
    assert (picture["shows"], picture["plan"], picture["verdict"]) == ("space", "i:3 j:3 i j", "illegal")
    assert picture["sizes"]["n"] == 7
    assert json.loads(retile("depend", EIGHT, "--json").out)["pictures"] == []


@pytest.mark.parametrize(("arguments", "said"), [
    (["--graph", "g.png"], "must end in .svg or .dot"), (["--space", "s.dot"], "must end in .svg"),
    (["--plan", "i j"], "belong to --space"), (["--set", "n=3"], "belong to --space"),
    (["--graph", "x.svg", "--space", "x.svg"], "choose two files"),
    (["--graph", "x.svg", "--space", "s.svg", "--set", "n=2"], "not executed at n = 2"),
    (["--space", "s.svg", "--set", "n"], "NAME=VALUE"), (["--space", "s.svg", "--set", "n=1.5"], "not a whole number"),
    (["--space", "s.svg", "--plan", "i q"], "no loop 'q'"), (["--graph", "none/g.svg"], "cannot be written"),
])
def test_wrong_calls_leave_no_file(tmp_path, arguments, said):
    address = f"{SAMPLES}/relax.c:{EIGHT.rpartition(':')[2]}"
    done = retile("depend", address, *arguments, cwd=tmp_path, PYTHONPATH=str(SAMPLES.parent))
    assert (done.status, done.out) == (2, "")
    assert said in done.err and "Traceback" not in done.err
    assert list(tmp_path.iterdir()) == []


def test_a_refused_nest_has_no_picture(tmp_path):
    returns = f"samples_c/first_return.c:{line_of('first_return.c', 'first_returns')}"
    done = retile("depend", returns, "--graph", tmp_path / "g.svg")
    assert (done.status, done.out) == (1, "") and "`break` ends the loop early" in done.err
    assert list(tmp_path.iterdir()) == []
