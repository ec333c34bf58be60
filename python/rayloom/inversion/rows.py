"""The rows of the inversion: which residuals take part, in which order, in which group."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.errors import InputError

if TYPE_CHECKING:
    from rayloom.residuals import Residuals


@dataclass(frozen=True)
class LeftOutGroup:
    """A group of rows that the inversion does not use.

    Attributes
    ----------
    event, phase : str
        The key of the group.
    picks : int
        How many rows it has.
    reason : str
        Why it is left out.
    """

    event: str
    phase: str
    picks: int
    reason: str


@dataclass(frozen=True)
class DataRows:
    """Residuals in the order of the inversion.

    Rows are sorted by event, phase and station name, so that a result does not
    depend on the order of the input, not even in its rounding.

    Attributes
    ----------
    data_row : (n,) int array
        Index of each row in the table of residuals.
    ray : (n,) int array
        Index of each row's ray in the prediction of the forward map.
    residual_s, uncertainty_s : (n,) arrays
        Observed minus predicted time and its standard error, s.
    group : (n,) int array
        Which rows share a free mean; −1 for a row without one.
    event, station, phase, wave : (n,) str arrays
        Names of each row.
    """

    data_row: NDArray[np.int64]
    ray: NDArray[np.int64]
    residual_s: NDArray[np.float64]
    uncertainty_s: NDArray[np.float64]
    group: NDArray[np.int64]
    event: NDArray[np.str_]
    station: NDArray[np.str_]
    phase: NDArray[np.str_]
    wave: NDArray[np.str_]

    @property
    def count(self) -> int:
        """Number of rows."""
        return self.residual_s.size

    def fingerprint(self) -> str:
        """Hexadecimal digest of names and values, to recognise the same data again."""
        digest = hashlib.sha256()
        for names in (self.event, self.station, self.phase):
            digest.update("\n".join(names.tolist()).encode())
        for values in (self.residual_s, self.uncertainty_s):
            digest.update(values.tobytes())
        return digest.hexdigest()


def rows_of_residuals(
    data: Residuals, *, wave: str, min_picks_per_event: int
) -> tuple[DataRows, tuple[LeftOutGroup, ...]]:
    """Choose and order the residuals of one wave type.

    Parameters
    ----------
    data : Residuals
        The table of residuals.
    wave : {"P", "S"}
        Wave type of the model.
    min_picks_per_event : int
        Smaller (event, phase) groups are left out.

    Returns
    -------
    rows : DataRows
        One group per (event, phase).
    left_out : tuple of LeftOutGroup
        Groups that are too small or of the other wave type.

    Raises
    ------
    InputError
        If a value is not finite, an uncertainty is not positive, or nothing is left.
    """
    _check_values(data)
    event = np.asarray(data.events.event).astype(str)[data.event_index]
    phase = np.asarray(data.phase).astype(str)
    group, keys = _group_codes(event, phase)
    sizes = np.bincount(group, minlength=len(keys))
    waves = np.asarray(data.wave).astype(str)
    right_wave = waves == wave
    kept = right_wave & (sizes[group] >= min_picks_per_event)
    left_out = _left_out(keys, sizes, group, right_wave, wave, min_picks_per_event)
    if not np.any(kept):
        raise InputError(
            f"no {wave} residual is left to invert: of {kept.size}, {int(np.sum(~right_wave))} "
            f"are of the other wave and {int(np.sum(right_wave))} belong to events with fewer "
            f"than {min_picks_per_event} picks (inversion.min_picks_per_event)"
        )
    return _ordered(data, kept, event, phase, waves), left_out


def _ordered(
    data: Residuals,
    kept: NDArray[np.bool_],
    event: NDArray[np.str_],
    phase: NDArray[np.str_],
    wave: NDArray[np.str_],
) -> DataRows:
    station = np.asarray(data.stations.labels).astype(str)[data.station_index]
    chosen = np.flatnonzero(kept)
    keys = (data.uncertainty_s, data.residual_s, station, phase, event)
    order = np.lexsort(tuple(key[chosen] for key in keys))
    row = chosen[order]
    return DataRows(
        data_row=row,
        ray=order.astype(np.int64),
        residual_s=np.asarray(data.residual_s, dtype=np.float64)[row],
        uncertainty_s=np.asarray(data.uncertainty_s, dtype=np.float64)[row],
        group=_group_codes(event[row], phase[row])[0],
        event=event[row],
        station=station[row],
        phase=phase[row],
        wave=wave[row],
    )


def _group_codes(
    event: NDArray[np.str_], phase: NDArray[np.str_]
) -> tuple[NDArray[np.int64], list[tuple[str, str]]]:
    events, event_code = np.unique(event, return_inverse=True)
    phases, phase_code = np.unique(phase, return_inverse=True)
    pair, code = np.unique(event_code * max(phases.size, 1) + phase_code, return_inverse=True)
    keys = [(str(events[p // phases.size]), str(phases[p % phases.size])) for p in pair]
    return code.astype(np.int64), keys


def _left_out(
    keys: list[tuple[str, str]],
    sizes: NDArray[np.int64],
    group: NDArray[np.int64],
    right_wave: NDArray[np.bool_],
    wave: str,
    min_picks: int,
) -> tuple[LeftOutGroup, ...]:
    of_wave = np.zeros(len(keys), dtype=bool)
    of_wave[group[right_wave]] = True
    found = []
    for code, (event, phase) in enumerate(keys):
        picks = int(sizes[code])
        if not of_wave[code]:
            found.append(LeftOutGroup(event, phase, picks, f"the model is one of {wave} waves"))
        elif picks < min_picks:
            reason = f"{picks} of at least {min_picks} picks"
            found.append(LeftOutGroup(event, phase, picks, reason))
    return tuple(found)


def _check_values(data: Residuals) -> None:
    if not np.all(np.isfinite(data.residual_s)):
        row = int(np.argmin(np.isfinite(data.residual_s)))
        raise InputError(f"residual {row} is not a finite number", where="residual_s")
    good = np.isfinite(data.uncertainty_s) & (np.asarray(data.uncertainty_s) > 0.0)
    if not np.all(good):
        row = int(np.argmin(good))
        raise InputError(
            f"uncertainty {row} is {data.uncertainty_s[row]}; expected a positive number of s",
            where="uncertainty_s",
        )
