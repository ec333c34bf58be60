"""Products with sparse rows held in the core, against scipy's."""

import numpy as np
import pytest
from scipy.sparse import csr_array, random_array

from rayloom._core import SparseProducts

SHAPES = [(1, 1), (3, 50), (700, 40), (257, 9000), (5, 1)]


def products(matrix: csr_array, **options: int) -> SparseProducts:
    return SparseProducts(
        matrix.indptr.astype(np.int64),
        matrix.indices.astype(np.int32),
        matrix.data,
        matrix.shape[1],
        **options,
    )


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_products_equal_those_of_scipy(shape, dtype):
    # Reference library: scipy.sparse. Densities leave many rows empty.
    random = np.random.default_rng(7)
    for density in (0.0, 0.01, 0.6):
        matrix = csr_array(random_array(shape, density=density, rng=random, dtype=dtype))
        own, exact = products(matrix, threads=2), matrix.astype(np.float64)
        x, y = random.standard_normal(shape[1]), random.standard_normal(shape[0])
        np.testing.assert_allclose(own.times(x), exact @ x, rtol=1e-12, atol=1e-12)
        np.testing.assert_allclose(own.transposed_times(y), exact.T @ y, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_product_and_transposed_product_are_adjoint(dtype):
    # <G x, y> = <x, Gᵀ y>, the definition of the adjoint.
    random = np.random.default_rng(8)
    matrix = csr_array(random_array((400, 900), density=0.05, rng=random, dtype=dtype))
    own = products(matrix)
    x, y = random.standard_normal(900), random.standard_normal(400)
    assert own.times(x) @ y == pytest.approx(x @ own.transposed_times(y), rel=1e-12)


def test_other_types_of_values_are_refused():
    with pytest.raises(ValueError, match="float64 or float32"):
        SparseProducts(np.array([0, 1]), np.array([0], np.int32), np.array([1]), 1)
