"""Figures of residuals: maps of station medians, misfit history, histograms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame
from rayloom.outputs.map_view import MapView, draw_scale_bar, map_view, unwrapped_deg
from rayloom.outputs.style import (
    INK,
    PAGE_WIDTH_IN,
    ColourScale,
    draw_colour_bar,
    late_red,
    look,
)

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from rayloom.residuals import Residuals
    from rayloom.survey import Stations

Floats = npt.NDArray[np.float64]

BEFORE_COLOUR: Final = "#b5b5b5"
AFTER_COLOUR: Final = "#0b5d96"


@dataclass(frozen=True)
class StationMedians:
    """Median residual of every station that has picks.

    Attributes
    ----------
    longitude_deg, latitude_deg : array, shape (n,)
        Where; the first epoch of the station.
    label : array of str, shape (n,)
        ``NET.STA``.
    count : array of int, shape (n,)
        Finite residuals.
    median_s : array, shape (n,)
        Their median.
    """

    longitude_deg: Floats
    latitude_deg: Floats
    label: npt.NDArray[np.str_]
    count: npt.NDArray[np.int64]
    median_s: Floats


def station_medians(
    stations: Stations, station_index: npt.NDArray[np.int64], residual_s: Floats
) -> StationMedians:
    """Take the median residual of each station.

    Parameters
    ----------
    stations : Stations
        All stations; epochs of one station count as one.
    station_index : array of int, shape (k,)
        Station of each residual.
    residual_s : array, shape (k,)
        Residuals, NaN where there is none.

    Returns
    -------
    StationMedians

    Raises
    ------
    InputError
        There is no finite residual.
    """
    finite = np.isfinite(residual_s)
    if not finite.any():
        raise InputError("no finite residual to draw", where="residual_s")
    station = station_index[finite]
    labels, first, code = np.unique(
        np.asarray(stations.labels)[station], return_index=True, return_inverse=True
    )
    order = np.argsort(code, kind="stable")
    count = np.bincount(code, minlength=labels.size)
    groups = np.split(residual_s[finite][order], np.cumsum(count)[:-1])
    return StationMedians(
        longitude_deg=stations.longitude_deg[station[first]],
        latitude_deg=stations.latitude_deg[station[first]],
        label=labels,
        count=count.astype(np.int64),
        median_s=np.array([np.median(group) for group in groups]),
    )


def figure_station_residuals(
    data: Residuals, *, residual_after_s: Floats | None = None, limit_s: float | None = None
) -> Figure:
    """Draw maps of the median residual of each station, late ones red.

    Medians are drawn because single gross errors would move means.

    Parameters
    ----------
    data : Residuals
        Residuals; those relative to their event's median are drawn.
    residual_after_s : array, shape (k,), optional
        Residuals after an inversion, for a second map on the same scale.
    limit_s : float, optional
        End of the symmetric colour scale; when None, what 98 % of
        the medians before stay below, rounded up.

    Returns
    -------
    Figure
        One PathCollection per map holds the medians.

    Raises
    ------
    InputError
        There is no finite residual.
    """
    before = station_medians(data.stations, data.station_index, data.relative_residual_s)
    maps = [("Before inversion", before)]
    if residual_after_s is not None:
        after = station_medians(data.stations, data.station_index, residual_after_s)
        maps.append(("After inversion", after))
    typical = float(np.quantile(np.abs(before.median_s), 0.98))
    limit = limit_s or max(0.1, float(np.ceil(20.0 * typical) / 20.0))
    scale = ColourScale(
        "median residual of the station, relative to its events (s)",
        -limit,
        limit,
        late_red(),
        ("early", "late"),
    )
    view = map_view(_network_grid(before))
    with look():
        figure, panels, bar = _map_sheet(view, len(maps))
        for number, (axes, (title, medians)) in enumerate(zip(panels, maps, strict=True)):
            view.open(axes, left=number == 0, outline=False)
            _draw_medians(axes, view, medians, scale)
            axes.set_title(title, pad=3)
        shown = view.frame.local_coordinates(before.longitude_deg, before.latitude_deg)
        draw_scale_bar(panels[0], view, avoid=view.place(*shown))
        draw_colour_bar(bar, scale)
        _size_legend(figure, before.count)
    return figure


def _network_grid(medians: StationMedians) -> BlockGrid:
    """One block around the network, to lay its map on paper."""
    middle = float(medians.longitude_deg[0])
    longitude = unwrapped_deg(medians.longitude_deg, middle)
    latitude = medians.latitude_deg
    frame = Frame(
        longitude=0.5 * float(longitude.min() + longitude.max()),
        latitude=0.5 * float(latitude.min() + latitude.max()),
    )
    x, y = frame.local_coordinates(longitude, latitude)
    half_x, half_y = (max(0.2, 1.08 * float(np.abs(side).max())) for side in (x, y))
    half_x, half_y = min(half_x, 170.0), min(half_y, 85.0)
    return BlockGrid(frame, [-half_x, half_x], [-half_y, half_y], [0.0, 1.0])


def _map_sheet(view: MapView, count: int) -> tuple[Figure, list[Axes], Axes]:
    from matplotlib.figure import Figure

    left, gap, right, head, foot = 0.52, 0.15, 0.12, 0.26, 0.92
    width = min((PAGE_WIDTH_IN - left - right - gap) / 2, 5.0 / view.height_over_width)
    tall = width * view.height_over_width
    page_width = max(6.3, left + count * width + (count - 1) * gap + right)
    page_height = head + tall + foot
    figure = Figure(figsize=(page_width, page_height))
    panels = [
        figure.add_axes(
            (
                (left + number * (width + gap)) / page_width,
                foot / page_height,
                width / page_width,
                tall / page_height,
            )
        )
        for number in range(count)
    ]
    bar = figure.add_axes(
        (left / page_width, 0.36 / page_height, 2.9 / page_width, 0.1 / page_height)
    )
    return figure, panels, bar


def _marker_area(count: npt.ArrayLike, most: int) -> Floats:
    return 6.0 + 40.0 * np.asarray(count, dtype=np.float64) / most


def _draw_medians(axes: Axes, view: MapView, medians: StationMedians, scale: ColourScale) -> None:
    x, y = view.frame.local_coordinates(medians.longitude_deg, medians.latitude_deg)
    order = np.argsort(np.abs(medians.median_s))
    across, up = view.place(x, y)
    axes.scatter(
        across[order],
        up[order],
        c=medians.median_s[order],
        s=_marker_area(medians.count, int(medians.count.max()))[order],
        cmap=scale.colours,
        vmin=scale.lowest,
        vmax=scale.highest,
        edgecolors=INK,
        linewidths=0.35,
        zorder=4,
    )


def _size_legend(figure: Figure, count: npt.NDArray[np.int64]) -> None:
    from matplotlib.lines import Line2D

    most = int(count.max())
    shown = sorted({1, max(1, most // 2), most})
    marks = [
        Line2D(
            [],
            [],
            linestyle="",
            marker="o",
            markersize=float(np.sqrt(_marker_area(value, most))),
            markerfacecolor="white",
            markeredgecolor=INK,
            markeredgewidth=0.4,
            label=f"{value} pick{'s' if value > 1 else ''}",
        )
        for value in shown
    ]
    width, height = figure.get_size_inches()
    figure.legend(
        handles=marks, loc="center left", bbox_to_anchor=(3.75 / width, 0.4 / height), ncols=3,
        columnspacing=1.0, handletextpad=0.3, borderpad=0,
    )  # fmt: skip


def figure_misfit(
    history: pd.DataFrame,
    *,
    before_s: Floats,
    after_s: Floats,
    suspected_outlier: npt.NDArray[np.bool_] | None = None,
) -> Figure:
    """Draw the misfit over the iterations and the residuals before and after.

    Parameters
    ----------
    history : DataFrame
        Columns ``iteration``, ``rms_s`` and, if there, ``rms_weighted_s``.
    before_s, after_s : array, shape (k,)
        Residuals relative to their events, before and after.
    suspected_outlier : array of bool, shape (k,), optional
        Picks left out of the numbers in the legend (they stay in the bars).

    Returns
    -------
    Figure

    Raises
    ------
    InputError
        There is no finite residual.
    """
    from matplotlib.figure import Figure

    kept = np.isfinite(before_s) & np.isfinite(after_s)
    if not kept.any():
        raise InputError("no finite residual to draw", where="residuals")
    trusted = kept if suspected_outlier is None else kept & ~suspected_outlier
    with look():
        figure = Figure(figsize=(PAGE_WIDTH_IN, 2.5))
        course = figure.add_axes((0.075, 0.165, 0.36, 0.74))
        bars = figure.add_axes((0.55, 0.165, 0.435, 0.74))
        _draw_course(course, history)
        _draw_histogram(bars, before_s, after_s, kept, trusted)
    return figure


def _draw_course(axes: Axes, history: pd.DataFrame) -> None:
    from matplotlib.ticker import MaxNLocator

    iteration = history["iteration"].to_numpy()
    looks: Sequence[tuple[str, str, dict[str, Any]]] = (
        ("rms_s", "all picks", {"color": "0.45", "marker": "s", "linestyle": "--"}),
        ("rms_weighted_s", "robust weights", {"color": AFTER_COLOUR, "marker": "o"}),
    )
    for column, label, line in looks:
        if column in history:
            axes.plot(
                iteration, history[column], label=label, markersize=3.5, linewidth=1.0, **line
            )
    axes.set_ylim(bottom=0.0)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    axes.set_xlabel("Iteration")
    axes.set_ylabel("RMS residual (s)")
    axes.set_title("(a)", loc="left", fontweight="bold", pad=4)
    axes.spines[["top", "right"]].set_visible(False)
    axes.legend(loc="best")


def _draw_histogram(
    axes: Axes,
    before_s: Floats,
    after_s: Floats,
    kept: npt.NDArray[np.bool_],
    trusted: npt.NDArray[np.bool_],
) -> None:
    reach = max(0.1, float(np.quantile(np.abs(before_s[kept]), 0.985)))
    reach = float(np.ceil(5.0 * reach) / 5.0)
    bins = np.linspace(-reach, reach, 61).tolist()
    before, after = before_s[kept], after_s[kept]
    rms = [float(np.sqrt(np.mean(values[trusted] ** 2))) for values in (before_s, after_s)]
    axes.hist(before, bins, color=BEFORE_COLOUR, label=f"before,\nRMS {rms[0]:.3f} s")
    axes.hist(
        after,
        bins,
        histtype="step",
        color=AFTER_COLOUR,
        linewidth=1.2,
        label=f"after,\nRMS {rms[1]:.3f} s",
    )
    axes.axvline(0.0, color=INK, linewidth=0.4)
    axes.set_xlim(-reach, reach)
    axes.set_xlabel("Residual relative to the event (s), late positive")
    axes.set_ylabel("Picks per bin")
    axes.spines[["top", "right"]].set_visible(False)
    axes.set_title("(b)", loc="left", fontweight="bold", pad=4)
    axes.set_ylim(0.0, 1.12 * axes.get_ylim()[1])
    axes.text(
        1.0,
        0.97,
        _histogram_note(before, after, reach, kept, trusted),
        transform=axes.transAxes,
        ha="right",
        va="top",
        fontsize=6,
    )
    axes.legend(loc="upper left", borderpad=0, handlelength=1.4)


def _histogram_note(
    before: Floats,
    after: Floats,
    reach: float,
    kept: npt.NDArray[np.bool_],
    trusted: npt.NDArray[np.bool_],
) -> str:
    beyond = int(np.sum(np.abs(before) > reach)), int(np.sum(np.abs(after) > reach))
    remarks = []
    left_out = int(kept.sum() - trusted.sum())
    if left_out:
        plural = "s" if left_out > 1 else ""
        remarks.append(f"RMS without\n{left_out} suspected\noutlier{plural}")
    if any(beyond):
        remarks.append(f"beyond the axis:\n{beyond[0]} before,\n{beyond[1]} after")
    return "\n".join(remarks)
