//! Random models and points for the tests of the tracer, from fixed seeds.

#![allow(dead_code, reason = "each test file uses its own part")]

use rayloom_core::blocks::Blocks;
use rayloom_core::frame::Chart;
use rayloom_core::vec3::Vec3;

/// Xorshift generator (Marsaglia 2003): small, and the same everywhere.
pub struct Random(pub u64);

impl Random {
    /// Uniform in 0 … 1.
    pub fn share(&mut self) -> f64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// Uniform between two bounds.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.share()
    }
}

/// `count + 1` edges from `start`, `step` apart.
pub fn edges(count: usize, start: f64, step: f64) -> Vec<f64> {
    (0..=count).map(|k| start + step * k as f64).collect()
}

/// `count + 1` edges from `start`, unequally spaced around `step`.
pub fn uneven_edges(count: usize, start: f64, step: f64, random: &mut Random) -> Vec<f64> {
    let mut values = vec![start];
    for k in 0..count {
        values.push(values[k] + step * random.between(0.6, 1.4));
    }
    values
}

/// Blocks with independent random velocities around 6 km/s.
pub fn rough_model<C: Chart>(
    chart: C,
    edges: [Vec<f64>; 3],
    contrast: f64,
    random: &mut Random,
) -> Blocks<C> {
    let count = edges.iter().map(|axis| axis.len() - 1).product();
    let slowness = (0..count)
        .map(|_| 1.0 / (6.0 * (1.0 + contrast * random.between(-1.0, 1.0))))
        .collect();
    Blocks::new(chart, edges, slowness).expect("the edges rise and slowness is positive")
}

/// A point inside the model.
pub fn point_inside<C: Chart>(blocks: &Blocks<C>, random: &mut Random) -> Vec3 {
    [0, 1, 2].map(|axis| {
        let edges = blocks.edges(axis);
        random.between(edges[0] + 0.01, edges[edges.len() - 1] - 0.01)
    })
}
