from collections.abc import Callable, Sequence
from typing import final

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "BlockModel",
    "LayeredEarth",
    "RadialModel",
    "RayArrays",
    "SparseProducts",
    "WavefrontTable",
    "straight_from_entries",
    "trace_between",
    "trace_distant",
]

@final
class SparseProducts:
    def __new__(
        cls,
        row_pointers: NDArray[np.int64],
        columns: NDArray[np.int32],
        values: NDArray[np.float64] | NDArray[np.float32],
        column_count: int,
        *,
        threads: int | None = None,
    ) -> SparseProducts: ...
    def times(self, x: NDArray[np.float64]) -> NDArray[np.float64]: ...
    def transposed_times(self, y: NDArray[np.float64]) -> NDArray[np.float64]: ...

@final
class RadialModel:
    def __new__(
        cls,
        depth_km: NDArray[np.float64],
        velocity_km_s: NDArray[np.float64],
        radius_km: float,
    ) -> RadialModel: ...
    def velocity_km_s(
        self, depth_km: NDArray[np.float64], *, below: bool
    ) -> NDArray[np.float64]: ...
    def mean_slowness_s_per_km(
        self, depth_edges_km: NDArray[np.float64]
    ) -> NDArray[np.float64]: ...

@final
class LayeredEarth:
    def __new__(
        cls,
        depth_km: NDArray[np.float64],
        p_velocity_km_s: NDArray[np.float64],
        s_velocity_km_s: NDArray[np.float64],
        density_g_cm3: NDArray[np.float64],
        radius_km: float,
    ) -> LayeredEarth: ...
    def mantle(self, wave: str) -> RadialModel: ...
    def first_arrivals(
        self,
        phase: str,
        distance_rad: NDArray[np.float64],
        source_depth_km: NDArray[np.float64],
        receiver_depth_km: NDArray[np.float64],
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]: ...
    def ellipticity_s(
        self,
        phase: str,
        distance_rad: NDArray[np.float64],
        ray_parameter_s: NDArray[np.float64],
        source_depth_km: NDArray[np.float64],
        latitude_rad: NDArray[np.float64],
        azimuth_rad: NDArray[np.float64],
    ) -> NDArray[np.float64]: ...
    def ellipticity(self, radius_km: NDArray[np.float64]) -> NDArray[np.float64]: ...
    @staticmethod
    def phases() -> list[tuple[str, str, str | None]]: ...

@final
class WavefrontTable:
    def __new__(
        cls,
        earth: LayeredEarth,
        phase: str,
        source_depth_km: float,
        *,
        depths_km: tuple[float, float],
        distances_rad: tuple[float, float],
    ) -> WavefrontTable: ...
    def at(
        self, distance_rad: NDArray[np.float64], depth_km: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]: ...

@final
class BlockModel:
    def __new__(
        cls,
        x_edges_km: NDArray[np.float64],
        y_edges_km: NDArray[np.float64],
        depth_edges_km: NDArray[np.float64],
        slowness_s_per_km: NDArray[np.float64],
        *,
        radius_km: float | None = None,
    ) -> BlockModel: ...

@final
class RayArrays:
    @property
    def traced(self) -> NDArray[np.bool_]: ...
    @property
    def time_s(self) -> NDArray[np.float64]: ...
    @property
    def outside_time_s(self) -> NDArray[np.float64]: ...
    @property
    def row_pointers(self) -> NDArray[np.int64]: ...
    @property
    def columns(self) -> NDArray[np.int32]: ...
    @property
    def lengths_km(self) -> NDArray[np.float64]: ...
    @property
    def point_offsets(self) -> NDArray[np.int64]: ...
    @property
    def points_km(self) -> NDArray[np.float64]: ...
    @property
    def bound_check(self) -> tuple[int, int, float]: ...

def trace_between(
    model: BlockModel,
    sources_km: NDArray[np.float64],
    receivers_km: NDArray[np.float64],
    pairs: NDArray[np.uint32],
    *,
    method: str,
    quality: str,
    coarse_nodes: int | None = None,
    threads: int | None = None,
    progress: Callable[[int, int], object] | None = None,
) -> RayArrays: ...
def trace_distant(
    model: BlockModel,
    earth: LayeredEarth,
    phases: Sequence[str],
    epicentres_km: NDArray[np.float64],
    source_depths_km: NDArray[np.float64],
    stations_km: NDArray[np.float64],
    pairs: NDArray[np.uint32],
    *,
    quality: str,
    coarse_nodes: int | None = None,
    earlier: tuple[NDArray[np.int64], NDArray[np.float64]] | None = None,
    threads: int | None = None,
    progress: Callable[[int, int], object] | None = None,
) -> RayArrays: ...
def straight_from_entries(
    model: BlockModel,
    entries_km: NDArray[np.float64],
    outside_time_s: NDArray[np.float64],
    stations_km: NDArray[np.float64],
) -> RayArrays: ...
