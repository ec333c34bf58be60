//! Rays of whole data sets, as numpy arrays.

use numpy::{IntoPyArray, PyArray1, PyArray2, PyArrayMethods, PyReadonlyArray1, PyReadonlyArray2};
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;
use rayloom_core::blocks::Blocks;
use rayloom_core::error::{CoreError, Result};
use rayloom_core::frame::{FlatChart, SphereChart};
use rayloom_core::quality::Quality;
use rayloom_core::rays::{self, Earlier, Method, RayBatch};
use rayloom_core::waves::DistantWaves;

use crate::earth::{LayeredEarth, phase_named};
use crate::gate::{Progress, run_long};

/// Edges and slowness of a block model, and the sphere it lies on.
#[pyclass(frozen, module = "rayloom._core")]
struct BlockModel {
    form: Form,
}

enum Form {
    Flat(Blocks<FlatChart>),
    Sphere(Blocks<SphereChart>),
}

#[pymethods]
impl BlockModel {
    /// Edges in km (arcs at `radius_km` for x and y on the sphere); a flat model
    /// without a radius.
    #[new]
    #[pyo3(signature = (x_edges_km, y_edges_km, depth_edges_km, slowness_s_per_km, *, radius_km=None))]
    fn new(
        x_edges_km: PyReadonlyArray1<'_, f64>,
        y_edges_km: PyReadonlyArray1<'_, f64>,
        depth_edges_km: PyReadonlyArray1<'_, f64>,
        slowness_s_per_km: PyReadonlyArray1<'_, f64>,
        radius_km: Option<f64>,
    ) -> PyResult<Self> {
        let edges = [
            x_edges_km.as_slice()?.to_vec(),
            y_edges_km.as_slice()?.to_vec(),
            depth_edges_km.as_slice()?.to_vec(),
        ];
        let slowness = slowness_s_per_km.as_slice()?.to_vec();
        let form = match radius_km {
            None => Blocks::new(FlatChart, edges, slowness).map(Form::Flat),
            Some(radius) => {
                Blocks::new(SphereChart::new(radius), edges, slowness).map(Form::Sphere)
            }
        };
        form.map(|form| Self { form })
            .map_err(|error| PyValueError::new_err(error.to_string()))
    }
}

/// Rays in the order of their pairs; see the core's `RayBatch`.
#[pyclass(frozen, get_all, module = "rayloom._core")]
struct RayArrays {
    traced: Py<PyArray1<bool>>,
    time_s: Py<PyArray1<f64>>,
    outside_time_s: Py<PyArray1<f64>>,
    row_pointers: Py<PyArray1<i64>>,
    columns: Py<PyArray1<i32>>,
    lengths_km: Py<PyArray1<f64>>,
    point_offsets: Py<PyArray1<i64>>,
    points_km: Py<PyArray2<f64>>,
    bound_check: (usize, usize, f64),
}

impl RayArrays {
    fn new(py: Python<'_>, batch: RayBatch) -> PyResult<Self> {
        let points = batch.points_km.len();
        let check = batch.bound_check;
        Ok(Self {
            traced: batch.traced.into_pyarray(py).unbind(),
            time_s: batch.time_s.into_pyarray(py).unbind(),
            outside_time_s: batch.outside_time_s.into_pyarray(py).unbind(),
            row_pointers: batch.row_pointers.into_pyarray(py).unbind(),
            columns: batch.columns.into_pyarray(py).unbind(),
            lengths_km: batch.lengths_km.into_pyarray(py).unbind(),
            point_offsets: batch.point_offsets.into_pyarray(py).unbind(),
            points_km: batch
                .points_km
                .into_flattened()
                .into_pyarray(py)
                .reshape([points, 3])?
                .unbind(),
            bound_check: (check.checked, check.improved, check.largest_gain_s),
        })
    }
}

/// Rays between points inside a model.
#[pyfunction]
#[pyo3(signature = (model, sources_km, receivers_km, pairs, *, method, quality, coarse_nodes=None, threads=None, progress=None))]
#[expect(
    clippy::too_many_arguments,
    reason = "keyword arguments of a Python call"
)]
fn trace_between(
    py: Python<'_>,
    model: &BlockModel,
    sources_km: PyReadonlyArray2<'_, f64>,
    receivers_km: PyReadonlyArray2<'_, f64>,
    pairs: PyReadonlyArray2<'_, u32>,
    method: &str,
    quality: &str,
    coarse_nodes: Option<usize>,
    threads: Option<usize>,
    progress: Progress,
) -> PyResult<RayArrays> {
    let (sources, receivers) = (rows(&sources_km)?, rows(&receivers_km)?);
    let pairs = rows(&pairs)?;
    let method = match method {
        "bent" => Method::Bent,
        "graph" => Method::Graph,
        "straight" => Method::Straight,
        _ => return Err(unknown("method", "bent, graph or straight", method)),
    };
    let choice = (method, quality_named(quality, coarse_nodes)?);
    let batch = run_long(py, threads, &progress, |monitor| match &model.form {
        Form::Flat(blocks) => {
            rays::trace_between(blocks, sources, receivers, pairs, choice, monitor)
        }
        Form::Sphere(blocks) => {
            rays::trace_between(blocks, sources, receivers, pairs, choice, monitor)
        }
    })?;
    RayArrays::new(py, batch)
}

/// Rays of distant events: `epicentres_km` and `source_depths_km` place them, the
/// layered Earth brings one phase of each to the blocks.
#[pyfunction]
#[pyo3(signature = (model, earth, phases, epicentres_km, source_depths_km, stations_km, pairs, *, quality, coarse_nodes=None, earlier=None, threads=None, progress=None))]
#[expect(
    clippy::too_many_arguments,
    reason = "keyword arguments of a Python call"
)]
fn trace_distant(
    py: Python<'_>,
    model: &BlockModel,
    earth: &LayeredEarth,
    phases: Vec<String>,
    epicentres_km: PyReadonlyArray2<'_, f64>,
    source_depths_km: PyReadonlyArray1<'_, f64>,
    stations_km: PyReadonlyArray2<'_, f64>,
    pairs: PyReadonlyArray2<'_, u32>,
    quality: &str,
    coarse_nodes: Option<usize>,
    earlier: Option<(PyReadonlyArray1<'_, i64>, PyReadonlyArray2<'_, f64>)>,
    threads: Option<usize>,
    progress: Progress,
) -> PyResult<RayArrays> {
    let (epicentres, stations) = (rows(&epicentres_km)?, rows(&stations_km)?);
    let (depths_km, pairs) = (source_depths_km.as_slice()?, rows(&pairs)?);
    let quality = quality_named(quality, coarse_nodes)?;
    let earlier = match &earlier {
        Some((offsets, points)) => Some(Earlier {
            point_offsets: offsets.as_slice()?,
            points_km: rows(points)?,
        }),
        None => None,
    };
    let phases = phases
        .iter()
        .map(|name| phase_named(name))
        .collect::<PyResult<Vec<_>>>()?;
    let batch = run_long(py, threads, &progress, |monitor| {
        let blocks = on_sphere(model)?;
        let waves = DistantWaves::new(blocks, &earth.earth, &phases, epicentres, depths_km)?;
        rays::trace_distant(blocks, waves, stations, pairs, quality, earlier, monitor)
    })?;
    RayArrays::new(py, batch)
}

/// Straight chords from entry points, reached after `outside_time_s`, to
/// stations; no chord where that time is not finite.
#[pyfunction]
fn straight_from_entries(
    py: Python<'_>,
    model: &BlockModel,
    entries_km: PyReadonlyArray2<'_, f64>,
    outside_time_s: PyReadonlyArray1<'_, f64>,
    stations_km: PyReadonlyArray2<'_, f64>,
) -> PyResult<RayArrays> {
    let (entries, stations) = (rows(&entries_km)?, rows(&stations_km)?);
    let outside = outside_time_s.as_slice()?;
    let batch = crate::gate::run_short(py, || {
        rays::straight_from_entries(on_sphere(model)?, entries, outside, stations)
    })?;
    RayArrays::new(py, batch)
}

fn on_sphere(model: &BlockModel) -> Result<&Blocks<SphereChart>> {
    match &model.form {
        Form::Sphere(blocks) => Ok(blocks),
        Form::Flat(_) => Err(CoreError::invalid(
            "frame",
            "a sphere, for waves of distant events",
            "a flat frame",
        )),
    }
}

fn quality_named(name: &str, coarse_nodes: Option<usize>) -> PyResult<Quality> {
    let mut quality = match name {
        "standard" => Quality::standard(),
        "thorough" => Quality::thorough(),
        _ => return Err(unknown("quality", "standard or thorough", name)),
    };
    if let Some(nodes) = coarse_nodes {
        if !(1..=4).contains(&nodes) {
            return Err(unknown("face_nodes", "1 to 4", &nodes.to_string()));
        }
        quality.coarse_nodes = nodes;
        quality.uniform_nodes = true;
    }
    Ok(quality)
}

fn unknown(what: &str, expected: &str, got: &str) -> PyErr {
    PyValueError::new_err(format!("{what}: expected {expected}, got {got}"))
}

/// The rows of a contiguous array with `N` columns.
fn rows<'a, T: numpy::Element, const N: usize>(
    array: &'a PyReadonlyArray2<'_, T>,
) -> PyResult<&'a [[T; N]]> {
    let (rows, rest) = array.as_slice()?.as_chunks::<N>();
    if rest.is_empty() && array.as_array().ncols() == N {
        Ok(rows)
    } else {
        Err(PyValueError::new_err(format!("expected {N} columns")))
    }
}

pub fn register(module: &Bound<'_, PyModule>) -> PyResult<()> {
    module.add_class::<BlockModel>()?;
    module.add_class::<RayArrays>()?;
    module.add_function(wrap_pyfunction!(trace_between, module)?)?;
    module.add_function(wrap_pyfunction!(trace_distant, module)?)?;
    module.add_function(wrap_pyfunction!(straight_from_entries, module)?)
}
