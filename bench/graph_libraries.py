"""Single-source least times by general graph libraries.

Each entry makes the library's own graph and returns the search: a function of one
source that returns the times of all nodes.
"""

from __future__ import annotations

from collections.abc import Callable
from importlib.util import find_spec

import numpy as np
from numpy.typing import NDArray

from bench.explicit_graph import ExplicitGraph

Floats = NDArray[np.float64]
Search = Callable[[int], Floats]
CHUNK = 1_000_000


def scipy_search(graph: ExplicitGraph) -> Search:
    """Search with scipy.sparse.csgraph.dijkstra on both directions of the links."""
    from scipy.sparse.csgraph import dijkstra

    matrix = graph.matrix()
    return lambda source: np.asarray(dijkstra(matrix, directed=True, indices=source))


def networkit_search(graph: ExplicitGraph) -> Search:
    """Search with networkit.distance.Dijkstra."""
    import networkit

    links = graph.links
    built = networkit.GraphFromCoo(
        (links.time_s, (links.first, links.second)), n=graph.node_count, weighted=True
    )

    def search(source: int) -> Floats:
        run = networkit.distance.Dijkstra(built, source, storePaths=False)
        return np.asarray(run.run().getDistances())

    return search


def igraph_search(graph: ExplicitGraph) -> Search:
    """Search with igraph's Graph.distances."""
    import igraph

    links = graph.links
    built = igraph.Graph(n=graph.node_count, edges=np.stack([links.first, links.second], axis=1))
    built.es["time"] = links.time_s.tolist()

    def search(source: int) -> Floats:
        return np.asarray(built.distances(source=source, weights="time")[0])

    return search


def rustworkx_search(graph: ExplicitGraph) -> Search:
    """Search with rustworkx.dijkstra_shortest_path_lengths."""
    import rustworkx

    links = graph.links
    built = rustworkx.PyGraph(multigraph=True)
    built.add_nodes_from(range(graph.node_count))
    for start in range(0, graph.link_count, CHUNK):
        part = slice(start, start + CHUNK)
        ends = links.first[part].tolist(), links.second[part].tolist()
        built.add_edges_from(list(zip(*ends, links.time_s[part].tolist(), strict=True)))

    def search(source: int) -> Floats:
        found = rustworkx.dijkstra_shortest_path_lengths(built, source, float)
        times = np.zeros(graph.node_count)
        times[list(found.keys())] = list(found.values())
        return times

    return search


LIBRARIES: dict[str, Callable[[ExplicitGraph], Search]] = {
    "scipy": scipy_search,
    "networkit": networkit_search,
    "igraph": igraph_search,
    "rustworkx": rustworkx_search,
}


def available() -> tuple[list[str], list[str]]:
    """Return the libraries installed and those missing."""
    present = [name for name in LIBRARIES if find_spec(name)]
    return present, [name for name in LIBRARIES if name not in present]
