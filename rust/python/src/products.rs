//! `G x` and `Gᵀ y` on a CSR matrix held in the core.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;
use rayloom_core::error::Result;
use rayloom_core::products::SparseRows;

use crate::gate::{rayon_pool, run_short};

/// A CSR matrix with float64 or float32 values whose products run on several
/// threads and have the same bits on any number of them.
#[pyclass(frozen, module = "rayloom._core")]
struct SparseProducts {
    matrix: Matrix,
    pool: rayon::ThreadPool,
}

enum Matrix {
    Double(SparseRows<f64>),
    Single(SparseRows<f32>),
}

impl Matrix {
    fn times(&self, x: &[f64]) -> Result<Vec<f64>> {
        match self {
            Self::Double(rows) => {
                let mut out = vec![0.0; rows.row_count()];
                rows.times(x, &mut out).map(|()| out)
            }
            Self::Single(rows) => {
                let mut out = vec![0.0; rows.row_count()];
                rows.times(x, &mut out).map(|()| out)
            }
        }
    }

    fn transposed_times(&self, y: &[f64]) -> Result<Vec<f64>> {
        match self {
            Self::Double(rows) => {
                let mut out = vec![0.0; rows.column_count()];
                rows.transposed_times(y, &mut out).map(|()| out)
            }
            Self::Single(rows) => {
                let mut out = vec![0.0; rows.column_count()];
                rows.transposed_times(y, &mut out).map(|()| out)
            }
        }
    }
}

#[pymethods]
impl SparseProducts {
    #[new]
    #[pyo3(signature = (row_pointers, columns, values, column_count, *, threads=None))]
    fn new(
        py: Python<'_>,
        row_pointers: PyReadonlyArray1<'_, i64>,
        columns: PyReadonlyArray1<'_, i32>,
        values: &Bound<'_, PyAny>,
        column_count: usize,
        threads: Option<usize>,
    ) -> PyResult<Self> {
        let rows = row_pointers.as_slice()?.to_vec();
        let columns = columns.as_slice()?.to_vec();
        let matrix = if let Ok(values) = values.extract::<PyReadonlyArray1<'_, f64>>() {
            let values = values.as_slice()?.to_vec();
            run_short(py, || {
                SparseRows::new(rows, columns, values, column_count).map(Matrix::Double)
            })?
        } else if let Ok(values) = values.extract::<PyReadonlyArray1<'_, f32>>() {
            let values = values.as_slice()?.to_vec();
            run_short(py, || {
                SparseRows::new(rows, columns, values, column_count).map(Matrix::Single)
            })?
        } else {
            return Err(PyValueError::new_err(
                "values: expected a one-dimensional array of float64 or float32",
            ));
        };
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
        let out = run_short(py, || self.pool.install(|| self.matrix.times(x)))?;
        Ok(out.into_pyarray(py))
    }

    /// `Gᵀ y`.
    fn transposed_times<'py>(
        &self,
        py: Python<'py>,
        y: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Bound<'py, PyArray1<f64>>> {
        let y = y.as_slice()?;
        let out = run_short(py, || self.pool.install(|| self.matrix.transposed_times(y)))?;
        Ok(out.into_pyarray(py))
    }
}

pub fn register(module: &Bound<'_, PyModule>) -> PyResult<()> {
    module.add_class::<SparseProducts>()
}
