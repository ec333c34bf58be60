"""The block grid: three rising edge arrays cut a frame into blocks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from rayloom.errors import InputError
from rayloom.model.frame import Frame
from rayloom.units import EARTH_RADIUS_KM

if TYPE_CHECKING:
    from rayloom.model.settings import GridSettings

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BlockWidths:
    """Block widths along the three axes, in km.

    Attributes
    ----------
    x_km, y_km, depth_km : ndarray, shapes (nx,), (ny,), (nz,)
        On the sphere, x and y are measured at the middle depth, x also at the middle y.
    """

    x_km: Floats
    y_km: Floats
    depth_km: Floats


@dataclass(frozen=True, init=False, eq=False)
class BlockGrid:
    """Blocks between rising edges along x, y and depth.

    Parameters
    ----------
    frame : Frame
        Where the blocks lie.
    x_edges, y_edges : array_like, shapes (nx + 1,), (ny + 1,)
        Rising block edges: degrees of arc on the sphere, km in a flat frame.
    depth_edges_km : array_like, shape (nz + 1,)
        Rising block edges, km below sea level, positive down; may start above it.

    Raises
    ------
    InputError
        If edges are fewer than two, not finite, not rising, or beyond the sphere.

    Notes
    -----
    Spacing may be unequal. Arrays over the blocks have the shape (nx, ny, nz) in C
    order: block (ix, iy, iz) has the flat index (ix·ny + iy)·nz + iz.
    """

    frame: Frame
    x_edges: Floats
    y_edges: Floats
    depth_edges_km: Floats

    def __init__(
        self, frame: Frame, x_edges: ArrayLike, y_edges: ArrayLike, depth_edges_km: ArrayLike
    ) -> None:
        x_limit, y_limit = (np.inf, np.inf) if frame.is_flat else (180.0, 90.0)
        depth_limit = np.inf if frame.is_flat else EARTH_RADIUS_KM
        object.__setattr__(self, "frame", frame)
        for name, edges, low, high in (
            ("x_edges", x_edges, -x_limit, x_limit),
            ("y_edges", y_edges, -y_limit, y_limit),
            ("depth_edges_km", depth_edges_km, -np.inf, depth_limit),
        ):
            object.__setattr__(self, name, _rising(name, edges, low=low, high=high))

    @classmethod
    def from_spec(cls, spec: GridSettings) -> Self:
        """Build the grid that settings describe.

        Parameters
        ----------
        spec : GridSettings
            Place and edges.

        Returns
        -------
        BlockGrid
            The same grid for the same settings, bit for bit.

        Raises
        ------
        InputError
            If the edges do not rise or leave the sphere.
        """
        return cls(spec.place(), *spec.edges())

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, BlockGrid):
            return NotImplemented
        return self.frame == other.frame and all(
            np.array_equal(mine, theirs)
            for mine, theirs in zip(self._edges, other._edges, strict=True)
        )

    def __hash__(self) -> int:
        return hash((self.frame, *(edges.tobytes() for edges in self._edges)))

    @property
    def _edges(self) -> tuple[Floats, Floats, Floats]:
        return self.x_edges, self.y_edges, self.depth_edges_km

    @property
    def shape(self) -> tuple[int, int, int]:
        """Number of blocks along x, y and depth."""
        return self.x_edges.size - 1, self.y_edges.size - 1, self.depth_edges_km.size - 1

    @property
    def block_count(self) -> int:
        """Number of blocks."""
        nx, ny, nz = self.shape
        return nx * ny * nz

    @property
    def x_centres(self) -> Floats:
        """Middles of the blocks along x, shape (nx,), degrees or km."""
        return _middles(self.x_edges)

    @property
    def y_centres(self) -> Floats:
        """Middles of the blocks along y, shape (ny,), degrees or km."""
        return _middles(self.y_edges)

    @property
    def depth_centres_km(self) -> Floats:
        """Middles of the blocks along depth, shape (nz,), km below sea level."""
        return _middles(self.depth_edges_km)

    @property
    def centres(self) -> Floats:
        """Middles of all blocks in flat order, shape (block_count, 3): x, y, depth_km."""
        mesh = np.meshgrid(self.x_centres, self.y_centres, self.depth_centres_km, indexing="ij")
        return np.stack([axis.ravel() for axis in mesh], axis=-1)

    @property
    def widths(self) -> BlockWidths:
        """Block widths along the three axes, in km."""
        x, y, depth = (np.diff(edges) for edges in self._edges)
        if self.frame.is_flat:
            return BlockWidths(x, y, depth)
        radius = EARTH_RADIUS_KM - 0.5 * (self.depth_edges_km[0] + self.depth_edges_km[-1])
        middle_y = np.radians(0.5 * (self.y_edges[0] + self.y_edges[-1]))
        along_y = radius * np.radians(y)
        return BlockWidths(radius * np.cos(middle_y) * np.radians(x), along_y, depth)

    @property
    def volumes_km3(self) -> Floats:
        """Volumes of the blocks, shape (nx, ny, nz), km³; exact on the sphere."""
        if self.frame.is_flat:
            x, y, depth = (np.diff(edges) for edges in self._edges)
        else:
            x = np.diff(np.radians(self.x_edges))
            y = np.diff(np.sin(np.radians(self.y_edges)))
            depth = -np.diff((EARTH_RADIUS_KM - self.depth_edges_km) ** 3) / 3.0
        return np.asarray(x[:, None, None] * y[None, :, None] * depth)

    def locate(self, points: ArrayLike) -> NDArray[np.int64]:
        """Find the block that holds each point.

        Parameters
        ----------
        points : array_like, shape (..., 3)
            x, y (degrees of arc, or km when flat) and depth (km).

        Returns
        -------
        ndarray of int64, shape (...)
            Flat block index, −1 outside the grid. A point on an inner edge belongs to
            the block behind it, one on the outermost edge to the last block.

        Raises
        ------
        InputError
            If the last axis does not hold three values.
        """
        array = np.asarray(points, dtype=np.float64)
        if array.ndim == 0 or array.shape[-1] != 3:
            raise InputError(
                f"expected x, y and depth_km along the last axis, got the shape {array.shape}",
                where="points",
            )
        index = np.zeros(array.shape[:-1], dtype=np.int64)
        inside = np.ones(array.shape[:-1], dtype=bool)
        for values, edges in zip(np.moveaxis(array, -1, 0), self._edges, strict=True):
            position = np.searchsorted(edges, values, side="right") - 1
            position = np.where(values == edges[-1], edges.size - 2, position)
            inside &= (values >= edges[0]) & (values <= edges[-1])
            index = index * (edges.size - 1) + position
        return np.where(inside, index, np.int64(-1))


def _rising(name: str, edges: ArrayLike, *, low: float, high: float) -> Floats:
    try:
        array = np.array(edges, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InputError(f"expected a list of numbers ({error})", where=name) from error
    if array.ndim != 1 or array.size < 2:
        raise InputError(
            f"expected at least two edges in one row, got the shape {array.shape}", where=name
        )
    if not np.all(np.isfinite(array)):
        first = int(np.argmin(np.isfinite(array)))
        raise InputError(f"edge {first} is {array[first]}, not a finite number", where=name)
    falls = np.flatnonzero(np.diff(array) <= 0.0)
    if falls.size:
        first = int(falls[0])
        raise InputError(
            f"edges must rise, but edge {first + 1} ({array[first + 1]:g}) does not exceed "
            f"edge {first} ({array[first]:g})",
            where=name,
        )
    if array[0] < low or array[-1] > high or (name.startswith("depth") and array[-1] == high):
        raise InputError(
            f"edges {array[0]:g} … {array[-1]:g} leave the sphere ({low:g} … {high:g})",
            where=name,
        )
    array.flags.writeable = False
    return array


def _middles(edges: Floats) -> Floats:
    return np.asarray(0.5 * (edges[:-1] + edges[1:]))
