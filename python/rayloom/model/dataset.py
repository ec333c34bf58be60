"""The model's xarray face, described after the CF-1.8 conventions.

Dimensions are (depth, y, x). On the sphere x and y are rotated longitude and
latitude under a rotated-pole grid mapping, with two-dimensional geographic
longitude and latitude beside them; in a flat frame they are km. Block edges are
the bounds of the axes. The slowness is stored beside the velocity, so that a
model read back is the same bit for bit.

References
----------
Eaton, B. et al. (2020). NetCDF Climate and Forecast (CF) Metadata Conventions,
version 1.8, chapters 4, 5.6, 7.1 and appendix F.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, Final

import numpy as np
from numpy.typing import NDArray

from rayloom import __version__
from rayloom.errors import InputError
from rayloom.model.fields import RESERVED_NAMES, FieldDescription, describe_field
from rayloom.model.frame import Frame
from rayloom.model.grid import BlockGrid
from rayloom.model.slowness import SlownessModel
from rayloom.units import EARTH_RADIUS_KM, M_PER_KM

if TYPE_CHECKING:
    import xarray

Floats = NDArray[np.float64]

DIMENSIONS: Final = ("depth", "y", "x")

AGREEMENT: Final = 1e-9
"""Largest relative difference between a file's velocity and 1 / slowness."""


def dataset_of(model: SlownessModel) -> xarray.Dataset:
    """Describe a model as an xarray dataset.

    Parameters
    ----------
    model : SlownessModel
        The model.

    Returns
    -------
    xarray.Dataset
        Variables ``vp``, ``vp_reference``, ``dvp`` (``vs`` … for S), ``slowness``,
        ``slowness_reference`` and the model's fields, each of shape (nz, ny, nx).
    """
    return block_dataset(
        model.grid,
        _block_variables(model),
        title=f"Seismic {model.wave}-wave velocity of the Earth in blocks",
        wave=model.wave,
    )


def block_dataset(
    grid: BlockGrid, blocks: Mapping[str, tuple[Floats, FieldDescription]], **attributes: str
) -> xarray.Dataset:
    """Describe quantities per block as an xarray dataset.

    Parameters
    ----------
    grid : BlockGrid
        The blocks.
    blocks : mapping of str to (ndarray of shape (nx, ny, nz), FieldDescription)
        The quantities by name.
    **attributes : str
        What else the dataset says of itself.

    Returns
    -------
    xarray.Dataset
        With axes, bounds and geographic coordinates.
    """
    import xarray

    placing = {} if grid.frame.is_flat else {"grid_mapping": "rotated_pole"}
    variables: dict[str, Any] = {
        name: (
            DIMENSIONS,
            values.transpose(2, 1, 0),
            {"units": description.units, "long_name": description.long_name, **placing},
        )
        for name, (values, description) in blocks.items()
    }
    if not grid.frame.is_flat:
        variables["rotated_pole"] = ((), np.int32(0), _rotated_pole(grid.frame))
    return xarray.Dataset(
        {**variables, **_bounds(grid)},
        coords={**_axes(grid), **_geography(grid)},
        attrs={
            "Conventions": "CF-1.8",
            "source": f"rayloom {__version__}",
            "history": f"written by rayloom {__version__}",
            "comment": "Values are constant within a block; block edges are the axes' bounds. "
            "Perturbations are relative to the regional mean.",
            **attributes,
        },
    )


def model_of(dataset: xarray.Dataset) -> SlownessModel:
    """Rebuild a model from its dataset.

    Parameters
    ----------
    dataset : xarray.Dataset
        As :func:`dataset_of` makes it.

    Returns
    -------
    SlownessModel
        Slowness, reference, wave, grid and fields as they were.

    Raises
    ------
    InputError
        If a variable is missing, has other dimensions, or contradicts another.
    """
    wave = dataset.attrs.get("wave")
    if wave not in ("P", "S"):
        raise InputError(f'expected "P" or "S", got {wave!r}', where="attribute wave")
    x_edges, y_edges, depth_edges = (_edges_of(dataset, axis) for axis in ("x", "y", "depth"))
    grid = BlockGrid(_frame_of(dataset), x_edges, y_edges, depth_edges)
    slowness = _block_values(dataset, "slowness")
    reference = _block_values(dataset, "slowness_reference")
    model = SlownessModel(grid, slowness, reference, wave)
    velocity = _velocity_name(model)
    _require_agreement(dataset, velocity, model.velocity_km_s)
    _require_agreement(dataset, f"{velocity}_reference", model.reference_velocity_km_s)
    fields = {
        str(name): _block_values(dataset, str(name))
        for name, variable in dataset.data_vars.items()
        if set(variable.dims) == set(DIMENSIONS) and name not in RESERVED_NAMES
    }
    return model.with_fields(**fields)


def _velocity_name(model: SlownessModel) -> str:
    return "vp" if model.wave == "P" else "vs"


def _block_variables(model: SlownessModel) -> dict[str, tuple[Floats, FieldDescription]]:
    velocity, wave = _velocity_name(model), model.wave
    own = {
        velocity: (model.velocity_km_s, "km s-1", f"{wave}-wave velocity"),
        f"{velocity}_reference": (
            model.reference_velocity_km_s,
            "km s-1",
            f"{wave}-wave velocity of the reference model",
        ),
        f"d{velocity}": (
            model.perturbation_percent,
            "percent",
            f"{wave}-wave velocity perturbation, percent of the reference velocity",
        ),
        "slowness": (model.slowness_s_per_km, "s km-1", f"{wave}-wave slowness"),
        "slowness_reference": (
            model.reference,
            "s km-1",
            f"{wave}-wave slowness of the reference model",
        ),
    }
    described = {
        name: (values, FieldDescription(units, words))
        for name, (values, units, words) in own.items()
    }
    return described | {
        name: (values, describe_field(name)) for name, values in model.fields.items()
    }


def _axes(grid: BlockGrid) -> dict[str, Any]:
    if grid.frame.is_flat:
        across = {"units": "km", "long_name": "x in the flat frame"}
        along = {"units": "km", "long_name": "y in the flat frame"}
    else:
        across = {
            "units": "degrees",
            "standard_name": "grid_longitude",
            "long_name": "rotated longitude x",
            "axis": "X",
        }
        along = {
            "units": "degrees",
            "standard_name": "grid_latitude",
            "long_name": "rotated latitude y",
            "axis": "Y",
        }
    down = {
        "units": "km",
        "standard_name": "depth",
        "long_name": "depth below sea level",
        "positive": "down",
        "axis": "Z",
        "bounds": "depth_bounds",
    }
    return {
        "depth": ("depth", grid.depth_centres_km, down),
        "y": ("y", grid.y_centres, {**along, "bounds": "y_bounds"}),
        "x": ("x", grid.x_centres, {**across, "bounds": "x_bounds"}),
    }


def _bounds(grid: BlockGrid) -> dict[str, Any]:
    edges = {"x": grid.x_edges, "y": grid.y_edges, "depth": grid.depth_edges_km}
    return {
        f"{axis}_bounds": ((axis, "edge"), np.stack([values[:-1], values[1:]], axis=-1))
        for axis, values in edges.items()
    }


def _geography(grid: BlockGrid) -> dict[str, Any]:
    if grid.frame.is_flat:
        return {}
    longitude, latitude = grid.frame.geographic_coordinates(
        grid.x_centres[None, :], grid.y_centres[:, None]
    )
    east = {"units": "degrees_east", "standard_name": "longitude", "long_name": "longitude"}
    north = {
        "units": "degrees_north",
        "standard_name": "latitude",
        "long_name": "geographic latitude (WGS84)",
    }
    return {
        "longitude": (("y", "x"), longitude, east),
        "latitude": (("y", "x"), latitude, north),
    }


def _rotated_pole(frame: Frame) -> dict[str, Any]:
    pole = frame.rotated_pole()
    return {
        "grid_mapping_name": "rotated_latitude_longitude",
        "grid_north_pole_latitude": pole.latitude_deg,
        "grid_north_pole_longitude": pole.longitude_deg,
        "north_pole_grid_longitude": pole.north_pole_x_deg,
        "earth_radius": EARTH_RADIUS_KM * M_PER_KM,
        "comment": "The rotation acts on geocentric latitudes; the variable latitude is "
        "geographic (WGS84). The frame_ attributes give the centre in geographic "
        "latitude and the azimuth of the y axis there.",
        "frame_longitude": frame.longitude_deg,
        "frame_latitude": frame.latitude_deg,
        "frame_azimuth": frame.azimuth_deg,
    }


def _frame_of(dataset: xarray.Dataset) -> Frame:
    if "rotated_pole" not in dataset:
        if dataset["x"].attrs.get("units") == "km":
            return Frame.flat()
        raise InputError(
            "missing; expected the frame's place, or x in km for a flat model",
            where="variable rotated_pole",
        )
    attributes = dataset["rotated_pole"].attrs
    try:
        return Frame(
            longitude=float(attributes["frame_longitude"]),
            latitude=float(attributes["frame_latitude"]),
            azimuth_deg=float(attributes["frame_azimuth"]),
        )
    except KeyError as error:
        raise InputError(
            f"the attribute {error.args[0]} is missing", where="variable rotated_pole"
        ) from error


def _edges_of(dataset: xarray.Dataset, axis: str) -> Floats:
    name = f"{axis}_bounds"
    if name not in dataset or axis not in dataset.dims:
        raise InputError("missing; expected the block edges", where=f"variable {name}")
    pairs = np.asarray(dataset[name].values, dtype=np.float64)
    if pairs.ndim != 2 or pairs.shape[1] != 2 or not np.array_equal(pairs[1:, 0], pairs[:-1, 1]):
        raise InputError(
            "expected two edges per block, each block beginning where the one before ends",
            where=f"variable {name}",
        )
    return np.append(pairs[:, 0], pairs[-1, 1])


def _block_values(dataset: xarray.Dataset, name: str) -> Floats:
    if name not in dataset:
        raise InputError("missing", where=f"variable {name}")
    variable = dataset[name]
    if set(variable.dims) != set(DIMENSIONS):
        raise InputError(
            f"expected the dimensions {DIMENSIONS}, got {variable.dims}", where=f"variable {name}"
        )
    return np.asarray(variable.transpose("x", "y", "depth").values, dtype=np.float64)


def _require_agreement(dataset: xarray.Dataset, name: str, expected: Floats) -> None:
    found = _block_values(dataset, name)
    if not np.allclose(found, expected, rtol=AGREEMENT, atol=0.0):
        raise InputError(
            "velocity and slowness of the same block contradict each other; change both, "
            f"slowness = 1 / {name}",
            where=f"variable {name}",
        )
