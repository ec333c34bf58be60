"""What an inversion hands back."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.inversion.forward_map import Prediction
from rayloom.inversion.prior_strength import PriorStrength
from rayloom.inversion.rows import LeftOutGroup
from rayloom.inversion.state import InversionState, Iteration, history_frame
from rayloom.inversion.structure import StructureDemand
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    import pandas as pd

    from rayloom.residuals import Residuals


_NOTABLE_ERROR_SCALE = 1.15


@dataclass(frozen=True)
class Counts:
    """How many rows the last model explains, and what is left out.

    Attributes
    ----------
    data : int
        N, rows used.
    groups : int
        N_g, means eliminated: (event, phase) groups with a row in use.
    untraced : int
        Rows left out because no ray reaches the station.
    left_out_groups : tuple of LeftOutGroup
        Groups left out as a whole.
    """

    data: int
    groups: int
    untraced: int
    left_out_groups: tuple[LeftOutGroup, ...]


@dataclass(frozen=True)
class InversionResult:
    """A model, what it explains, and how it was found.

    Arrays over rows have the order of the table of residuals and NaN (weight 0)
    where a row was left out.

    Attributes
    ----------
    data : Residuals
        The table of residuals.
    model : SlownessModel
        Velocity model with the fields ``hits`` and ``ray_length_km``.
    history : tuple of Iteration
        The starting model and every accepted one.
    station_terms_s : dict of str to (stations,) array
        Per phase the delay at each station, s, late positive, zero sum; NaN for
        stations without a pick in use. Empty if not solved for.
    mislocation_km : (events, 3) array
        Shift from the catalogue position to the estimated one: km east, north
        and down; NaN for events not in use or if not solved for.
    predicted_s : (rows,) array
        Residual that the model, the terms and the group's mean predict, s.
    residual_after_s : (rows,) array
        What they leave, s.
    weights : (rows,) array
        Robust weights, 0 to 1 (Student's t: up to (ν + 1)/ν).
    standardised : (rows,) array
        ``residual_after_s`` over :attr:`uncertainty_s`.
    suspected_outlier : (rows,) bool array
        Rows beyond ``outlier_std``.
    used : (rows,) bool array
        Rows that took part.
    left_out_because : (rows,) str array
        Why a row was left out, empty if used.
    rays : Rays
        Rays of the last model.
    ray_rows : (rays,) int array
        Row of the table that each ray belongs to.
    stopped_because : str
        Why the iterations ended.
    counts : Counts
        N, N_g and what is left out.
    state : InversionState
        State to resume from.
    station_term_std_s : dict of str to (stations,) array
        Posterior standard deviations of ``station_terms_s`` for its last weights
        and rays and the uncertainties as they stand, s; empty if not worked out.
    prior_std_percent : float
        Standard deviation of the block prior, percent, before any factor by depth;
        NaN where settings damp instead.
    prior_strength : PriorStrength or None
        How the data chose it; None where it was given.
    structure : StructureDemand or None
        Whether the data demand structure in the blocks; None if not worked out.
    uncertainty_factor : (rows,) array or None
        By which ``rescale_uncertainties`` multiplied the uncertainties of the data,
        1 where a row was left out; None if not asked for.
    """

    data: Residuals
    model: SlownessModel
    history: tuple[Iteration, ...]
    station_terms_s: dict[str, NDArray[np.float64]]
    mislocation_km: NDArray[np.float64]
    predicted_s: NDArray[np.float64]
    residual_after_s: NDArray[np.float64]
    weights: NDArray[np.float64]
    standardised: NDArray[np.float64]
    suspected_outlier: NDArray[np.bool_]
    used: NDArray[np.bool_]
    left_out_because: NDArray[np.str_]
    rays: Prediction
    ray_rows: NDArray[np.int64]
    stopped_because: str
    counts: Counts
    state: InversionState
    station_term_std_s: dict[str, NDArray[np.float64]] = field(default_factory=dict)
    prior_std_percent: float = float("nan")
    prior_strength: PriorStrength | None = None
    structure: StructureDemand | None = None
    uncertainty_factor: NDArray[np.float64] | None = None

    @property
    def uncertainty_s(self) -> NDArray[np.float64]:
        """Uncertainties that the last model assumes, (rows,), s."""
        given = np.asarray(self.data.uncertainty_s, dtype=np.float64)
        return given if self.uncertainty_factor is None else given * self.uncertainty_factor

    def prior_sentence(self) -> str:
        """Tell how large perturbations were believed to be, and who chose that size.

        Returns
        -------
        str
            Without a full stop; empty for a prior of damping and smoothing.
        """
        if not np.isfinite(self.prior_std_percent):
            return ""
        size = f"prior standard deviation {self.prior_std_percent:g} %"
        strength = self.prior_strength
        if strength is None:
            return f"{size}, as given"
        sentence = f"{size}, at which the data are most probable"
        if strength.at_limit:
            sentence += " of the range searched: set prior_std_percent by hand"
        if strength.error_scale > _NOTABLE_ERROR_SCALE:
            sentence += f"; errors seem {strength.error_scale:.1f} times the stated uncertainties"
        return sentence

    def history_frame(self) -> pd.DataFrame:
        """Return the history as a table, one row per iteration.

        Returns
        -------
        DataFrame
            One column per field of :class:`Iteration`.
        """
        return history_frame(self.history)

    def residual_frame(self) -> pd.DataFrame:
        """Return every row by name with what became of it.

        Returns
        -------
        DataFrame, as many rows as residuals
        """
        import pandas as pd

        data = self.data
        network, station = (
            np.asarray(names).astype(str)[data.station_index]
            for names in (data.stations.network, data.stations.station)
        )
        return pd.DataFrame(
            {
                "event": np.asarray(data.events.event).astype(str)[data.event_index],
                "network": network,
                "station": station,
                "phase": np.asarray(data.phase).astype(str),
                "residual_s": data.residual_s,
                "uncertainty_s": data.uncertainty_s,
                "predicted_residual_s": self.predicted_s,
                "residual_after_s": self.residual_after_s,
                "standardised": self.standardised,
                "weight": self.weights,
                "suspected_outlier": self.suspected_outlier,
                "left_out_because": self.left_out_because,
            }
        )

    def uncertainty_frame(self) -> pd.DataFrame:
        """Return how uncertainties were rescaled, one row per phase and station.

        Returns
        -------
        DataFrame
            ``phase``, ``network``, ``station``, ``picks``, ``factor`` and
            ``median_uncertainty_s`` after it; no rows if not asked for.
        """
        columns = ["phase", "network", "station"]
        frame = self.residual_frame().assign(after_s=self.uncertainty_s)
        if self.uncertainty_factor is None:
            return frame.head(0)[columns].assign(picks=[], factor=[], median_uncertainty_s=[])
        frame = frame.assign(factor=self.uncertainty_factor)[self.used]
        return (
            frame.groupby(columns)
            .agg(
                picks=("factor", "size"),
                factor=("factor", "median"),
                median_uncertainty_s=("after_s", "median"),
            )
            .reset_index()
        )

    def outlier_frame(self) -> pd.DataFrame:
        """Return the suspected outliers by name, the largest first.

        Returns
        -------
        DataFrame
            Columns of :meth:`residual_frame`.
        """
        frame = self.residual_frame()
        frame = frame[frame["suspected_outlier"]]
        order = np.argsort(-np.abs(frame["standardised"].to_numpy()), kind="stable")
        return frame.iloc[order].reset_index(drop=True)

    def station_term_frame(self) -> pd.DataFrame:
        """Return the station terms by name.

        Returns
        -------
        DataFrame
            ``network``, ``station``, ``phase``, ``term_s`` (late positive),
            ``standard_error_s`` (NaN if not worked out), ``picks``.
        """
        import pandas as pd

        data = self.data
        phases = np.asarray(data.phase).astype(str)
        parts = []
        for phase, terms in self.station_terms_s.items():
            rows = self.used & (phases == phase)
            picks = np.bincount(data.station_index[rows], minlength=terms.size)
            known = np.isfinite(terms)
            errors = self.station_term_std_s.get(phase, np.full(terms.size, np.nan))
            parts.append(
                pd.DataFrame(
                    {
                        "network": np.asarray(data.stations.network).astype(str)[known],
                        "station": np.asarray(data.stations.station).astype(str)[known],
                        "phase": phase,
                        "term_s": terms[known],
                        "standard_error_s": errors[known],
                        "picks": picks[known],
                    }
                )
            )
        columns = ["network", "station", "phase", "term_s", "standard_error_s", "picks"]
        return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=columns)

    def mislocation_frame(self) -> pd.DataFrame:
        """Return the shifts by event: event, east_km, north_km, down_km.

        Returns
        -------
        DataFrame
            Shifts in km from the catalogue position.
        """
        import pandas as pd

        known = np.all(np.isfinite(self.mislocation_km), axis=1)
        east, north, down = self.mislocation_km[known].T
        return pd.DataFrame(
            {
                "event": np.asarray(self.data.events.event).astype(str)[known],
                "east_km": east,
                "north_km": north,
                "down_km": down,
            }
        )
