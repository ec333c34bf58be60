"""How the horizontal plane of a model is laid on paper.

Three ways, chosen by :func:`map_view`:

- geographic: longitude and latitude, aspect 1/cos(latitude of the middle);
- turned: the frame's own degrees of arc with a net of meridians and parallels,
  where the scale of a geographic map would vary too much (high latitude, poles);
- flat: km.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from rayloom.model import BlockGrid, Frame
from rayloom.outputs.style import INK
from rayloom.survey import Stations
from rayloom.units import KM_PER_DEGREE

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Floats = npt.NDArray[np.float64]

MOST_SCALE_CHANGE: Final = 1.5
"""Largest ratio of the east-west scales at the two ends of a geographic map."""


class MapView(ABC):
    """The plane of a model on paper.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.

    Attributes
    ----------
    corners : tuple of array, shape (nx + 1, ny + 1)
        Paper coordinates of the block corners.
    limits : tuple of float
        Left, right, bottom and top of the map.
    aspect : float
        Length on paper of a vertical unit over that of a horizontal unit.
    km_per_unit : float
        Kilometres per horizontal unit in the middle of the map.
    """

    def __init__(self, grid: BlockGrid) -> None:
        self.frame: Frame = grid.frame
        mesh = np.meshgrid(grid.x_edges, grid.y_edges, indexing="ij")
        self.corners = self.place(mesh[0], mesh[1])
        across, up = self.corners
        pad_x, pad_y = 0.02 * np.ptp(across), 0.02 * np.ptp(up)
        self.limits = (
            float(across.min() - pad_x),
            float(across.max() + pad_x),
            float(up.min() - pad_y),
            float(up.max() + pad_y),
        )
        self.aspect = 1.0
        self.km_per_unit = 1.0

    @abstractmethod
    def place(self, x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Floats, Floats]:
        """Turn frame coordinates into paper coordinates."""

    @abstractmethod
    def dress(self, axes: Axes, *, most_ticks: int) -> None:
        """Add labelled ticks, and the net of meridians and parallels where there is one."""

    @property
    def axis_titles(self) -> tuple[str, str]:
        """Titles of the horizontal and the vertical axis, empty for degrees."""
        return "", ""

    @property
    def height_over_width(self) -> float:
        """Height of the map over its width on paper."""
        left, right, bottom, top = self.limits
        return (top - bottom) * self.aspect / (right - left)

    @property
    def outline(self) -> tuple[Floats, Floats]:
        """Paper coordinates of the grid's outline, closed."""
        across, up = (
            np.concatenate([side[:, 0], side[-1], side[::-1, -1], side[0, ::-1]])
            for side in self.corners
        )
        return across, up

    def open(
        self,
        axes: Axes,
        *,
        left: bool = True,
        bottom: bool = True,
        most_ticks: int = 6,
        outline: bool = True,
    ) -> None:
        """Set limits and aspect of axes and dress them.

        Parameters
        ----------
        axes : Axes
            Where to draw.
        left, bottom : bool
            Whether that side carries labels.
        most_ticks : int
            About how many ticks an axis may have.
        outline : bool
            Whether to draw the outline of the grid.
        """
        axes.set_xlim(self.limits[0], self.limits[1])
        axes.set_ylim(self.limits[2], self.limits[3])
        axes.set_aspect(self.aspect)
        self.dress(axes, most_ticks=most_ticks)
        axes.tick_params(labelleft=left, labelbottom=bottom)
        if outline:
            axes.plot(*self.outline, color=INK, linewidth=0.5, zorder=2.5)


class _GeographicView(MapView):
    def __init__(self, grid: BlockGrid) -> None:
        super().__init__(grid)
        middle = np.deg2rad(0.5 * (self.limits[2] + self.limits[3]))
        self.aspect = 1.0 / float(np.cos(middle))
        self.km_per_unit = KM_PER_DEGREE * float(np.cos(middle))

    def place(self, x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Floats, Floats]:
        longitude, latitude = self.frame.geographic_coordinates(x, y)
        return unwrapped_deg(longitude, self.frame.longitude_deg), latitude

    def dress(self, axes: Axes, *, most_ticks: int) -> None:
        for axis, low, high, hands in (
            (axes.xaxis, self.limits[0], self.limits[1], "EW"),
            (axes.yaxis, self.limits[2], self.limits[3], "NS"),
        ):
            ticks = _round_values(low, high, most=most_ticks)
            axis.set_ticks(ticks, [degree_label(value, hands) for value in ticks])


class _TurnedView(MapView):
    def __init__(self, grid: BlockGrid) -> None:
        super().__init__(grid)
        middle = np.cos(np.deg2rad(0.5 * (self.limits[2] + self.limits[3])))
        self.aspect = 1.0 / float(middle)
        self.km_per_unit = KM_PER_DEGREE * float(middle)

    def place(self, x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Floats, Floats]:
        across, up = np.broadcast_arrays(x, y)
        return across.astype(np.float64), up.astype(np.float64)

    def _sides(self) -> tuple[Floats, Floats, Floats, Floats]:
        """Longitudes along the lower side and latitudes along the left, with positions."""
        across = np.linspace(self.limits[0], self.limits[1], 400)
        up = np.linspace(self.limits[2], self.limits[3], 400)
        longitude, _ = self.frame.geographic_coordinates(across, self.limits[2])
        _, latitude = self.frame.geographic_coordinates(self.limits[0], up)
        return across, np.rad2deg(np.unwrap(np.deg2rad(longitude))), up, latitude

    def dress(self, axes: Axes, *, most_ticks: int) -> None:
        across, longitude, up, latitude = self._sides()
        mesh = np.meshgrid(across[::8], up[::8])
        all_longitudes, all_latitudes = self.frame.geographic_coordinates(*mesh)
        all_longitudes = unwrapped_deg(all_longitudes, self.frame.longitude_deg)
        meridians = _round_values(
            all_longitudes.min(), all_longitudes.max(), most=most_ticks + 2, in_degrees=True
        )
        parallels = _round_values(all_latitudes.min(), all_latitudes.max(), most=most_ticks)
        for value in meridians:
            net = np.linspace(all_latitudes.min() - 5.0, min(89.5, all_latitudes.max() + 5.0), 90)
            self._net_line(axes, np.full_like(net, value), net)
        for value in parallels:
            net = np.linspace(all_longitudes.min() - 10.0, all_longitudes.max() + 10.0, 180)
            self._net_line(axes, net, np.full_like(net, value))
        for axis, position, values, marks, hands in (
            (axes.xaxis, across, longitude, meridians, "EW"),
            (axes.yaxis, up, latitude, parallels, "NS"),
        ):
            ticks, labels = _crossings(position, values, marks, hands)
            axis.set_ticks(ticks, labels)

    def _net_line(self, axes: Axes, longitude: Floats, latitude: Floats) -> None:
        x, y = self.frame.local_coordinates(longitude, np.clip(latitude, -89.9, 89.9))
        far = (np.abs(x) > 90.0) | (np.abs(y) > 85.0)
        axes.plot(
            np.where(far, np.nan, x), y, color="0.35", linewidth=0.35, linestyle=":", zorder=2.4
        )


class _FlatView(MapView):
    def place(self, x: npt.ArrayLike, y: npt.ArrayLike) -> tuple[Floats, Floats]:
        across, up = np.broadcast_arrays(x, y)
        return across.astype(np.float64), up.astype(np.float64)

    def dress(self, axes: Axes, *, most_ticks: int) -> None:
        axes.set_xticks(_round_values(*self.limits[:2], most=most_ticks))
        axes.set_yticks(_round_values(*self.limits[2:], most=most_ticks))

    @property
    def axis_titles(self) -> tuple[str, str]:
        return "x (km)", "y (km)"


def map_view(grid: BlockGrid) -> MapView:
    """Choose how to lay a grid on paper.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.

    Returns
    -------
    MapView
        Flat for flat frames; turned where the east-west scale of a geographic
        map would change by more than `MOST_SCALE_CHANGE` or a pole lies inside;
        geographic otherwise.
    """
    if grid.frame.is_flat:
        return _FlatView(grid)
    mesh = np.meshgrid(grid.x_edges, grid.y_edges, indexing="ij")
    longitude, latitude = grid.frame.geographic_coordinates(mesh[0], mesh[1])
    scale = np.cos(np.deg2rad(latitude))
    spread = np.ptp(unwrapped_deg(longitude, grid.frame.longitude_deg))
    if scale.max() > MOST_SCALE_CHANGE * scale.min() or spread > 170.0:
        return _TurnedView(grid)
    return _GeographicView(grid)


def places(frame: Frame, stations: Stations | npt.ArrayLike) -> Floats:
    """Where stations lie in a frame.

    Parameters
    ----------
    frame : Frame
        The frame.
    stations : Stations or array-like, shape (n, 3)
        Stations, or points x, y, depth_km in the frame (the only form that a
        flat frame takes).

    Returns
    -------
    array, shape (n, 3)
        x, y, depth_km.

    Raises
    ------
    InputError
        Stations with longitudes and a flat frame.
    """
    if isinstance(stations, Stations):
        x, y = frame.local_coordinates(stations.longitude_deg, stations.latitude_deg)
        return np.column_stack([x, y, stations.depth_km])
    return np.asarray(stations, dtype=np.float64).reshape(-1, 3)


def unwrapped_deg(longitude_deg: npt.ArrayLike, centre_deg: float) -> Floats:
    """Longitudes within half a turn of a centre, so that maps cross the antimeridian."""
    turned = np.mod(np.asarray(longitude_deg, dtype=np.float64) - centre_deg + 180.0, 360.0)
    return turned - 180.0 + centre_deg


def degree_label(value_deg: float, hands: str) -> str:
    """Write an angle with its hemisphere.

    Parameters
    ----------
    value_deg : float
        Longitude of any turn, or latitude.
    hands : str
        The letters of the positive and the negative hemisphere, ``EW`` or ``NS``.

    Returns
    -------
    str
        For instance ``31.5°S``.
    """
    value = float(unwrapped_deg(value_deg, 0.0)) if hands == "EW" else value_deg
    value = round(value, 6)
    if value == 0 or abs(value) == 180:
        return f"{abs(value):g}°"
    return f"{abs(value):g}°{hands[0] if value > 0 else hands[1]}"


def _round_values(low: float, high: float, *, most: int, in_degrees: bool = False) -> Floats:
    """Round numbers inside an interval, not close to its ends."""
    from matplotlib.ticker import MaxNLocator

    if in_degrees and high - low > 50.0:
        step = next(step for step in (10, 15, 20, 30, 45, 60, 90) if (high - low) / step <= most)
        values = np.arange(np.ceil(low / step), high / step) * step
    else:
        values = np.asarray(MaxNLocator(most, steps=[1, 2, 5, 10]).tick_values(low, high))
    margin = 0.06 * (high - low)
    return values[(values >= low + margin) & (values <= high - margin)]


def _crossings(
    position: Floats, values: Floats, marks: Floats, hands: str
) -> tuple[list[float], list[str]]:
    """Where a side crosses the marked values, and their labels."""
    ticks, labels = [], []
    for mark in marks:
        nearest = np.round((values.mean() - mark) / 360.0) * 360.0 if hands == "EW" else 0.0
        offset = values - mark - nearest
        for index in np.flatnonzero(np.diff(np.sign(offset)) != 0):
            share = offset[index] / (offset[index] - offset[index + 1])
            ticks.append(float(position[index] + share * (position[index + 1] - position[index])))
            labels.append(degree_label(float(mark), hands))
    return ticks, labels


def draw_line_ends(axes: Axes, view: MapView, across: Floats, up: Floats, name: str) -> None:
    """Name the ends of a line just beyond them, or inside where they reach the rim.

    Parameters
    ----------
    axes : Axes
        The map.
    view : MapView
        Its plane.
    across, up : array, shape (n,)
        Paper coordinates of the line.
    name : str
        Name of the start; that of the end carries a prime.
    """
    from matplotlib.patheffects import withStroke

    low, high = np.asarray(view.limits[0::2]), np.asarray(view.limits[1::2])
    margin = 0.06 * (high - low)
    ends = np.column_stack([across, up])[[0, -1]]
    outward = (ends - ends[::-1]) * [1.0, view.aspect]
    outward /= np.linalg.norm(outward, axis=1, keepdims=True)
    for end, direction, label in zip(ends, outward, (name, f"{name}′"), strict=True):
        place = np.clip(end, low + margin, high - margin)
        offset = direction * (6.0 if np.array_equal(place, end) else 0.0)
        axes.annotate(
            label,
            tuple(place),
            xytext=tuple(offset),
            textcoords="offset points",
            ha="center",
            va="center",
            fontsize=7,
            fontweight="bold",
            path_effects=[withStroke(linewidth=1.8, foreground="white")],
            zorder=6,
        )


def draw_scale_bar(
    axes: Axes, view: MapView, *, avoid: tuple[Floats, Floats] | None = None
) -> None:
    """Draw a bar of a round number of kilometres in a corner.

    Parameters
    ----------
    axes : Axes
        The map.
    view : MapView
        Its plane.
    avoid : pair of array, shape (n,), optional
        Paper coordinates of points; the corner with the fewest is taken, the
        lower left one in doubt.
    """
    from matplotlib.patheffects import withStroke

    left, right, bottom, top = view.limits
    wanted = 0.28 * (right - left) * view.km_per_unit
    power = 10.0 ** np.floor(np.log10(wanted))
    length_km = max(step * power for step in (1.0, 2.0, 5.0) if step * power <= wanted)
    length = length_km / view.km_per_unit
    share_x, share_y = _free_corner(view, avoid)
    start = left + 0.05 * (right - left) + share_x * (0.9 * (right - left) - length)
    height = bottom + (0.06 + 0.82 * share_y) * (top - bottom)
    axes.plot(
        [start, start + length],
        [height, height],
        color=INK,
        linewidth=1.4,
        solid_capstyle="butt",
        path_effects=[withStroke(linewidth=3.2, foreground="white")],
        zorder=6,
    )
    axes.annotate(
        f"{length_km:g} km",
        (start + 0.5 * length, height),
        xytext=(0, 2.5),
        textcoords="offset points",
        ha="center",
        va="bottom",
        fontsize=6,
        path_effects=[withStroke(linewidth=2.2, foreground="white")],
        zorder=6,
    )


def _free_corner(view: MapView, avoid: tuple[Floats, Floats] | None) -> tuple[int, int]:
    """Return the emptiest corner: 0 or 1 from the left, 0 or 1 from below."""
    if avoid is None:
        return 0, 0
    left, right, bottom, top = view.limits
    across, up = (avoid[0] - left) / (right - left), (avoid[1] - bottom) / (top - bottom)

    def crowd(corner: tuple[int, int]) -> int:
        near_x, near_y = np.abs(across - corner[0]) < 0.36, np.abs(up - corner[1]) < 0.16
        return int(np.sum(near_x & near_y))

    return min([(0, 0), (1, 0), (0, 1), (1, 1)], key=crowd)
