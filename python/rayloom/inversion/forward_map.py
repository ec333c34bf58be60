"""What the inversion asks of a tracer: a model in, times and paths out.

The outer loop knows rays only through :class:`ForwardMap` and
:class:`Prediction`, so that any source of rays can stand behind it.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from rayloom.model import SlownessModel

Report = Callable[[str, int, int], None]
"""Told (stage, done, total) as the work goes on; total 0 means unknown."""


class Prediction(Protocol):
    """Rays of one model, one per pair of event and station."""

    @property
    def time_s(self) -> NDArray[np.float64]:
        """Travel times, (rays,), s; NaN without a ray."""

    @property
    def path_lengths(self) -> csr_array:
        """Path of each ray in each block, (rays, blocks), km."""

    @property
    def traced(self) -> NDArray[np.bool_]:
        """Whether a ray exists, (rays,)."""

    @property
    def basin_jumps(self) -> int:
        """How many rays took another course than in the previous model."""


class ForwardMap(Protocol):
    """Predicts the times of all rays in a model."""

    def __call__(
        self,
        model: SlownessModel,
        *,
        previous: Any,
        progress: Callable[[int, int], None] | None,
    ) -> Prediction:
        """Trace.

        Parameters
        ----------
        model : SlownessModel
            The blocks.
        previous : Prediction or None
            What this map returned for a similar model, to start from.
        progress : callable or None
            Told (done, total).
        """
