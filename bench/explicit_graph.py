"""The graph of a flat block model with every link stored, for graph libraries.

Nodes lie on thirds of the block edges: corners, two inside every edge and four inside
every face. All nodes on the surface of a block are linked; links that several blocks
share take the fastest. A second, smaller node set has the inner nodes of faces alone,
twelve per block.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import combinations
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array

Floats = NDArray[np.float64]
NodeSet = Literal["all", "faces"]
PARTS = 3


@dataclass(frozen=True)
class Links:
    """Undirected links, each once: nodes at both ends and the time between them, s."""

    first: NDArray[np.int32]
    second: NDArray[np.int32]
    time_s: Floats


@dataclass(frozen=True)
class ExplicitGraph:
    """Links, number of nodes and their places.

    Attributes
    ----------
    links : Links
    positions_km : ndarray, shape (nodes, 3)
    """

    links: Links
    positions_km: Floats

    @property
    def node_count(self) -> int:
        """Number of nodes."""
        return len(self.positions_km)

    @property
    def link_count(self) -> int:
        """Number of undirected links."""
        return len(self.links.time_s)

    @property
    def matrix_bytes(self) -> int:
        """Size of :meth:`matrix`: both directions, 8-byte times and 4-byte indices."""
        return 2 * self.link_count * (8 + 4) + 4 * (self.node_count + 1)

    def matrix(self) -> csr_array:
        """Return both directions as scipy's CSR matrix."""
        links = self.links
        rows = np.concatenate([links.first, links.second])
        columns = np.concatenate([links.second, links.first])
        times = np.concatenate([links.time_s, links.time_s])
        return coo_array((times, (rows, columns)), shape=(self.node_count,) * 2).tocsr()

    def nearest(self, points_km: Floats) -> NDArray[np.int64]:
        """Return the node nearest to each point."""
        return np.array(
            [np.argmin(np.sum((self.positions_km - point) ** 2, axis=1)) for point in points_km]
        )


def build(slowness_s_per_km: Floats, block_km: float, node_set: NodeSet) -> ExplicitGraph:
    """Store every link of equal cubic blocks."""
    size = tuple(PARTS * count + 1 for count in slowness_s_per_km.shape)
    numbers = _numbers(size, node_set)
    parts = list(_links(slowness_s_per_km, block_km, size, numbers, node_set))
    links = Links(*(np.concatenate(column) for column in zip(*parts, strict=True)))
    used = np.flatnonzero(numbers >= 0)
    positions = np.stack(np.unravel_index(used, size), axis=1) * (block_km / PARTS)
    return ExplicitGraph(links, positions)


def _numbers(size: tuple[int, ...], node_set: NodeSet) -> NDArray[np.int32]:
    """Return the number of each lattice point that is a node; −1 elsewhere."""
    on_planes = sum((index % PARTS == 0).astype(int) for index in np.indices(size)).ravel()
    used = on_planes == 1 if node_set == "faces" else on_planes >= 1
    numbers = np.full(used.size, -1, dtype=np.int32)
    numbers[used] = np.arange(used.sum(), dtype=np.int32)
    return numbers


def _links(
    slowness: Floats,
    block_km: float,
    size: tuple[int, ...],
    numbers: NDArray[np.int32],
    node_set: NodeSet,
) -> Iterator[tuple[NDArray[np.int32], NDArray[np.int32], Floats]]:
    """Yield one kind of link after the other, for all blocks at once."""
    for first, second in combinations(_surface(node_set), 2):
        shared = [axis for axis in range(3) if first[axis] == second[axis]]
        if any(first[axis] == PARTS for axis in shared):
            continue  # The neighbour behind yields it from its own low side.
        fastest = slowness
        for axis in shared:
            if first[axis] == 0:
                fastest = _fastest_neighbour(fastest, axis)
        corner = np.indices(fastest.shape).reshape(3, -1) * PARTS
        ends = [
            numbers[np.ravel_multi_index(corner + np.array(step)[:, None], size)]
            for step in (first, second)
        ]
        way_km = np.linalg.norm(np.subtract(first, second)) * block_km / PARTS
        yield ends[0], ends[1], way_km * fastest.ravel()


def _surface(node_set: NodeSet) -> list[tuple[int, ...]]:
    steps = [tuple(map(int, step)) for step in np.ndindex((PARTS + 1,) * 3)]
    planes = [sum(value in (0, PARTS) for value in step) for step in steps]
    wanted = (1,) if node_set == "faces" else (1, 2, 3)
    return [step for step, count in zip(steps, planes, strict=True) if count in wanted]


def _fastest_neighbour(slowness: Floats, axis: int) -> Floats:
    """Return the lesser slowness on both sides of all planes across an axis."""
    widths = [(0, 0)] * 3
    widths[axis] = (1, 1)
    padded = np.pad(slowness, widths, constant_values=np.inf)
    low = np.take(padded, range(padded.shape[axis] - 1), axis=axis)
    high = np.take(padded, range(1, padded.shape[axis]), axis=axis)
    return np.asarray(np.minimum(low, high))
