//! Block models with long rays, the same in any language: [`Case`].
//!
//! 75 × 50 × 40 blocks of 15 km, 6 km/s at the surface and 9.75 km/s at 600 km,
//! perturbed by 5 %. Random numbers come from a hash of the block's or ray's
//! number (splitmix64, Steele, Lea & Flood 2014), so that no generator's state
//! has to be shared.

#![allow(dead_code, reason = "each user of this file needs its own part")]

use rayloom_core::blocks::Blocks;
use rayloom_core::frame::Chart;
use rayloom_core::vec3::Vec3;

/// Blocks along each axis.
pub const SHAPE: [usize; 3] = [75, 50, 40];
/// Width of a block (km).
pub const BLOCK_KM: f64 = 15.0;
/// Starts and ends of each case; a ray for each pair.
pub const ENDS: [usize; 2] = [6, 5];

const PERCENT: f64 = 5.0;
const RADIUS_KM: f64 = 6371.0;
/// Waves summed to a smooth field, and the wave number (per block) that gives a
/// correlation falling to 1/e over four blocks.
const WAVES: u64 = 48;
const WAVE_NUMBER: f64 = 0.353_553_390_593_273_8;

/// What the anomalies are like.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Roughness {
    /// A sum of waves, two standard deviations of 5 %, clipped there.
    Smooth,
    /// ±5 % in cubes of 2 × 2 × 2 blocks.
    Checkerboard,
    /// Each block by itself, normally distributed with 5 %, clipped at 12.5 %.
    Independent,
}

impl Roughness {
    /// All of them, with their names in the file of references.
    pub const ALL: [(Self, &'static str); 3] = [
        (Self::Smooth, "smooth"),
        (Self::Checkerboard, "checkerboard"),
        (Self::Independent, "independent"),
    ];
}

/// Uniform in 0 … 1 from a stream's and an item's number.
pub fn uniform(stream: u64, item: u64) -> f64 {
    let mut z = (stream << 32 | item)
        .wrapping_add(1)
        .wrapping_mul(0x9E37_79B9_7F4A_7C15);
    z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^= z >> 31;
    (z >> 11) as f64 / (1_u64 << 53) as f64
}

/// Standard normal from a stream's and an item's number (Box & Muller 1958).
fn normal(stream: u64, item: u64) -> f64 {
    let radius = (-2.0 * (1.0 - uniform(stream, item)).ln()).sqrt();
    radius * (std::f64::consts::TAU * uniform(stream + 1, item)).cos()
}

/// Edges (km): x and y around 0, depth from 0.
pub fn edges() -> [Vec<f64>; 3] {
    [0, 1, 2].map(|axis| {
        let middle = if axis == 2 {
            0.0
        } else {
            0.5 * SHAPE[axis] as f64
        };
        (0..=SHAPE[axis])
            .map(|edge| BLOCK_KM * (edge as f64 - middle))
            .collect()
    })
}

/// Slowness (s/km) of every block, in C order.
pub fn slowness(roughness: Roughness) -> Vec<f64> {
    let waves: Vec<[f64; 4]> = (0..WAVES)
        .map(|wave| {
            let number = [1, 3, 5].map(|stream| WAVE_NUMBER * normal(stream, wave));
            [
                number[0],
                number[1],
                number[2],
                std::f64::consts::TAU * uniform(7, wave),
            ]
        })
        .collect();
    let mut values = Vec::with_capacity(SHAPE.iter().product());
    for x in 0..SHAPE[0] {
        for y in 0..SHAPE[1] {
            for z in 0..SHAPE[2] {
                let pattern = match roughness {
                    Roughness::Smooth => {
                        let sum: f64 = waves
                            .iter()
                            .map(|w| {
                                (w[0] * x as f64 + w[1] * y as f64 + w[2] * z as f64 + w[3]).cos()
                            })
                            .sum();
                        (0.5 * sum * (2.0 / WAVES as f64).sqrt()).clamp(-1.0, 1.0)
                    }
                    Roughness::Checkerboard => 1.0 - 2.0 * ((x / 2 + y / 2 + z / 2) % 2) as f64,
                    Roughness::Independent => normal(9, values.len() as u64).clamp(-2.5, 2.5),
                };
                let velocity = 6.0 + 0.00625 * BLOCK_KM * (z as f64 + 0.5);
                values.push(1.0 / (velocity * (1.0 + 0.01 * PERCENT * pattern)));
            }
        }
    }
    values
}

/// The model on a chart.
pub fn model<C: Chart>(chart: C, roughness: Roughness) -> Blocks<C> {
    Blocks::new(chart, edges(), slowness(roughness)).expect("edges rise, slowness is positive")
}

/// Reference radius (km) of the spherical cases.
pub fn radius_km() -> f64 {
    RADIUS_KM
}

/// Starts near the base at one end of the box, and ends below the surface at the
/// other (grid coordinates, km).
pub fn ends() -> [Vec<Vec3>; 2] {
    let spread = |stream: u64, item: usize, low: f64, high: f64| {
        low + (high - low) * uniform(stream, item as u64)
    };
    let deep = (0..ENDS[0]).map(|item| {
        [
            spread(11, item, -262.0, -60.0),
            spread(12, item, -240.0, 240.0),
            spread(13, item, 580.0, 599.0),
        ]
    });
    let shallow = (0..ENDS[1]).map(|item| {
        [
            spread(14, item, -60.0, 262.0),
            spread(15, item, -240.0, 240.0),
            spread(16, item, 0.5, 3.0),
        ]
    });
    [deep.collect(), shallow.collect()]
}
