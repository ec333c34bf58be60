"""Everything the demo knows and its user does not, as one record in JSON."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from rayloom.demo.bodies import Body, strongest_body
from rayloom.demo.highland import CENTRE_LATITUDE_DEG, CENTRE_LONGITUDE_DEG, HIGHLAND
from rayloom.demo.invention import Invention
from rayloom.demo.picking import NO_OUTLIER
from rayloom.demo.seismicity import Seismicity
from rayloom.demo.structure import (
    DISORDER_PERCENT,
    FAST_ROOT,
    SLOW_COLUMN,
    Ellipsoid,
    Structure,
    TiltedColumn,
    block_positions,
)
from rayloom.errors import FileAccessError, InputError
from rayloom.model import BlockGrid
from rayloom.units import KM_PER_DEGREE
from rayloom.writing import write_text


@dataclass(frozen=True)
class EventError:
    """How far a catalogue entry lies from the true event: catalogue minus truth.

    Parameters
    ----------
    event : str
        Event identifier.
    east_km, north_km, depth_km : float
        Error of the hypocentre.
    origin_s : float
        Error of the origin time.
    """

    event: str
    east_km: float
    north_km: float
    depth_km: float
    origin_s: float


@dataclass(frozen=True)
class Outlier:
    """A pick that is grossly wrong.

    Parameters
    ----------
    event, network, station : str
        The pick.
    kind : str
        "gross error" or "cycle skip".
    shift_s : float
        What was added to its time.
    """

    event: str
    network: str
    station: str
    kind: str
    shift_s: float


@dataclass(frozen=True)
class DemoTruth:
    """What truly lies below the highland, and every error put into its survey.

    Parameters
    ----------
    highland : str
        Name of the region.
    seed : int
        Seed of every draw.
    longitude_deg, latitude_deg : float
        Centre of the map; positions are km east and north of it.
    pick_count : int
        Picks in the survey, outliers included.
    noise_rms_s : float
        Root mean square of the noise of the picks that are no outliers.
    disorder_percent : float
        Standard deviation of the random structure.
    column, root : TiltedColumn, Ellipsoid
        The two bodies as drawn.
    slow, fast : Body
        The two bodies as measured on the blocks of the truth, each alone.
    station_terms_s : dict of str to float
        Term of each station, by "NET.STA".
    event_errors : tuple of EventError
        One for each event.
    outliers : tuple of Outlier
        The grossly wrong picks.
    """

    highland: str
    seed: int
    longitude_deg: float
    latitude_deg: float
    pick_count: int
    noise_rms_s: float
    disorder_percent: float
    column: TiltedColumn
    root: Ellipsoid
    slow: Body
    fast: Body
    station_terms_s: dict[str, float]
    event_errors: tuple[EventError, ...]
    outliers: tuple[Outlier, ...]

    @staticmethod
    def of(invention: Invention) -> DemoTruth:
        """Gather the truth of an invented survey."""
        errors, stations, model = invention.errors, invention.stations, invention.model
        good = errors.outlier_kind == NO_OUTLIER
        labels = [str(label) for label in stations.labels]
        return DemoTruth(
            highland=HIGHLAND,
            seed=invention.scenario.seed,
            longitude_deg=CENTRE_LONGITUDE_DEG,
            latitude_deg=CENTRE_LATITUDE_DEG,
            pick_count=errors.noise_s.size,
            noise_rms_s=float(np.sqrt(np.mean(errors.noise_s[good] ** 2))),
            disorder_percent=DISORDER_PERCENT,
            column=SLOW_COLUMN,
            root=FAST_ROOT,
            slow=_body_alone(model.grid, SLOW_COLUMN, -1),
            fast=_body_alone(model.grid, FAST_ROOT, +1),
            station_terms_s=dict(zip(labels, invention.station_terms_s.tolist(), strict=True)),
            event_errors=_event_errors(invention.seismicity),
            outliers=_outliers(invention),
        )

    def write_json(self, path: str | Path) -> None:
        """Write the record, whole or not at all.

        Parameters
        ----------
        path : str or Path
            The file.

        Raises
        ------
        FileAccessError
            If the file cannot be written.
        """
        from pydantic import TypeAdapter

        write_text(path, TypeAdapter(DemoTruth).dump_json(self, indent=1).decode() + "\n")

    @staticmethod
    def read_json(path: str | Path) -> DemoTruth:
        """Read a record that :meth:`write_json` wrote.

        Parameters
        ----------
        path : str or Path
            The file.

        Returns
        -------
        DemoTruth

        Raises
        ------
        FileAccessError
            If the file cannot be read.
        InputError
            If it is not such a record.
        """
        from pydantic import TypeAdapter, ValidationError

        try:
            text = Path(path).read_bytes()
        except OSError as error:
            raise FileAccessError(f"{path} cannot be read: {error.strerror}") from error
        try:
            return TypeAdapter(DemoTruth).validate_json(text)
        except ValidationError as error:
            first = error.errors()[0]
            key = ".".join(str(part) for part in first["loc"])
            raise InputError(
                f"not the truth of a demo survey ({key or 'file'}: {first['msg']}); "
                "write the survey again",
                where=str(path),
            ) from error


def _body_alone(grid: BlockGrid, structure: Structure, sign: int) -> Body:
    """Measure a body as the blocks hold it, with nothing else around."""
    percent = structure.percent(*block_positions(grid))
    body = strongest_body(grid, percent, np.ones(grid.shape, dtype=bool), sign)
    if body is None:
        raise InputError("the blocks of the truth miss a body; choose smaller blocks")
    return body


def _event_errors(seismicity: Seismicity) -> tuple[EventError, ...]:
    """Catalogue minus truth, event by event."""
    true, catalogue = seismicity.true, seismicity.catalogue
    north_km = (catalogue.latitude_deg - true.latitude_deg) * KM_PER_DEGREE
    turn_deg = (catalogue.longitude_deg - true.longitude_deg + 180.0) % 360.0 - 180.0
    east_km = turn_deg * np.cos(np.radians(true.latitude_deg)) * KM_PER_DEGREE
    depth_km = catalogue.depth_km - true.depth_km
    origin_s = (catalogue.time - true.time) / np.timedelta64(1, "s")
    columns = (east_km, north_km, depth_km, origin_s)
    return tuple(
        EventError(str(event), *(float(column[row]) for column in columns))
        for row, event in enumerate(true.event)
    )


def _outliers(invention: Invention) -> tuple[Outlier, ...]:
    """List the grossly wrong picks, in the order of the file."""
    errors, stations = invention.errors, invention.stations
    return tuple(
        Outlier(
            event=str(invention.seismicity.true.event[invention.recordings.event_index[row]]),
            network=str(stations.network[invention.recordings.station_index[row]]),
            station=str(stations.station[invention.recordings.station_index[row]]),
            kind=str(errors.outlier_kind[row]),
            shift_s=float(errors.outlier_s[row]),
        )
        for row in np.flatnonzero(errors.outlier_kind != NO_OUTLIER)
    )
