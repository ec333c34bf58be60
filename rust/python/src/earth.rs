//! One-dimensional Earth models and tables of first arrivals.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::prelude::*;
use rayloom_core::earth;

use crate::gate::run_short;

/// The velocity of one wave type, linear in radius between tabulated depths.
#[pyclass(frozen, module = "rayloom._core")]
pub struct RadialModel {
    pub model: earth::RadialModel,
}

#[pymethods]
impl RadialModel {
    #[new]
    fn new(
        py: Python<'_>,
        depth_km: PyReadonlyArray1<'_, f64>,
        velocity_km_s: PyReadonlyArray1<'_, f64>,
        radius_km: f64,
    ) -> PyResult<Self> {
        let (depth_km, velocity_km_s) = (depth_km.as_slice()?, velocity_km_s.as_slice()?);
        let model = run_short(py, || {
            earth::RadialModel::new(depth_km, velocity_km_s, radius_km)
        })?;
        Ok(Self { model })
    }
}

/// First arrivals from one source depth in a window of distance and depth.
#[pyclass(frozen, module = "rayloom._core")]
pub struct WavefrontTable {
    pub table: earth::WavefrontTable,
}

/// Times, ∂T/∂Δ and ∂T/∂(depth).
type Arrivals<'py> = (
    Bound<'py, PyArray1<f64>>,
    Bound<'py, PyArray1<f64>>,
    Bound<'py, PyArray1<f64>>,
);

#[pymethods]
impl WavefrontTable {
    #[new]
    #[pyo3(signature = (model, source_depth_km, *, top_km, bottom_km, min_distance_rad, max_distance_rad))]
    fn new(
        py: Python<'_>,
        model: &RadialModel,
        source_depth_km: f64,
        top_km: f64,
        bottom_km: f64,
        min_distance_rad: f64,
        max_distance_rad: f64,
    ) -> PyResult<Self> {
        let table = run_short(py, || {
            earth::WavefrontTable::build(
                &model.model,
                source_depth_km,
                top_km,
                bottom_km,
                min_distance_rad,
                max_distance_rad,
            )
        })?;
        Ok(Self { table })
    }

    /// Time, ∂T/∂Δ and ∂T/∂(depth) at each point; NaN where no ray arrives.
    fn at<'py>(
        &self,
        py: Python<'py>,
        distance_rad: PyReadonlyArray1<'py, f64>,
        depth_km: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Arrivals<'py>> {
        let (distance_rad, depth_km) = (distance_rad.as_slice()?, depth_km.as_slice()?);
        let [time_s, per_radian_s, per_depth] =
            run_short(py, || self.table.at_all(distance_rad, depth_km))?;
        Ok((
            time_s.into_pyarray(py),
            per_radian_s.into_pyarray(py),
            per_depth.into_pyarray(py),
        ))
    }
}

pub fn register(module: &Bound<'_, PyModule>) -> PyResult<()> {
    module.add_class::<RadialModel>()?;
    module.add_class::<WavefrontTable>()
}
