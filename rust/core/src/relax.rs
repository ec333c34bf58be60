//! The inner loops of both searches: min-plus products, `t ← min(t, t_i + s d_i)`
//! over sources i and whole rows of targets.
//!
//! The loops are written so that the compiler vectorises them; they are compiled
//! for several instruction sets and the best one the processor has is chosen at
//! run time.

use multiversion::multiversion;

use crate::search::face_kernel::Tabulated;

/// Targets treated together by [`relax`] and [`relax_tabulated`].
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
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+fma", "x86_64+avx2+fma"))]
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

/// As [`relax`], with the distances (km) of each source in a row of `table`.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+fma", "x86_64+avx2+fma"))]
pub fn relax_tabulated(table: &[f32], sources: &[Tabulated], slowness: f32, times: &mut [f32]) {
    for (chunk, times) in times.as_chunks_mut::<LANES>().0.iter_mut().enumerate() {
        let mut best = *times;
        for source in sources {
            let start = source.start as usize + chunk * LANES;
            let Some(distances) = table[start..].first_chunk::<LANES>() else {
                continue;
            };
            for lane in 0..LANES {
                let time = distances[lane] * slowness + source.time_s;
                best[lane] = if time < best[lane] { time } else { best[lane] };
            }
        }
        *times = best;
    }
}

/// Sets a bit for every place whose time was lowered and which lives still:
/// time plus scaled potential within the limit. Returns the earliest of their
/// times. Places with an infinite potential never live.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+fma", "x86_64+avx2+fma"))]
pub fn lowered(
    times: &[f32],
    old: &[f32],
    potentials: &[f32],
    (scale, limit_s): (f32, f32),
    alive: &mut [u64; 4],
) -> f32 {
    const GROUP: usize = 16;
    let groups = times
        .as_chunks::<GROUP>()
        .0
        .iter()
        .zip(old.as_chunks::<GROUP>().0)
        .zip(potentials.as_chunks::<GROUP>().0);
    let mut earliest = [f32::INFINITY; GROUP];
    for (group, ((times, old), potentials)) in groups.enumerate() {
        let mut bits = 0_u64;
        for lane in 0..GROUP {
            let time = times[lane];
            let lives = time < old[lane] && time + scale * potentials[lane] <= limit_s;
            bits |= u64::from(lives) << lane;
            let candidate = if lives { time } else { f32::INFINITY };
            earliest[lane] = if candidate < earliest[lane] {
                candidate
            } else {
                earliest[lane]
            };
        }
        alive[group * GROUP / 64] |= bits << (group * GROUP % 64);
    }
    earliest.into_iter().fold(f32::INFINITY, f32::min)
}
