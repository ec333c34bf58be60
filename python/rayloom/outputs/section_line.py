"""Lines on the surface along which vertical sections are cut."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame
from rayloom.outputs.settings import SectionSettings
from rayloom.units import EARTH_RADIUS_KM

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True)
class SectionLine:
    """A great-circle arc of a frame (a flat frame: a straight line).

    Attributes
    ----------
    frame : Frame
        The frame.
    start, end : tuple of float
        x, y of the end points in the frame.
    name : str
        What the start is called; the end carries a prime.
    """

    frame: Frame
    start: tuple[float, float]
    end: tuple[float, float]
    name: str = "A"

    def __post_init__(self) -> None:
        if not 0.0 < self.length_km < np.pi * EARTH_RADIUS_KM * 0.99 and not self.frame.is_flat:
            raise InputError(
                "the end points of the section coincide or lie opposite each other, "
                "so no line is defined; give two points well apart",
                where=f"section {self.name}",
            )
        if self.length_km == 0.0:
            raise InputError(
                "the end points of the section coincide; give two points apart",
                where=f"section {self.name}",
            )

    @classmethod
    def between(
        cls,
        frame: Frame,
        start: tuple[float, float],
        end: tuple[float, float],
        *,
        name: str = "A",
    ) -> SectionLine:
        """Join two points.

        Parameters
        ----------
        frame : Frame
            The frame.
        start, end : pair of float
            Longitude and latitude in degrees; x and y in km with a flat frame.
        name : str
            What the start is called.

        Returns
        -------
        SectionLine

        Raises
        ------
        InputError
            The points coincide or lie opposite each other.
        """
        return cls(frame, _local(frame, start), _local(frame, end), name)

    @classmethod
    def through(
        cls,
        frame: Frame,
        centre: tuple[float, float],
        *,
        azimuth_deg: float,
        length_km: float,
        name: str = "A",
    ) -> SectionLine:
        """Lay a line through its middle.

        Parameters
        ----------
        frame : Frame
            The frame.
        centre : pair of float
            Longitude and latitude in degrees; x and y in km with a flat frame.
        azimuth_deg : float
            Direction at the centre, clockwise from north (flat: from y).
        length_km : float
            Length along the sphere of the Earth's radius.
        name : str
            What the start is called.

        Returns
        -------
        SectionLine

        Raises
        ------
        InputError
            The length is not positive or reaches half around the Earth.
        """
        middle = _local(frame, centre)
        half = 0.5 * length_km
        if frame.is_flat:
            angle = np.deg2rad(azimuth_deg)
            step = half * np.array([np.sin(angle), np.cos(angle)])
            ends = np.asarray(middle) + step * np.array([[-1.0], [1.0]])
        else:
            angle = np.deg2rad(frame.grid_direction_deg(*middle, azimuth_deg))
            ends = _travel(middle, float(angle), np.array([-half, half]) / EARTH_RADIUS_KM)
        first, last = ((float(x), float(y)) for x, y in ends)
        return cls(frame, first, last, name)

    @classmethod
    def from_settings(cls, frame: Frame, settings: SectionSettings) -> SectionLine:
        """Build the line that settings describe.

        Raises
        ------
        InputError
            The line is not defined; see :meth:`between` and :meth:`through`.
        """
        if settings.start is not None and settings.end is not None:
            return cls.between(frame, settings.start, settings.end, name=settings.name)
        assert settings.centre is not None
        assert settings.azimuth_deg is not None
        assert settings.length_km is not None
        return cls.through(
            frame,
            settings.centre,
            azimuth_deg=settings.azimuth_deg,
            length_km=settings.length_km,
            name=settings.name,
        )

    @property
    def length_km(self) -> float:
        """Length along the sphere of the Earth's radius (flat: along the line)."""
        if self.frame.is_flat:
            return float(np.hypot(self.end[0] - self.start[0], self.end[1] - self.start[1]))
        first, last = self._ends()
        angle = np.arctan2(np.linalg.norm(np.cross(first, last)), first @ last)
        return float(angle * EARTH_RADIUS_KM)

    def _ends(self) -> tuple[Floats, Floats]:
        return self.frame.unit_vectors(*self.start), self.frame.unit_vectors(*self.end)

    def _axes(self) -> tuple[Floats, Floats, Floats]:
        """Return unit vectors to the start, along the line there, and to its right."""
        first, last = self._ends()
        ahead = last - (last @ first) * first
        ahead /= np.linalg.norm(ahead)
        return first, ahead, np.cross(ahead, first)

    def at(self, distance_km: npt.ArrayLike) -> tuple[Floats, Floats]:
        """Frame coordinates at distances from the start.

        Parameters
        ----------
        distance_km : array-like, shape (n,)
            Distances along the line.

        Returns
        -------
        x, y : array, shape (n,)
            Degrees (flat: km).
        """
        distance = np.asarray(distance_km, dtype=np.float64)
        if self.frame.is_flat:
            share = distance / self.length_km
            x, y = (a + share * (b - a) for a, b in zip(self.start, self.end, strict=True))
            return x, y
        first, ahead, _ = self._axes()
        angle = (distance / EARTH_RADIUS_KM)[..., None]
        return _degrees(np.cos(angle) * first + np.sin(angle) * ahead)

    def along(self, count: int) -> tuple[Floats, Floats]:
        """Frame coordinates of evenly spaced points from start to end."""
        return self.at(np.linspace(0.0, self.length_km, count))

    def project(self, x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Floats, Floats]:
        """Distance along and across the line of points of the frame.

        Parameters
        ----------
        x, y : array-like, shape (n,)
            Frame coordinates.

        Returns
        -------
        along_km, across_km : array, shape (n,)
            Distance from the start of the foot point, and from the line
            (positive to the right looking from start to end).
        """
        if self.frame.is_flat:
            ahead = (np.asarray(self.end) - self.start) / self.length_km
            offset = np.stack([np.asarray(x) - self.start[0], np.asarray(y) - self.start[1]])
            return ahead @ offset, np.array([ahead[1], -ahead[0]]) @ offset
        first, ahead, right = self._axes()
        points = self.frame.unit_vectors(x, y)
        along = np.arctan2(points @ ahead, points @ first)
        return along * EARTH_RADIUS_KM, np.arcsin(points @ right) * EARTH_RADIUS_KM


def default_lines(grid: BlockGrid) -> tuple[SectionLine, SectionLine]:
    """Two lines through the middle of a grid, along x and along y.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.

    Returns
    -------
    tuple of SectionLine
        A–A′ along x and B–B′ along y, from side to side.
    """
    x, y = (0.5 * (edges[0] + edges[-1]) for edges in (grid.x_edges, grid.y_edges))
    left, right = float(grid.x_edges[0]), float(grid.x_edges[-1])
    low, high = float(grid.y_edges[0]), float(grid.y_edges[-1])
    return (
        SectionLine(grid.frame, (left, float(y)), (right, float(y)), "A"),
        SectionLine(grid.frame, (float(x), low), (float(x), high), "B"),
    )


def _local(frame: Frame, point: tuple[float, float]) -> tuple[float, float]:
    if frame.is_flat:
        return float(point[0]), float(point[1])
    x, y = frame.local_coordinates(*point)
    return float(x), float(y)


def _travel(start_deg: tuple[float, float], angle_rad: float, arcs_rad: Floats) -> Floats:
    """Points at arcs from a start, in a direction clockwise from local y; shape (n, 2)."""
    x, y = np.deg2rad(start_deg)
    here = np.array([np.cos(y) * np.cos(x), np.cos(y) * np.sin(x), np.sin(y)])
    towards_x = np.array([-np.sin(x), np.cos(x), 0.0])
    towards_y = np.array([-np.sin(y) * np.cos(x), -np.sin(y) * np.sin(x), np.cos(y)])
    ahead = np.sin(angle_rad) * towards_x + np.cos(angle_rad) * towards_y
    arcs = arcs_rad[:, None]
    return np.column_stack(_degrees(np.cos(arcs) * here + np.sin(arcs) * ahead))


def _degrees(vectors: Floats) -> tuple[Floats, Floats]:
    x = np.arctan2(vectors[..., 1], vectors[..., 0])
    y = np.arctan2(vectors[..., 2], np.hypot(vectors[..., 0], vectors[..., 1]))
    return np.rad2deg(x), np.rad2deg(y)
