"""The forward map of distant events: rays from the one-dimensional Earth into the blocks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from rayloom.forward import Rays, trace_distant
from rayloom.inversion.retracing import DatedRays
from rayloom.model import SlownessModel

if TYPE_CHECKING:
    from rayloom.inversion.settings import InversionSettings
    from rayloom.residuals import Residuals


@dataclass(frozen=True)
class DistantRays:
    """Rays of chosen rows of a table of residuals.

    Bent rays are traced anew in every model, or, with ``retrace_change_s``, only
    where it changed enough. Reference and straight rays are
    traced once; in another model only the times along them change.

    Attributes
    ----------
    data : Residuals
        The table of residuals.
    data_row : (rays,) int array
        Its rows that need a ray.
    settings : InversionSettings
        Method, quality and threads.
    """

    data: Residuals
    data_row: NDArray[np.int64]
    settings: InversionSettings

    def __call__(
        self,
        model: SlownessModel,
        *,
        previous: Rays | None,
        progress: Callable[[int, int], None] | None,
    ) -> Rays:
        """Trace the rays, or time the previous ones if their paths are fixed."""
        if self.settings.method != "bent" and previous is not None:
            return replace(previous, time_s=previous.predict_s(model.slowness_s_per_km))
        every = np.arange(self.data_row.size)
        limit_s = self.settings.retrace_change_s
        if limit_s == 0.0 or self.settings.method != "bent":
            return self._trace(model, every, previous, progress)
        if isinstance(previous, DatedRays):
            return previous.in_model(
                model,
                limit_s=limit_s,
                trace=lambda rows: self._trace(model, rows, None, progress),
            )
        return DatedRays.just_traced(self._trace(model, every, previous, progress), model)

    def _trace(
        self,
        model: SlownessModel,
        chosen: NDArray[np.int64],
        previous: Rays | None,
        progress: Callable[[int, int], None] | None,
    ) -> Rays:
        """Trace the chosen ones of the rays."""
        data, rows = self.data, self.data_row[chosen]
        return trace_distant(
            model,
            data.earth,
            data.events,
            data.stations,
            pairs=np.column_stack([data.event_index[rows], data.station_index[rows]]),
            phases=np.asarray(data.phase).astype(str)[rows],
            method=self.settings.method,
            quality=self.settings.quality,
            previous=previous,
            threads=self.settings.threads,
            progress=progress,
        )
