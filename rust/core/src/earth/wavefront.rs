//! First arrivals from one source depth at any point of a window of distance
//! and depth: [`WavefrontTable`].

use super::fan::Fan;
use super::layered::LayeredEarth;
use super::phase::Phase;
use super::radial::{RadialModel, Side};
use super::route::Route;
use crate::error::{CoreError, Result};

/// Spacing of the table's distances, degrees.
const STEP_DEG: f64 = 0.1;

/// Largest spacing of the table's depths, km.
const LEVEL_KM: f64 = 20.0;

/// Height of the bins by which a depth finds its cell, km.
const BIN_KM: f64 = 2.0;

/// How far beyond the window a depth may lie by rounding, km.
const ROUNDING_KM: f64 = 1e-9;

/// How far beyond its last ray a branch may be read, in steps of distance.
const ROUNDING_STEPS: f64 = 1e-9;

/// A first arrival and its gradient.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct WavefrontValue {
    /// Travel time from the source, s.
    pub time_s: f64,
    /// ∂T/∂Δ, the ray parameter, s/rad.
    pub per_radian_s: f64,
    /// ∂T/∂(depth) = −√(1/v² − p²/r²), negative: the ray rises, s/km.
    pub per_depth_s_per_km: f64,
}

/// First-arrival times of one phase from one source depth, at receivers inside a
/// window of distance and depth.
///
/// Bicubic Hermite interpolation between nodes that hold the time, its two
/// slopes and its mixed derivative; a depth cell never crosses a tabulated
/// depth of the model, and slopes at its ends are those inside it.
#[derive(Debug, Clone)]
pub struct WavefrontTable {
    source_depth_km: f64,
    first_rad: f64,
    step_rad: f64,
    columns: usize,
    cells: Vec<Cell>,
    /// The cell that holds the top of each depth bin.
    bins: Vec<u32>,
    /// Row by row: T.
    times_s: Vec<f64>,
    /// Row by row: ∂T/∂Δ, ∂T/∂z, ∂²T/∂Δ∂z, whose last digits bear on none of T's.
    slopes: Vec<[f32; 3]>,
}

/// A range of depth and the two rows of nodes that bound it.
#[derive(Debug, Clone, Copy)]
struct Cell {
    top_km: f64,
    bottom_km: f64,
    upper_row: usize,
    lower_row: usize,
}

impl WavefrontTable {
    /// Tabulates a phase from a source depth for receivers between two depths in
    /// km, the first of which may lie above sea level (negative), and between two
    /// distances in radians.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if a depth lies outside the mantle or the window is
    /// empty.
    pub fn build(
        earth: &LayeredEarth,
        phase: &Phase,
        source_depth_km: f64,
        depths_km: (f64, f64),
        distances_rad: (f64, f64),
    ) -> Result<Self> {
        let model = &earth.mantle(phase.arriving_wave());
        let route = earth.route(phase, source_depth_km)?;
        check_window(model, depths_km, distances_rad)?;
        let (top_km, bottom_km) = depths_km;
        let (min_distance_rad, max_distance_rad) = distances_rad;
        let step_rad = STEP_DEG.to_radians();
        let first = (min_distance_rad / step_rad).floor();
        let columns = ((max_distance_rad / step_rad).ceil() - first) as usize + 1;
        let levels = levels_km(model, top_km, bottom_km);
        let (cells, rows) = cells(model, &levels);
        let mut table = Self {
            source_depth_km,
            first_rad: first * step_rad,
            step_rad,
            columns: columns.max(2),
            bins: bins(&cells),
            cells,
            times_s: Vec::new(),
            slopes: Vec::new(),
        };
        table.fill(&route, &levels, &rows);
        Ok(table)
    }

    /// Depth of the source, km.
    #[must_use]
    pub fn source_depth_km(&self) -> f64 {
        self.source_depth_km
    }

    /// First arrival at a distance and depth; `None` outside the window and
    /// where no ray rises through the point. At a discontinuity the depth slope
    /// is that of the layer above.
    #[inline]
    #[must_use]
    pub fn at(&self, distance_rad: f64, depth_km: f64) -> Option<WavefrontValue> {
        let (cell, depth_km) = self.cell(depth_km)?;
        let position = (distance_rad - self.first_rad) / self.step_rad;
        let last = (self.columns - 1) as f64;
        if !(0.0..=last).contains(&position) {
            return None;
        }
        let column = (position as usize).min(self.columns - 2);
        let along = Hermite::new(position - column as f64, self.step_rad);
        let height = cell.bottom_km - cell.top_km;
        let down = Hermite::new((depth_km - cell.top_km) / height, height);

        let upper = along.blend(self.pair(cell.upper_row, column));
        let lower = along.blend(self.pair(cell.lower_row, column));
        let value = WavefrontValue {
            time_s: down.value([upper[0], upper[2]], [lower[0], lower[2]]),
            per_radian_s: down.value([upper[1], upper[3]], [lower[1], lower[3]]),
            per_depth_s_per_km: down.slope([upper[0], upper[2]], [lower[0], lower[2]]),
        };
        // A node without arrival spoils every sum above.
        (value.time_s.is_finite()).then_some(value)
    }

    /// Times, distance slopes and depth slopes at many points; NaN where
    /// [`WavefrontTable::at`] finds nothing.
    ///
    /// # Errors
    /// [`CoreError::Invalid`] if the two arrays differ in length.
    pub fn at_all(&self, distance_rad: &[f64], depth_km: &[f64]) -> Result<[Vec<f64>; 3]> {
        if distance_rad.len() != depth_km.len() {
            return Err(CoreError::invalid(
                "depths",
                format!("{}, one per distance", distance_rad.len()),
                depth_km.len().to_string(),
            ));
        }
        let mut out = [(); 3].map(|()| vec![f64::NAN; depth_km.len()]);
        for (i, (distance, depth)) in distance_rad.iter().zip(depth_km).enumerate() {
            if let Some(value) = self.at(*distance, *depth) {
                out[0][i] = value.time_s;
                out[1][i] = value.per_radian_s;
                out[2][i] = value.per_depth_s_per_km;
            }
        }
        Ok(out)
    }

    /// The cell of a depth and the depth, freed of rounding beyond the window.
    fn cell(&self, depth_km: f64) -> Option<(&Cell, f64)> {
        let top_km = self.cells[0].top_km;
        let bottom_km = self.cells[self.cells.len() - 1].bottom_km;
        if !(top_km - ROUNDING_KM..=bottom_km + ROUNDING_KM).contains(&depth_km) {
            return None;
        }
        let depth_km = depth_km.clamp(top_km, bottom_km);
        let bin = ((depth_km - top_km) / BIN_KM) as usize;
        let mut index = self.bins[bin.min(self.bins.len() - 1)] as usize;
        while depth_km > self.cells[index].bottom_km {
            index += 1;
        }
        Some((&self.cells[index], depth_km))
    }

    #[inline]
    fn pair(&self, row: usize, column: usize) -> [[f64; 4]; 2] {
        let start = row * self.columns + column;
        [start, start + 1].map(|node| {
            let [across, down, mixed] = self.slopes[node].map(f64::from);
            [self.times_s[node], across, down, mixed]
        })
    }

    /// Computes every node. `levels` are falling radii, `rows` their rows.
    fn fill(&mut self, route: &Route<'_>, levels: &[f64], rows: &[Row]) {
        let radii_km: Vec<f64> = levels.iter().rev().copied().collect();
        let last_rad = self.first_rad + self.step_rad * (self.columns - 1) as f64;
        let fan = Fan::new(route, &radii_km, (self.first_rad, last_rad));
        let curves: Vec<Vec<[f64; 3]>> = (0..levels.len())
            .map(|level| self.first_arrivals(&fan, levels.len() - 1 - level))
            .collect();
        for row in rows {
            for curve in &curves[row.level] {
                let [time_s, slopes @ ..] = row.node(curve);
                self.times_s.push(time_s);
                self.slopes.push(slopes.map(|slope| slope as f32));
            }
        }
    }

    /// T, p and dp/dΔ of the first arrival at each distance; infinitely late if
    /// there is none.
    fn first_arrivals(&self, fan: &Fan, receiver: usize) -> Vec<[f64; 3]> {
        let mut best = vec![[f64::INFINITY, f64::NAN, f64::NAN]; self.columns];
        for gap in fan.gaps(receiver) {
            let from = (gap.from.angle_rad - self.first_rad) / self.step_rad;
            let to = (gap.to.angle_rad - self.first_rad) / self.step_rad;
            let start = from.min(to).ceil().max(0.0) as usize;
            let end = ((from.max(to) + ROUNDING_STEPS).floor() + 1.0)
                .clamp(0.0, self.columns as f64) as usize;
            for (column, best) in best.iter_mut().enumerate().take(end).skip(start) {
                let curve = gap.curve(self.first_rad + self.step_rad * column as f64);
                if curve[0] < best[0] {
                    *best = curve;
                }
            }
        }
        best
    }
}

/// A row of nodes: a level seen from one side.
#[derive(Debug, Clone, Copy)]
struct Row {
    level: usize,
    radius_km: f64,
    velocity_km_s: f64,
}

impl Row {
    /// Node values from T, p and dp/dΔ.
    fn node(&self, &[time, parameter, bend]: &[f64; 3]) -> [f64; 4] {
        let flat = parameter / self.radius_km;
        let steep = (self.velocity_km_s.powi(-2) - flat * flat).sqrt();
        let mixed = flat / self.radius_km * bend / steep;
        [time, parameter, -steep, mixed]
    }
}

/// Cubic Hermite basis at a fraction of an interval.
struct Hermite {
    values: [f64; 4],
    slopes: [f64; 4],
}

impl Hermite {
    #[inline]
    fn new(u: f64, width: f64) -> Self {
        let (w, product) = (1.0 - u, u * (1.0 - u));
        Self {
            values: [
                w * w * (1.0 + 2.0 * u),
                width * product * w,
                u * u * (3.0 - 2.0 * u),
                -width * product * u,
            ],
            slopes: [
                -6.0 * product / width,
                w * (1.0 - 3.0 * u),
                6.0 * product / width,
                u * (3.0 * u - 2.0),
            ],
        }
    }

    #[inline]
    fn value(&self, [a, da]: [f64; 2], [b, db]: [f64; 2]) -> f64 {
        let h = &self.values;
        h[0] * a + h[1] * da + h[2] * b + h[3] * db
    }

    #[inline]
    fn slope(&self, [a, da]: [f64; 2], [b, db]: [f64; 2]) -> f64 {
        let h = &self.slopes;
        h[0] * a + h[1] * da + h[2] * b + h[3] * db
    }

    /// T, ∂T/∂Δ, ∂T/∂z and ∂²T/∂Δ∂z between two nodes of a row.
    #[inline]
    fn blend(&self, [a, b]: [[f64; 4]; 2]) -> [f64; 4] {
        [
            self.value([a[0], a[1]], [b[0], b[1]]),
            self.slope([a[0], a[1]], [b[0], b[1]]),
            self.value([a[2], a[3]], [b[2], b[3]]),
            self.slope([a[2], a[3]], [b[2], b[3]]),
        ]
    }
}

fn check_window(model: &RadialModel, depth_km: (f64, f64), distance_rad: (f64, f64)) -> Result<()> {
    model.check_depth("top of the window", depth_km.0)?;
    model.check_depth("bottom of the window", depth_km.1)?;
    if depth_km.0 >= depth_km.1 {
        return Err(CoreError::invalid(
            "depth window",
            "a top above the bottom",
            format!("{} to {} km", depth_km.0, depth_km.1),
        ));
    }
    if !(0.0 <= distance_rad.0 && distance_rad.0 < distance_rad.1)
        || distance_rad.1 > std::f64::consts::PI
    {
        return Err(CoreError::invalid(
            "distance window",
            "two rising distances between 0 and π rad",
            format!("{} to {} rad", distance_rad.0, distance_rad.1),
        ));
    }
    Ok(())
}

/// Falling radii of the table's levels: the window's ends, every shell border
/// between them, and even steps of at most [`LEVEL_KM`] inside each shell.
fn levels_km(model: &RadialModel, top_km: f64, bottom_km: f64) -> Vec<f64> {
    let (high, low) = (model.radius_km() - top_km, model.radius_km() - bottom_km);
    let mut levels = vec![high];
    for shell in model.shells() {
        let (upper, lower) = (shell.top_km.min(high), shell.bottom_km.max(low));
        if upper > lower {
            let steps = ((upper - lower) / LEVEL_KM).ceil();
            levels.extend(
                (1..steps as usize).map(|step| upper - (upper - lower) * (step as f64 / steps)),
            );
            levels.push(lower);
        }
    }
    levels
}

/// The cells between neighbouring levels, and the rows they refer to: one per
/// level, two where the velocity jumps.
fn cells(model: &RadialModel, levels: &[f64]) -> (Vec<Cell>, Vec<Row>) {
    let row = |level: usize, side: Side| {
        let radius_km = levels[level];
        let shell = &model.shells()[model.shell_index(radius_km, side)];
        Row {
            level,
            radius_km,
            velocity_km_s: shell.velocity_km_s(radius_km),
        }
    };
    let depth = |level: usize| model.radius_km() - levels[level];
    let mut rows = vec![row(0, Side::Below)];
    let mut cells = Vec::new();
    for level in 1..levels.len() {
        let upper_row = rows.len() - 1;
        let (above, below) = (row(level, Side::Above), row(level, Side::Below));
        rows.push(above);
        cells.push(Cell {
            top_km: depth(level - 1),
            bottom_km: depth(level),
            upper_row,
            lower_row: upper_row + 1,
        });
        let jumps = (above.velocity_km_s - below.velocity_km_s).abs() > 1e-9;
        if jumps && level + 1 < levels.len() {
            rows.push(below);
        }
    }
    (cells, rows)
}

fn bins(cells: &[Cell]) -> Vec<u32> {
    let (top_km, bottom_km) = (cells[0].top_km, cells[cells.len() - 1].bottom_km);
    let count = ((bottom_km - top_km) / BIN_KM).ceil().max(1.0) as usize;
    (0..count)
        .map(|bin| {
            let depth_km = top_km + BIN_KM * bin as f64;
            cells.partition_point(|cell| cell.bottom_km < depth_km) as u32
        })
        .collect()
}
