"""Errors of travel times in few numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

LATE_MS = 30.0


@dataclass(frozen=True)
class ErrorSummary:
    """Errors, ms; ``late_percent`` is the share later than 30 ms."""

    mean: float
    p95: float
    maximum: float
    late_percent: float

    def cells(self) -> tuple[float, ...]:
        """Return the row of a table."""
        return self.mean, self.p95, self.maximum, self.late_percent


ERROR_COLUMNS = ("mean size (ms)", "p95 (ms)", "max (ms)", "later than 30 ms (%)")


def summarise(found_s: ArrayLike, exact_s: ArrayLike) -> ErrorSummary:
    """Summarise found minus exact times."""
    error = 1e3 * (np.asarray(found_s) - np.asarray(exact_s))
    size = np.abs(error)
    late = 100.0 * float(np.mean(error > LATE_MS))
    return ErrorSummary(
        float(size.mean()), float(np.percentile(size, 95)), float(size.max()), late
    )
