//! The fine search's inner loop: [`relax_face`], a min-plus product of sources
//! with whole rows of targets whose distances are tabulated.
//!
//! Written with explicit vectors: the compiler's own vectorisation transposes
//! the rows and runs about three times slower (measured).

use crate::search::box_tables::{FaceLayout, Rows};

/// A node whose arrival time has changed, and where its distances start in a
/// table.
#[derive(Debug, Clone, Copy, Default)]
pub struct Tabulated {
    /// Index of the first distance (km).
    pub start: u32,
    /// Arrival time (s).
    pub time_s: f32,
}

/// Lowers the times (s) of a face's nodes to `source.time_s + slowness · d` where
/// that is earlier, over all sources; the distances d (km) start at the sources'
/// places in `table`, in rows of the given kind.
pub fn relax_face(
    (layout, rows): (FaceLayout, Rows),
    table: &[f32],
    sources: &[Tabulated],
    slowness: f32,
    times: &mut [f32],
) {
    let stride = match rows {
        Rows::Long => layout.long_row(),
        Rows::Short => layout.lanes,
    };
    #[cfg(target_arch = "x86_64")]
    if let Some(simd) = pulp::x86::V3::try_new() {
        vectors::relax(simd, (layout, stride), table, sources, slowness, times);
        return;
    }
    relax_plainly((layout, stride), table, sources, slowness, times);
}

/// The same without explicit vectors.
fn relax_plainly(
    (layout, stride): (FaceLayout, usize),
    table: &[f32],
    sources: &[Tabulated],
    slowness: f32,
    times: &mut [f32],
) {
    for source in sources {
        let distances = &table[source.start as usize..];
        for (row, times) in times.chunks_mut(layout.lanes).take(layout.rows).enumerate() {
            let distances = &distances[row * stride..][..layout.lanes];
            for (time, distance) in times.iter_mut().zip(distances) {
                *time = time.min(distance * slowness + source.time_s);
            }
        }
    }
}

#[cfg(target_arch = "x86_64")]
mod vectors {
    use pulp::f32x8;
    use pulp::x86::V3;

    use super::Tabulated;
    use crate::search::box_tables::FaceLayout;

    const WIDTH: usize = 8;

    /// Splits a face into columns of one vector and groups of rows that fit the
    /// sixteen registers.
    pub fn relax(
        simd: V3,
        (layout, stride): (FaceLayout, usize),
        table: &[f32],
        sources: &[Tabulated],
        slowness: f32,
        times: &mut [f32],
    ) {
        for column in (0..layout.lanes).step_by(WIDTH) {
            let mut row = 0;
            while row < layout.rows {
                let block = Block {
                    times: &mut times[row * layout.lanes + column..],
                    lanes: layout.lanes,
                    offset: row * stride + column,
                };
                let task = (table, sources, slowness);
                row += match (layout.rows - row, stride) {
                    (12.., 32) => block.relax::<12, 32>(simd, task),
                    (12.., 16) => block.relax::<12, 16>(simd, task),
                    (8.., 32) => block.relax::<8, 32>(simd, task),
                    (8.., 16) => block.relax::<8, 16>(simd, task),
                    (8.., 8) => block.relax::<8, 8>(simd, task),
                    (2.., 32) => block.relax::<2, 32>(simd, task),
                    (2.., 16) => block.relax::<2, 16>(simd, task),
                    (2.., 8) => block.relax::<2, 8>(simd, task),
                    (_, 32) => block.relax::<1, 32>(simd, task),
                    (_, 16) => block.relax::<1, 16>(simd, task),
                    _ => block.relax::<1, 8>(simd, task),
                };
            }
        }
    }

    /// A few rows of one column of a face.
    struct Block<'a> {
        times: &'a mut [f32],
        lanes: usize,
        offset: usize,
    }

    impl Block<'_> {
        /// Lowers `ROWS` rows, all in registers while the sources pass.
        fn relax<const ROWS: usize, const STRIDE: usize>(
            self,
            simd: V3,
            (table, sources, slowness): (&[f32], &[Tabulated], f32),
        ) -> usize {
            simd.vectorize(
                #[inline(always)]
                || {
                    let slowness = simd.splat_f32x8(slowness);
                    let mut best: [f32x8; ROWS] =
                        std::array::from_fn(|row| load(&self.times[row * self.lanes..]));
                    for source in sources {
                        let start = source.start as usize + self.offset;
                        let distances = &table[start..][..(ROWS - 1) * STRIDE + WIDTH];
                        let time = simd.splat_f32x8(source.time_s);
                        for (row, best) in best.iter_mut().enumerate() {
                            let distance = load(&distances[row * STRIDE..]);
                            let arrival = simd.mul_add_f32x8(distance, slowness, time);
                            *best = simd.min_f32x8(arrival, *best);
                        }
                    }
                    for (row, best) in best.iter().enumerate() {
                        let values: [f32; WIDTH] = pulp::cast(*best);
                        self.times[row * self.lanes..][..WIDTH].copy_from_slice(&values);
                    }
                    ROWS
                },
            )
        }
    }

    #[expect(
        clippy::inline_always,
        reason = "must take the caller's instruction set"
    )]
    #[inline(always)]
    fn load(values: &[f32]) -> f32x8 {
        let mut vector = [0.0; WIDTH];
        vector.copy_from_slice(&values[..WIDTH]);
        pulp::cast(vector)
    }
}
