//! Waves of distant events as they meet a model: [`DistantWaves`].

use std::f64::consts::PI;

use rayon::prelude::*;

use crate::blocks::Blocks;
use crate::earth::{HIGHEST_KM, LayeredEarth, Phase, WavefrontTable};
use crate::error::{CoreError, Result};
use crate::frame::{Chart, SphereChart};
use crate::vec3::dot;

/// Margin (rad) around the distances of a model's corners, in a wave's table.
const DISTANCE_MARGIN_RAD: f64 = 0.01;
/// Distances (rad) between which a direct wave may enter a model.
const ENTRY_DISTANCES_RAD: (f64, f64) = (0.30, 1.75);

/// The waves of distant events on the way to a model.
#[derive(Debug)]
pub struct DistantWaves {
    pub(crate) tables: Vec<Option<WavefrontTable>>,
    pub(crate) epicentres: Vec<[f64; 2]>,
}

impl DistantWaves {
    /// Tabulates first arrivals of `phases` from events at `epicentres` (grid
    /// coordinates, km) and `depths_km`, one of each per wave, in the part of the
    /// Earth that holds the model.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if an event lies outside the mantle or the arrays'
    /// lengths disagree.
    pub fn new(
        blocks: &Blocks<SphereChart>,
        earth: &LayeredEarth,
        phases: &[&Phase],
        epicentres: &[[f64; 2]],
        depths_km: &[f64],
    ) -> Result<Self> {
        if epicentres.len() != depths_km.len() || epicentres.len() != phases.len() {
            return Err(CoreError::invalid(
                "phases and source depths",
                format!("{} of each, one per epicentre", epicentres.len()),
                format!("{} and {}", phases.len(), depths_km.len()),
            ));
        }
        let tables = epicentres
            .par_iter()
            .zip(depths_km)
            .zip(phases)
            .map(|((&epicentre, &depth_km), phase)| {
                wave_table(blocks, earth, phase, epicentre, depth_km)
            })
            .collect::<Result<Vec<_>>>()?;
        Ok(Self {
            tables,
            epicentres: epicentres.to_vec(),
        })
    }

    /// Number of waves.
    #[must_use]
    pub fn len(&self) -> usize {
        self.tables.len()
    }

    /// True without waves.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.tables.is_empty()
    }
}

/// The table of one wave over the model's distances; `None` for a direct wave if
/// they all lie outside those at which it may enter.
fn wave_table(
    blocks: &Blocks<SphereChart>,
    earth: &LayeredEarth,
    phase: &Phase,
    epicentre: [f64; 2],
    depth_km: f64,
) -> Result<Option<WavefrontTable>> {
    let chart = blocks.chart();
    let pole = chart.position([epicentre[0], epicentre[1], 0.0]);
    let (mut near, mut far) = (f64::INFINITY, 0.0_f64);
    for &x in blocks.edges(0) {
        for &y in blocks.edges(1) {
            let cosine = dot(pole, chart.position([x, y, 0.0])) / chart.radius_km().powi(2);
            let distance = cosine.clamp(-1.0, 1.0).acos();
            (near, far) = (near.min(distance), far.max(distance));
        }
    }
    let allowed = if phase.is_direct() {
        ENTRY_DISTANCES_RAD
    } else {
        (0.0, PI)
    };
    let near = (near - DISTANCE_MARGIN_RAD).max(allowed.0);
    let far = (far + DISTANCE_MARGIN_RAD).min(allowed.1);
    if near >= far {
        return Ok(None);
    }
    let depths = blocks.edges(2);
    let top_km = depths[0].max(-HIGHEST_KM);
    let bottom_km = depths[depths.len() - 1].min(earth.core_depth_km());
    WavefrontTable::build(earth, phase, depth_km, (top_km, bottom_km), (near, far)).map(Some)
}
