"""Tables of bodies, of squeezing and of leaks: CSV, and JSON with all that belongs to them."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from rayloom.writing import write_text

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.appraisal.bodies import Body, BodyExtent
    from rayloom.appraisal.leaks import Leak
    from rayloom.model import BlockGrid

MEASURES: Final = (
    "depth_km",
    "top_km",
    "base_km",
    "width_km",
    "volume_km3",
    "mean_percent",
    "peak_percent",
    "explained_ms",
)
"""Measures that have a median and an interval in the table, after the centroid's place."""


def body_table(bodies: Sequence[Body], extents: Mapping[str, BodyExtent]) -> pd.DataFrame:
    """Gather what is known of bodies, one row each.

    Parameters
    ----------
    bodies : sequence of Body
        The bodies.
    extents : mapping of str to BodyExtent
        Squeezing by the name of the body; may lack some.

    Returns
    -------
    DataFrame
        Each measure has three columns: the median of the samples, and ``_low`` and
        ``_high``, the ends of the central 90 %. Perturbations are relative to the
        regional mean.
    """
    import pandas as pd

    return pd.DataFrame([_row(body, extents.get(body.name)) for body in bodies])


def squeezing_table(extents: Mapping[str, BodyExtent]) -> pd.DataFrame:
    """List every cut of every squeezing.

    Parameters
    ----------
    extents : mapping of str to BodyExtent
        Squeezing by the name of the body.

    Returns
    -------
    DataFrame
        Columns body, forbidden (below or above), depth_km, objective_rise, p_value,
        prior_factor.
    """
    import pandas as pd

    columns = ["body", "forbidden", "depth_km", "objective_rise", "p_value", "prior_factor"]
    rows = [
        (name, scan.side, *values)
        for name, extent in extents.items()
        for scan in (extent.below, extent.above)
        for values in zip(scan.depth_km, scan.rise, scan.p_value, scan.prior_factor, strict=True)
    ]
    return pd.DataFrame(rows, columns=columns)


def leak_table(leaks: Sequence[Leak], grid: BlockGrid) -> pd.DataFrame:
    """List what each anomaly outside becomes inside, one row per inversion.

    Parameters
    ----------
    leaks : sequence of Leak
        The tests.
    grid : BlockGrid
        Their blocks.

    Returns
    -------
    DataFrame
    """
    import pandas as pd

    return pd.DataFrame([_leak_row(leak, grid) for leak in leaks])


def write_bodies_json(
    path: str | Path, bodies: Sequence[Body], extents: Mapping[str, BodyExtent]
) -> None:
    """Write the table of bodies with sources, alternatives and caveats.

    Parameters
    ----------
    path : str or Path
        The file.
    bodies : sequence of Body
        The bodies.
    extents : mapping of str to BodyExtent
        Squeezing by the name of the body.

    Raises
    ------
    FileAccessError
        If the file cannot be written.
    """
    from rayloom.appraisal.temperature import ALTERNATIVES, CAVEAT, SOURCES

    record = {
        "meaning": "medians of posterior samples with the ends of their central 90 %; "
        "perturbations relative to the regional mean at the same depth",
        "temperature": {
            "sources": list(SOURCES),
            "alternatives": list(ALTERNATIVES),
            "caveat": CAVEAT,
        },
        "bodies": [_row(body, extents.get(body.name)) for body in bodies],
    }
    text = json.dumps(_plain(record), indent=1, ensure_ascii=False, allow_nan=False)
    write_text(path, text + "\n")


def _row(body: Body, extent: BodyExtent | None) -> dict[str, Any]:
    intervals = {
        "longitude_deg": body.longitude_deg,
        "latitude_deg": body.latitude_deg,
        **{name: body.interval(name) for name in MEASURES},
    }
    row: dict[str, Any] = {"body": body.name}
    for name, interval in intervals.items():
        row[name] = interval.estimate
        row[f"{name}_low"], row[f"{name}_high"] = interval.low, interval.high
    heat = body.temperature
    return row | {
        "existence_share": body.existence_share,
        "reaches_unresolved_blocks": body.touches_edge,
        "demanded_top_km": extent.demanded_top_km if extent else np.nan,
        "demanded_base_km": extent.demanded_base_km if extent else np.nan,
        "top_p_value": extent.top_p_value if extent else np.nan,
        "base_p_value": extent.base_p_value if extent else np.nan,
        "smearing_azimuth_deg": body.smearing.azimuth_deg,
        "smearing_plunge_deg": body.smearing.plunge_deg,
        "point_spread_km": body.smearing.point_spread_km,
        "body_along_it_km": body.smearing.body_km,
        "smearing_flagged": body.smearing.flagged,
        "temperature_lowest_c": heat.lowest_c if heat else np.nan,
        "temperature_highest_c": heat.highest_c if heat else np.nan,
    }


def _leak_row(leak: Leak, grid: BlockGrid) -> dict[str, Any]:
    x, y, depth_km = leak.peak_at
    longitude, latitude = (
        (x, y) if grid.frame.is_flat else map(float, grid.frame.geographic_coordinates(x, y))
    )
    return {
        "anomaly": leak.source.name,
        "place": leak.source.place,
        "contrast_percent": leak.source.contrast_percent,
        "station_terms": leak.station_terms,
        "crust_free": leak.crust_free,
        "delay_ms": leak.delay_ms,
        "explained_share": leak.explained_share,
        "peak_inside_percent": leak.peak_percent,
        "peak_over_contrast": leak.leak_ratio,
        "peak_longitude_deg": longitude,
        "peak_latitude_deg": latitude,
        "peak_depth_km": depth_km,
    }


def _plain(value: Any) -> Any:
    """Turn numpy scalars into plain ones and NaN into null."""
    if isinstance(value, dict):
        return {key: _plain(entry) for key, entry in value.items()}
    if isinstance(value, list):
        return [_plain(entry) for entry in value]
    if isinstance(value, np.generic):
        value = value.item()
    return None if isinstance(value, float) and not np.isfinite(value) else value
