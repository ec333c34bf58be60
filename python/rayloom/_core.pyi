import numpy as np
from numpy.typing import NDArray

class SparseProducts:
    def __new__(
        cls,
        row_pointers: NDArray[np.int64],
        columns: NDArray[np.int32],
        values: NDArray[np.float64],
        column_count: int,
        *,
        threads: int | None = None,
    ) -> SparseProducts: ...
    def times(self, x: NDArray[np.float64]) -> NDArray[np.float64]: ...
    def transposed_times(self, y: NDArray[np.float64]) -> NDArray[np.float64]: ...

class RadialModel:
    def __new__(
        cls,
        depth_km: NDArray[np.float64],
        velocity_km_s: NDArray[np.float64],
        radius_km: float,
    ) -> RadialModel: ...

class WavefrontTable:
    def __new__(
        cls,
        model: RadialModel,
        source_depth_km: float,
        *,
        top_km: float,
        bottom_km: float,
        min_distance_rad: float,
        max_distance_rad: float,
    ) -> WavefrontTable: ...
    def at(
        self, distance_rad: NDArray[np.float64], depth_km: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]: ...
