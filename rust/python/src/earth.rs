//! One-dimensional Earth models and tables of first arrivals.

use numpy::{IntoPyArray, PyArray1, PyReadonlyArray1};
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;
use rayloom_core::earth::{self, Departures, EllipticityProfile, PHASES, Pairs, Phase, Side, Wave};

use crate::gate::run_short;

/// An array handed to Python.
type Array<'py> = Bound<'py, PyArray1<f64>>;

/// Times, ∂T/∂Δ and ∂T/∂(depth).
type Gradients<'py> = (Array<'py>, Array<'py>, Array<'py>);

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

    /// Velocity at each depth, at a discontinuity that on the side named.
    #[pyo3(signature = (depth_km, *, below))]
    fn velocity_km_s<'py>(
        &self,
        py: Python<'py>,
        depth_km: PyReadonlyArray1<'py, f64>,
        below: bool,
    ) -> PyResult<Array<'py>> {
        let depth_km = depth_km.as_slice()?;
        let side = if below { Side::Below } else { Side::Above };
        let out = run_short(py, || self.model.velocities_km_s(depth_km, side))?;
        Ok(out.into_pyarray(py))
    }

    /// Mean of 1/v between each pair of neighbouring depths.
    fn mean_slowness_s_per_km<'py>(
        &self,
        py: Python<'py>,
        depth_edges_km: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Array<'py>> {
        let edges_km = depth_edges_km.as_slice()?;
        let out = run_short(py, || self.model.mean_slowness_s_per_km(edges_km))?;
        Ok(out.into_pyarray(py))
    }
}

/// Both wave types and the ellipticity of a whole Earth.
#[pyclass(frozen, module = "rayloom._core")]
pub struct LayeredEarth {
    pub earth: earth::LayeredEarth,
    profile: EllipticityProfile,
}

#[pymethods]
impl LayeredEarth {
    #[new]
    fn new(
        py: Python<'_>,
        depth_km: PyReadonlyArray1<'_, f64>,
        p_velocity_km_s: PyReadonlyArray1<'_, f64>,
        s_velocity_km_s: PyReadonlyArray1<'_, f64>,
        density_g_cm3: PyReadonlyArray1<'_, f64>,
        radius_km: f64,
    ) -> PyResult<Self> {
        let depth_km = depth_km.as_slice()?;
        let (p, s) = (p_velocity_km_s.as_slice()?, s_velocity_km_s.as_slice()?);
        let density = density_g_cm3.as_slice()?;
        run_short(py, || {
            Ok(Self {
                earth: earth::LayeredEarth::new(depth_km, p, s, radius_km)?,
                profile: EllipticityProfile::hydrostatic(depth_km, density, radius_km)?,
            })
        })
    }

    /// The model of one wave type down to the core.
    fn mantle(&self, wave: &str) -> PyResult<RadialModel> {
        let wave = match wave {
            "P" => Wave::P,
            "S" => Wave::S,
            _ => return Err(unknown("wave", "\"P\" or \"S\"", wave)),
        };
        Ok(RadialModel {
            model: self.earth.mantle(wave),
        })
    }

    /// Time and ray parameter of the first arrival of each pair; NaN if none.
    fn first_arrivals<'py>(
        &self,
        py: Python<'py>,
        phase: &str,
        distance_rad: PyReadonlyArray1<'py, f64>,
        source_depth_km: PyReadonlyArray1<'py, f64>,
        receiver_depth_km: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<(Array<'py>, Array<'py>)> {
        let phase = phase_named(phase)?;
        let pairs = Pairs {
            distance_rad: distance_rad.as_slice()?,
            source_depth_km: source_depth_km.as_slice()?,
            receiver_depth_km: receiver_depth_km.as_slice()?,
        };
        let arrivals = run_short(py, || earth::first_arrivals(&self.earth, phase, pairs))?;
        let (time_s, parameter_s): (Vec<f64>, Vec<f64>) = arrivals
            .iter()
            .map(|arrival| (arrival.time_s, arrival.ray_parameter_s))
            .unzip();
        Ok((time_s.into_pyarray(py), parameter_s.into_pyarray(py)))
    }

    /// Change of travel time by ellipticity for rays of given distances and
    /// parameters that end at sea level.
    #[expect(clippy::too_many_arguments, reason = "arrays of a Python call")]
    fn ellipticity_s<'py>(
        &self,
        py: Python<'py>,
        phase: &str,
        distance_rad: PyReadonlyArray1<'py, f64>,
        ray_parameter_s: PyReadonlyArray1<'py, f64>,
        source_depth_km: PyReadonlyArray1<'py, f64>,
        latitude_rad: PyReadonlyArray1<'py, f64>,
        azimuth_rad: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Array<'py>> {
        let phase = phase_named(phase)?;
        let ray_parameter_s = ray_parameter_s.as_slice()?;
        let departures = Departures {
            source_depth_km: source_depth_km.as_slice()?,
            latitude_rad: latitude_rad.as_slice()?,
            azimuth_rad: azimuth_rad.as_slice()?,
            distance_rad: distance_rad.as_slice()?,
        };
        let out = run_short(py, || {
            earth::ellipticity_s(
                &self.earth,
                &self.profile,
                phase,
                departures,
                ray_parameter_s,
            )
        })?;
        Ok(out.into_pyarray(py))
    }

    /// Hydrostatic ellipticity at each radius.
    fn ellipticity<'py>(
        &self,
        py: Python<'py>,
        radius_km: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Array<'py>> {
        let radius_km = radius_km.as_slice()?;
        let out = run_short(py, || Ok(self.profile.at_all(radius_km)))?;
        Ok(out.into_pyarray(py))
    }

    /// Names of the phases known, the wave as which each arrives, and its alias.
    #[staticmethod]
    fn phases() -> Vec<(&'static str, &'static str, Option<&'static str>)> {
        PHASES
            .iter()
            .map(|phase| (phase.name, wave_name(phase.arriving_wave()), phase.alias))
            .collect()
    }
}

fn wave_name(wave: Wave) -> &'static str {
    match wave {
        Wave::P => "P",
        Wave::S => "S",
    }
}

pub fn phase_named(name: &str) -> PyResult<&'static Phase> {
    Phase::named(name).ok_or_else(|| {
        let known = PHASES.map(|phase| phase.name).join(", ");
        unknown("phase", &format!("one of {known}"), name)
    })
}

fn unknown(what: &str, expected: &str, got: &str) -> PyErr {
    PyValueError::new_err(format!("{what}: expected {expected}, got {got:?}"))
}

/// First arrivals from one source depth in a window of distance and depth.
#[pyclass(frozen, module = "rayloom._core")]
pub struct WavefrontTable {
    pub table: earth::WavefrontTable,
}

#[pymethods]
impl WavefrontTable {
    #[new]
    #[pyo3(signature = (earth, phase, source_depth_km, *, depths_km, distances_rad))]
    fn new(
        py: Python<'_>,
        earth: &LayeredEarth,
        phase: &str,
        source_depth_km: f64,
        depths_km: (f64, f64),
        distances_rad: (f64, f64),
    ) -> PyResult<Self> {
        let phase = phase_named(phase)?;
        let earth = &earth.earth;
        let table = run_short(py, || {
            earth::WavefrontTable::build(earth, phase, source_depth_km, depths_km, distances_rad)
        })?;
        Ok(Self { table })
    }

    /// Time, ∂T/∂Δ and ∂T/∂(depth) at each point; NaN where no ray arrives.
    fn at<'py>(
        &self,
        py: Python<'py>,
        distance_rad: PyReadonlyArray1<'py, f64>,
        depth_km: PyReadonlyArray1<'py, f64>,
    ) -> PyResult<Gradients<'py>> {
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
    module.add_class::<LayeredEarth>()?;
    module.add_class::<WavefrontTable>()
}
