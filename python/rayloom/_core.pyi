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
