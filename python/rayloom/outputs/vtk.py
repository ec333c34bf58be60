"""Models, rays, stations and events as files for three-dimensional viewers.

All share one Cartesian system: kilometres east, north and up of the centre of
the model's frame at sea level (a flat frame: x, y and minus depth). Blocks
keep their true curved shape, so the Earth's surface bends down away from the
centre.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from rayloom.errors import InputError
from rayloom.model import BlockGrid, Frame, SlownessModel
from rayloom.outputs.vtk_xml import write_poly_data, write_structured_grid

if TYPE_CHECKING:
    from rayloom.forward import Rays
    from rayloom.survey import Events, Stations

EVENT_RING = 1.15
"""Distance of event marks from the centre, in units of the farthest block corner."""


def _description(frame: Frame) -> dict[str, npt.NDArray[Any]]:
    if frame.is_flat:
        return {"coordinates": np.array(["km along x, along y, up from sea level"])}
    text = (
        "km east, north, up of the point at sea level at longitude "
        f"{frame.longitude_deg:g}, latitude {frame.latitude_deg:g}"
    )
    return {"coordinates": np.array([text])}


def _enu_km(
    frame: Frame,
    x: npt.ArrayLike,
    y: npt.ArrayLike,
    depth_km: npt.ArrayLike,
) -> npt.NDArray[np.float64]:
    """Frame coordinates (broadcast together) to km east, north, up; shape (..., 3)."""
    points = np.stack(np.broadcast_arrays(x, y, depth_km), axis=-1).astype(np.float64)
    return frame.enu_km(points.reshape(-1, 3)).reshape(points.shape)


def write_model_vts(path: str | Path, model: SlownessModel) -> None:
    """Write a model as a structured grid of curved blocks with cell data.

    Cells run along x first, then y, then **upwards**, which makes every cell a
    right-handed hexahedron; the cell datum ``block`` is the block's number in
    the model (C order of x, y, depth, the column of the sensitivity matrix).
    Cell data: ``vp`` (or ``vs``) and ``vp_reference`` in km/s, ``dvp`` in
    percent, every further field of the model under its own name, and
    ``depth_km``, the depth of the block's middle.

    Parameters
    ----------
    path : str or Path
        The file, ending in ``.vts``.
    model : SlownessModel
        The model.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    grid = model.grid
    points = _enu_km(
        grid.frame,
        grid.x_edges[:, None, None],
        grid.y_edges[None, :, None],
        grid.depth_edges_km[::-1][None, None, :],
    )
    cells = {name: field[:, :, ::-1] for name, field in model_fields(model).items()}
    write_structured_grid(path, points, cells=cells, fields=_description(grid.frame))


def model_fields(model: SlownessModel) -> dict[str, npt.NDArray[Any]]:
    """Gather everything a model knows per block, under the names of the files.

    Parameters
    ----------
    model : SlownessModel
        The model.

    Returns
    -------
    dict of str to array, shape (nx, ny, nz)
        ``v?`` and ``v?_reference`` (km/s), ``dv?`` (percent), further fields,
        ``depth_km`` and ``block``.
    """
    letter = model.wave.lower()
    grid = model.grid
    fields: dict[str, npt.NDArray[Any]] = {f"v{letter}": model.velocity_km_s}
    fields[f"v{letter}_reference"] = model.reference_velocity_km_s
    fields[f"dv{letter}"] = model.perturbation_percent
    fields.update(model.fields)
    fields["depth_km"] = np.broadcast_to(grid.depth_centres_km, grid.shape)
    fields["block"] = np.arange(grid.block_count, dtype=np.int64).reshape(grid.shape)
    return fields


def write_rays_vtp(
    path: str | Path,
    rays: Rays,
    *,
    rows: npt.ArrayLike | None = None,
    values: Mapping[str, npt.NDArray[Any]] | None = None,
) -> None:
    """Write rays as poly-lines from their entry point to their station.

    Rays that could not be traced are left out. Cell data: ``row`` (the row of
    the residual table), ``time_s`` from event to station and ``outside_time_s``
    down to the entry point, and those of `values`.

    Parameters
    ----------
    path : str or Path
        The file, ending in ``.vtp``.
    rays : Rays
        k rays.
    rows : array-like of bool (k,) or int (m,), optional
        The rays to write; all when None.
    values : mapping of name to array, shape (k,), optional
        Further values per ray, for instance ``residual_after_s``.

    Raises
    ------
    InputError
        A further value does not have one entry per ray.
    FileAccessError
        The file cannot be written.
    """
    count = len(rays.time_s)
    for name, array in (values or {}).items():
        if np.shape(array) != (count,):
            raise InputError(
                f"{name!r} has shape {np.shape(array)}; expected one value per ray, ({count},)"
            )
    chosen = np.arange(count) if rows is None else np.arange(count)[np.asarray(rows)]
    chosen = chosen[rays.traced[chosen]]
    begins = rays.point_offsets[chosen]
    lengths = rays.point_offsets[chosen + 1] - begins
    ends = np.cumsum(lengths)
    index = np.arange(lengths.sum()) + np.repeat(begins - (ends - lengths), lengths)
    frame = rays.grid.frame
    points = frame.enu_km(rays.all_points[index]).astype(np.float32)
    cells: dict[str, npt.NDArray[Any]] = {
        "row": chosen,
        "time_s": rays.time_s[chosen],
        "outside_time_s": rays.outside_time_s[chosen],
        **{name: array[chosen] for name, array in (values or {}).items()},
    }
    write_poly_data(
        path, points, cell_ends=ends, as_lines=True, cells=cells, fields=_description(frame)
    )


def write_points(
    path: str | Path,
    points: npt.ArrayLike,
    frame: Frame,
    *,
    values: Mapping[str, npt.NDArray[Any]] | None = None,
) -> None:
    """Write points with values.

    Parameters
    ----------
    path : str or Path
        The file, ending in ``.vtp``.
    points : array-like, shape (n, 3)
        x, y, depth_km in the frame.
    frame : Frame
        The frame of the coordinates.
    values : mapping of name to array, shape (n,), optional
        Numbers or texts per point.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    places = frame.enu_km(np.asarray(points, dtype=np.float64).reshape(-1, 3))
    write_poly_data(
        path,
        places,
        cell_ends=np.arange(1, len(places) + 1, dtype=np.int64),
        as_lines=False,
        cells=values or {},
        fields=_description(frame),
    )


def write_stations_vtp(
    path: str | Path,
    stations: Stations,
    frame: Frame,
    *,
    values: Mapping[str, npt.NDArray[Any]] | None = None,
) -> None:
    """Write stations as points at their true elevation.

    Parameters
    ----------
    path : str or Path
        The file, ending in ``.vtp``.
    stations : Stations
        n stations.
    frame : Frame
        The model's frame.
    values : mapping of name to array, shape (n,), optional
        Further values per station, for instance ``station_term_s``.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    x, y = frame.local_coordinates(stations.longitude_deg, stations.latitude_deg)
    known: dict[str, npt.NDArray[Any]] = {
        "label": np.asarray(stations.labels),
        "longitude_deg": stations.longitude_deg,
        "latitude_deg": stations.latitude_deg,
        "elevation_m": stations.elevation_m,
    }
    points = np.column_stack([x, y, stations.depth_km])
    write_points(path, points, frame, values={**known, **(values or {})})


def write_events_vtp(path: str | Path, events: Events, grid: BlockGrid) -> None:
    """Write events as marks on a ring around the model.

    Distant events lie thousands of kilometres away, where they would shrink
    the model to a dot. Each is therefore marked at sea level in its own
    direction from the centre, at `EVENT_RING` times the arc to the farthest
    block corner (or at its true distance where that is less); its true
    position, its distance and its azimuth are cell data. With a flat frame
    events stand at their own x, y and depth.

    Parameters
    ----------
    path : str or Path
        The file, ending in ``.vtp``.
    events : Events
        n events.
    grid : BlockGrid
        The model's blocks.

    Raises
    ------
    FileAccessError
        The file cannot be written.
    """
    frame = grid.frame
    x, y = frame.local_coordinates(events.longitude_deg, events.latitude_deg)
    values: dict[str, npt.NDArray[Any]] = {
        "label": np.asarray(events.event),
        "longitude_deg": events.longitude_deg,
        "latitude_deg": events.latitude_deg,
        "depth_km": events.depth_km,
        "magnitude": events.magnitude,
    }
    depth = events.depth_km
    if not frame.is_flat:
        distance, azimuth = _polar(x, y)
        corners = _polar(*np.meshgrid(grid.x_edges[[0, -1]], grid.y_edges[[0, -1]]))[0]
        x, y = _from_polar(np.minimum(distance, EVENT_RING * corners.max()), azimuth)
        values["distance_deg"] = np.rad2deg(distance)
        values["azimuth_deg"] = np.mod(np.rad2deg(azimuth) + frame.azimuth_deg, 360.0)
        depth = np.zeros_like(x)
    write_points(path, np.column_stack([x, y, depth]), frame, values=values)


def _polar(
    x_deg: npt.NDArray[np.float64], y_deg: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Arc from the centre and angle clockwise from the local y axis, both in radians."""
    x, y = np.deg2rad(x_deg), np.deg2rad(y_deg)
    along, right, ahead = np.cos(y) * np.cos(x), np.cos(y) * np.sin(x), np.sin(y)
    return np.arctan2(np.hypot(right, ahead), along), np.arctan2(right, ahead)


def _from_polar(
    distance_rad: npt.NDArray[np.float64], angle_rad: npt.NDArray[np.float64]
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
    """Undo `_polar`: local coordinates in degrees."""
    x = np.arctan2(np.sin(distance_rad) * np.sin(angle_rad), np.cos(distance_rad))
    y = np.arcsin(np.sin(distance_rad) * np.cos(angle_rad))
    return np.rad2deg(x), np.rad2deg(y)
