"""What a range of models has in common.

Main type: :class:`Agreement`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Agreement:
    """Lowest and highest perturbation among several models, block by block.

    Attributes
    ----------
    lowest_percent, highest_percent : (nx, ny, nz) arrays
        Velocity perturbations, percent.
    """

    lowest_percent: NDArray[np.float64]
    highest_percent: NDArray[np.float64]

    @classmethod
    def of_models(cls, percent: Sequence[NDArray[np.float64]]) -> Agreement:
        """Compare models, at least one.

        Parameters
        ----------
        percent : sequence of (nx, ny, nz) arrays
            Velocity perturbations, percent.
        """
        return cls(np.minimum.reduce(list(percent)), np.maximum.reduce(list(percent)))

    @property
    def sign(self) -> NDArray[np.float64]:
        """Sign that a block has in all models: −1 slow, +1 fast, 0 where they differ."""
        return np.asarray(
            (self.lowest_percent > 0.0).astype(np.float64)
            - (self.highest_percent < 0.0).astype(np.float64)
        )

    @property
    def least_percent(self) -> NDArray[np.float64]:
        """The weakest perturbation among the models where all agree in sign, else 0."""
        return np.where(
            self.sign > 0.0,
            self.lowest_percent,
            np.where(self.sign < 0.0, self.highest_percent, 0),
        )
