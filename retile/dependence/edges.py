"""What the dependence room gives: edges between statements, and the graph of them."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING

from ..model import Assumption
from ..order import Coordinate
from ..sets import Region
from ..values import dataclass

if TYPE_CHECKING:
    import networkx


@dataclass(frozen=True)
class Edge:
    """Pairs of instances that touch one cell, one of them writing; the source is first in the original order."""

    source: str  # statement id
    target: str
    kind: str  # ``flow``, ``anti``, ``output``
    storage: str
    relation: Region  # over parameters, the source's iterators, and the target's iterators with a prime
    carried_by: str | None  # id of the outermost common loop whose iterations differ; None within one iteration
    common: tuple[str, ...]  # ids of the loops around both statements
    distance: tuple[int, ...] | None  # per common loop, in iterations, where the same for all pairs
    direction: tuple[str, ...]  # per common loop: ``<``, ``=``, ``>``, ``<=``, ``>=``, ``!=`` or ``*``, in iteration order
    exact: bool  # False where an access may touch any cell: the pairs may, but need not, share one
    assumptions: tuple[Assumption, ...] = ()
    update: str = ""  # both are updates of this kind (``+``, ``max`` ...): only their order, not their sum, depends on it
    free: bool = False  # ... and any order gives the same bits


@dataclass(frozen=True)
class Dependences:
    """All that is known of a nest's dependences."""

    context: Region  # the parameters' values at which the original is defined and the assumptions hold
    domains: dict[str, Region]  # per statement: parameters and iterators of its instances
    times: dict[str, tuple[Coordinate, ...]]  # per statement: its time vector in the original order
    edges: tuple[Edge, ...]
    # Pairs that only reuse the storage of a value private to an iteration; they bind a plan that splits the iteration.
    reuse: tuple[Edge, ...]
    assumptions: tuple[Assumption, ...]

    @cached_property
    def graph(self) -> networkx.MultiDiGraph:
        """Statements as nodes, edges with their ``Edge`` under ``edge``.

        networkx is loaded here, on first use, because it takes longer to import than a verdict takes to find.
        """
        import networkx

        graph = networkx.MultiDiGraph()
        graph.add_nodes_from(self.domains)
        for edge in self.edges:
            graph.add_edge(edge.source, edge.target, edge=edge)
        return graph
