//! `G x` and `Gᵀ y` on a CSR matrix held in the core.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;
use rayloom_core::products::SparseRows;

use crate::gate::{rayon_pool, run_short};

/// A CSR matrix with float64 values whose products run on several threads and
/// have the same bits on any number of them.
#[pyclass(frozen, module = "rayloom._core")]
struct SparseProducts {
    matrix: SparseRows<f64>,
    pool: rayon::ThreadPool,
}

#[pymethods]
impl SparseProducts {
    #[new]
    #[pyo3(signature = (row_pointers, columns, values, column_count, *, threads=None))]
    fn new(
        py: Python<'_>,
        row_pointers: PyReadonlyArray1<'_, i64>,
        columns: PyReadonlyArray1<'_, i32>,
        values: PyReadonlyArray1<'_, f64>,
        column_count: usize,
        threads: Option<usize>,
    ) -> PyResult<Self> {
        let arrays = (
            row_pointers.as_slice()?.to_vec(),
            columns.as_slice()?.to_vec(),
            values.as_slice()?.to_vec(),
        );
        let matrix = run_short(py, || {
            SparseRows::new(arrays.0, arrays.1, arrays.2, column_count)
        })?;
        Ok(Self {
            matrix,
            pool: rayon_pool(threads)?,
        })
    }

    /// `G x`.
    fn times<'py>(
        &self,
        py: Python<'py>,
        x: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray1<f64>>> {
        let x = x.as_slice()?;
        let out = run_short(py, || {
            let mut out = vec![0.0; self.matrix.row_count()];
            self.pool.install(|| self.matrix.times(x, &mut out))?;
            Ok(out)
        })?;
        Ok(out.into_pyarray(py))
    }

    /// `Gᵀ y`.
    fn transposed_times<'py>(
        &self,
        py: Python<'py>,
        y: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray1<f64>>> {
        let y = y.as_slice()?;
        let out = run_short(py, || {
            let mut out = vec![0.0; self.matrix.column_count()];
            self.pool
                .install(|| self.matrix.transposed_times(y, &mut out))?;
            Ok(out)
        })?;
        Ok(out.into_pyarray(py))
    }
}

pub fn register(module: &Bound<'_, PyModule>) -> PyResult<()> {
    module.add_class::<SparseProducts>()
}
