//! The inner loops of both searches: min-plus products, `t ← min(t, t_i + s d_i)`
//! over sources i and whole rows of targets.
//!
//! The loops are written so that the compiler vectorises them; they are compiled
//! for several instruction sets and the best one the processor has is chosen at
//! run time.

use multiversion::multiversion;

use crate::search::box_tables::{FaceLayout, Rows};

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

/// A node whose arrival time has changed, and where its distances start in a
/// table.
#[derive(Debug, Clone, Copy, Default)]
pub struct Tabulated {
    /// Index of the first distance (km).
    pub start: u32,
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

/// Lowers the times of a face's nodes over sources whose distances start at
/// their places in `table`, in rows of the given kind.
pub fn relax_face(
    (layout, rows): (FaceLayout, Rows),
    table: &[f32],
    sources: &[Tabulated],
    slowness: f32,
    times: &mut [f32],
) {
    match (layout.count, rows) {
        (6, Rows::Long) => face_6_long(table, sources, slowness, times),
        (6, Rows::Short) => face_6_short(table, sources, slowness, times),
        (8, Rows::Long) => face_8_long(table, sources, slowness, times),
        (8, Rows::Short) => face_8_short(table, sources, slowness, times),
        (10, Rows::Long) => face_10_long(table, sources, slowness, times),
        (10, Rows::Short) => face_10_short(table, sources, slowness, times),
        (12, Rows::Long) => face_12_long(table, sources, slowness, times),
        (12, Rows::Short) => face_12_short(table, sources, slowness, times),
        (16, Rows::Long) => face_16_long(table, sources, slowness, times),
        (16, Rows::Short) => face_16_short(table, sources, slowness, times),
        (count, _) => unreachable!("no kernel for {count} nodes per side"),
    }
}

/// The counts of nodes per side that [`relax_face`] serves.
pub const FACE_COUNTS: [usize; 5] = [6, 8, 10, 12, 16];

/// All rows of a face stay in registers while the sources pass.
#[expect(
    clippy::inline_always,
    reason = "inlining carries the instruction set of the caller"
)]
#[inline(always)]
fn face_rows<const COUNT: usize, const ROW: usize, const STRIDE: usize>(
    table: &[f32],
    sources: &[Tabulated],
    slowness: f32,
    times: &mut [f32],
) {
    let Some(rows) = times.as_chunks_mut::<ROW>().0.first_chunk_mut::<COUNT>() else {
        return;
    };
    let mut best = *rows;
    for source in sources {
        let distances = &table[source.start as usize..][..(COUNT - 1) * STRIDE + ROW];
        for row in 0..COUNT {
            let distances = &distances[row * STRIDE..row * STRIDE + ROW];
            for lane in 0..ROW {
                let time = distances[lane] * slowness + source.time_s;
                let known = best[row][lane];
                best[row][lane] = if time < known { time } else { known };
            }
        }
    }
    *rows = best;
}

macro_rules! face_kernel {
    ($name:ident, $count:literal, $row:literal, $stride:literal) => {
        #[multiversion(targets(
            "x86_64+avx512f+avx512bw+avx512dq+avx512vl+fma",
            "x86_64+avx2+fma"
        ))]
        fn $name(table: &[f32], sources: &[Tabulated], slowness: f32, times: &mut [f32]) {
            face_rows::<$count, $row, $stride>(table, sources, slowness, times);
        }
    };
}

face_kernel!(face_6_long, 6, 8, 16);
face_kernel!(face_6_short, 6, 8, 8);
face_kernel!(face_8_long, 8, 8, 16);
face_kernel!(face_8_short, 8, 8, 8);
face_kernel!(face_10_long, 10, 16, 32);
face_kernel!(face_10_short, 10, 16, 16);
face_kernel!(face_12_long, 12, 16, 32);
face_kernel!(face_12_short, 12, 16, 16);
face_kernel!(face_16_long, 16, 16, 32);
face_kernel!(face_16_short, 16, 16, 16);

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
