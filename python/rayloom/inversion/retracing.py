"""Rays of which only those are traced anew along which the model changed enough.

Main type: :class:`DatedRays`, rays that know the model they are timed in.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from typing import Self

import numpy as np
from numpy.typing import NDArray

from rayloom.forward import Rays
from rayloom.forward.joining import Part, joined
from rayloom.model import SlownessModel

TraceRows = Callable[[NDArray[np.int64]], Rays]


@dataclass(frozen=True, eq=False, repr=False)
class DatedRays(Rays):
    """Rays timed in one model, each traced in that one or in an earlier one.

    Attributes
    ----------
    slowness_s_per_km : (blocks,) array
        Of the model they are timed in.
    drift_s : (rays,) array
        Σ |Δs| along each ray over the models since it was traced, s.
    traced_anew : int
        Rays traced for this model.
    """

    slowness_s_per_km: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    drift_s: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    traced_anew: int = 0

    @classmethod
    def just_traced(cls, rays: Rays, model: SlownessModel) -> Self:
        """Date rays that were all traced in a model."""
        return cls(
            **{one.name: getattr(rays, one.name) for one in fields(Rays)},
            slowness_s_per_km=model.slowness_s_per_km.ravel(),
            drift_s=np.zeros(len(rays)),
            traced_anew=len(rays),
        )

    def in_model(self, model: SlownessModel, *, limit_s: float, trace: TraceRows) -> Self:
        """Time the rays in another model, and trace those anew that drifted too far.

        A ray that stays is timed along its old path, which by Fermat's principle
        is late by a quantity of second order in the change of the model.

        Parameters
        ----------
        model : SlownessModel
            The other model.
        limit_s : float
            Drift beyond which a ray is traced anew, s.
        trace : callable
            Traces the given rows in that model.
        """
        slowness = model.slowness_s_per_km.ravel()
        change = np.abs(slowness - self.slowness_s_per_km)
        drift_s = self.drift_s + self.path_lengths @ change
        again = ~self.traced | ~(drift_s <= limit_s)
        timed = replace(self, time_s=self.predict_s(model.slowness_s_per_km))
        every, anew = np.arange(len(self)), np.flatnonzero(again)
        parts = [Part(timed, every, ~again)]
        problems: dict[str, int] = {}
        if anew.size:
            new = trace(anew)
            parts.append(Part(new, anew, np.ones(anew.size, dtype=bool)))
            problems = new.problems
        rays = joined(self.grid, parts, len(self), problems=problems)
        rays = replace(rays, basin_jumps=rays.course_changes(self))
        return replace(
            self.just_traced(rays, model),
            drift_s=np.where(again, 0.0, drift_s),
            traced_anew=int(anew.size),
        )
