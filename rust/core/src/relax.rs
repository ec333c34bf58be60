//! The inner loop of both searches: [`relax`], a min-plus product with
//! distances computed on the fly.
//!
//! The loop is written so that the compiler vectorises it; it is compiled for
//! several instruction sets and the best one the processor has is chosen at run
//! time.

use multiversion::multiversion;

/// Targets treated together.
pub const LANES: usize = 32;

/// A node whose arrival time has changed: position inside the block (km) and
/// time (s).
#[derive(Debug, Clone, Copy, Default)]
pub struct Changed {
    /// Position relative to the block's first corner (km).
    pub at: [f32; 3],
    /// Arrival time (s).
    pub time_s: f32,
}

/// Lowers `times[k]` to `source.time_s + slowness · |target_k − source|` where
/// that is earlier, over all sources. `x`, `y` and `z` hold the targets'
/// positions (km); all slices have the same length, a multiple of [`LANES`].
#[multiversion(targets(
    "x86_64+avx512f+avx512bw+avx512dq+avx512vl+fma",
    "x86_64+avx2+fma"
))]
pub fn relax(
    x: &[f32],
    y: &[f32],
    z: &[f32],
    sources: &[Changed],
    slowness: f32,
    times: &mut [f32],
) {
    let targets = x
        .as_chunks::<LANES>()
        .0
        .iter()
        .zip(y.as_chunks::<LANES>().0)
        .zip(z.as_chunks::<LANES>().0);
    for (((x, y), z), times) in targets.zip(times.as_chunks_mut::<LANES>().0) {
        let mut best = *times;
        for source in sources {
            for lane in 0..LANES {
                let dx = x[lane] - source.at[0];
                let dy = y[lane] - source.at[1];
                let dz = z[lane] - source.at[2];
                let time = (dx * dx + dy * dy + dz * dz).sqrt() * slowness + source.time_s;
                best[lane] = if time < best[lane] { time } else { best[lane] };
            }
        }
        *times = best;
    }
}
