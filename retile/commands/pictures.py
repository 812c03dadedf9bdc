"""The pictures of ``retile depend``: made first, then written, so that an error leaves no file behind."""

from __future__ import annotations

from pathlib import PurePath
from typing import Any

from ..library import OpenNest
from ..model import RetileError
from ..values import dataclass
from .sizes import named_sizes


@dataclass(frozen=True)
class Pictures:
    """The files that are wanted, and what the one of the iteration space shows."""

    graph: str | None = None  # a file for the graph
    space: str | None = None  # a file for the iteration space
    plan: str | None = None
    sizes: tuple[str, ...] = ()  # NAME=VALUE

    @property
    def wanted(self) -> bool:
        """True if any is to be drawn."""
        return self.graph is not None or self.space is not None

    def check_names(self) -> None:
        """RetileError if a file's name does not say a format that can be written."""
        _check_suffix("--graph", self.graph, (".svg", ".dot"))
        _check_suffix("--space", self.space, (".svg",))
        if self.graph is not None and self.graph == self.space:
            raise RetileError(f"--graph and --space both name {self.graph}; choose two files.")


def _check_suffix(option: str, file: str | None, known: tuple[str, ...]) -> None:
    if file is not None and _suffix(file) not in known:
        raise RetileError(f"{option} {file}: the name must end in {' or '.join(known)}, which says what to write.")


def _suffix(file: str) -> str:
    return PurePath(file).suffix.lower()


def draw(nest: OpenNest, pictures: Pictures) -> list[dict[str, Any]]:
    """Write the pictures of a nest; gives what a document says of them."""
    from ..source import replace_file

    drawn = [_graph(nest, pictures.graph)] if pictures.graph is not None else []
    drawn += [_space(nest, pictures.space, pictures)] if pictures.space is not None else []
    for text, said in drawn:
        replace_file(said["file"], text.encode("utf-8"))
    return [said for _, said in drawn]


def _graph(nest: OpenNest, file: str) -> tuple[str, dict[str, Any]]:
    from ..report.graph import graph_dot, graph_svg
    from ..report.picture import svg

    made = graph_dot(nest.nest, nest.dependences) if _suffix(file) == ".dot" else \
        svg(graph_svg(nest.nest, nest.dependences))
    return made, {"shows": "graph", "file": file}


def _space(nest: OpenNest, file: str, pictures: Pictures) -> tuple[str, dict[str, Any]]:
    from ..plan import judge
    from ..report.picture import svg
    from ..report.space import iteration_space
    from ..report.space_picture import space_picture

    sizes = named_sizes(pictures.sizes)
    judgement = None if pictures.plan is None else judge(nest.nest, nest.dependences, nest.plan(pictures.plan))
    space = iteration_space(nest.nest, nest.dependences, sizes, judgement)
    return svg(space_picture(space)), {
        "shows": "space", "file": file, "statement": space.statement.id, "sizes": dict(space.sizes),
        "plan": None if judgement is None else judgement.plan.order_text,
        "verdict": None if judgement is None else judgement.verdict.value}
