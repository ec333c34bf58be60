//! Distances between the face nodes of a block, tabulated: [`BoxTables`].
//!
//! In a box whose faces carry equally spaced nodes, the distance between nodes
//! of two faces depends on two indices and one difference of indices only. The
//! tables hold those few values so that the distances from one node to a whole
//! face are contiguous rows, shifted by that difference:
//!
//! - *shifted lanes* (rows `2n` long): the common axis of both faces runs along
//!   the target's rows, or the faces are opposite; the row starts at `n − 1 − j`;
//! - *shifted rows* (rows as long as a face's): the common axis runs across the
//!   target's rows; the block of rows starts at row `n − 1 − j`.

use crate::blocks::{Side, face_axes};

/// Share of a face left free at its rim, so that a node belongs to one face.
pub const RIM: f64 = 0.003;

/// Layout of the nodes on a face: `count` rows of `count` nodes, padded to
/// `lanes`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct FaceLayout {
    /// Nodes along each side of a face.
    pub count: usize,
    /// Length of a row in memory.
    pub lanes: usize,
}

impl FaceLayout {
    /// The layout of `count × count` nodes.
    #[must_use]
    pub fn new(count: usize) -> Self {
        Self {
            count,
            lanes: count.next_power_of_two().max(8),
        }
    }

    /// Length of an array over a face.
    #[must_use]
    pub fn size(self) -> usize {
        self.count * self.lanes
    }

    /// Length of a row of shifted lanes.
    #[must_use]
    pub fn long_row(self) -> usize {
        2 * self.lanes
    }

    /// Place of a node along a side, as a share of the face's width.
    #[must_use]
    pub fn fraction(self, index: usize) -> f64 {
        RIM + (1.0 - 2.0 * RIM) * index as f64 / (self.count - 1) as f64
    }
}

/// How the rows from one node to a face lie in memory.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Rows {
    /// Rows of [`FaceLayout::long_row`], read from a shifted start.
    Long = 0,
    /// Rows of [`FaceLayout::lanes`].
    Short = 1,
}

/// Distances (km) inside one box.
#[derive(Debug)]
pub struct BoxTables {
    layout: FaceLayout,
    widths_km: [f64; 3],
    values: Vec<f32>,
    starts: [[usize; 6]; 6],
}

impl BoxTables {
    /// Tabulates a box of the given widths (km).
    #[must_use]
    pub fn new(layout: FaceLayout, widths_km: [f64; 3]) -> Self {
        let mut tables = Self {
            layout,
            widths_km,
            values: Vec::new(),
            starts: [[0; 6]; 6],
        };
        for axis in 0..3 {
            let start = tables.add_opposite(axis);
            tables.starts[2 * axis][2 * axis + 1] = start;
            tables.starts[2 * axis + 1][2 * axis] = start;
        }
        for from in 0..6 {
            for onto_axis in (0..3).filter(|&axis| axis != from / 2) {
                let start = match rows_between(from, 2 * onto_axis) {
                    Rows::Long => tables.add_shifted_lanes(from, onto_axis),
                    Rows::Short => tables.add_shifted_rows(from, onto_axis),
                };
                tables.starts[from][2 * onto_axis] = start;
                tables.starts[from][2 * onto_axis + 1] = start;
            }
        }
        tables
    }

    /// All values.
    #[must_use]
    pub fn values(&self) -> &[f32] {
        &self.values
    }

    /// Width (km) along an axis.
    #[must_use]
    pub fn width_km(&self, axis: usize) -> f64 {
        self.widths_km[axis]
    }

    /// Where the rows from node (`row`, `column`) of side `from` to side `onto`
    /// start among [`Self::values`], and the least distance (km) between that
    /// node and the side.
    #[must_use]
    #[inline]
    pub fn rows_from(&self, from: Side, (row, column): (usize, usize), onto: Side) -> (usize, f32) {
        let n = self.layout.count;
        let start = self.starts[from][onto];
        if from / 2 == onto / 2 {
            let offset = row * n * self.layout.long_row() + (n - 1 - column);
            return (start + offset, self.widths_km[from / 2] as f32);
        }
        let (first, _) = face_axes(from / 2);
        let (away, common) = if first == onto / 2 { (row, column) } else { (column, row) };
        let away = if onto % 2 == 1 { n - 1 - away } else { away };
        let least = (self.layout.fraction(away) * self.widths_km[onto / 2]) as f32;
        let shift = n - 1 - common;
        let offset = match rows_between(from, onto) {
            Rows::Long => away * n * self.layout.long_row() + shift,
            Rows::Short => (away * (2 * n - 1) + shift) * self.layout.lanes,
        };
        (start + offset, least)
    }

    fn place(&self, axis: usize, index: usize) -> f64 {
        self.layout.fraction(index) * self.widths_km[axis]
    }

    /// Distance (km) along `axis` between nodes `shift − (n − 1)` apart.
    fn shifted(&self, axis: usize, shift: usize) -> f64 {
        let steps = shift as f64 - (self.layout.count - 1) as f64;
        steps * (self.place(axis, 1) - self.place(axis, 0))
    }

    fn push(&mut self, a: f64, b: f64, c: f64) {
        self.values.push((a * a + b * b + c * c).sqrt() as f32);
    }

    fn add_opposite(&mut self, axis: usize) -> usize {
        let start = self.values.len();
        let (u, v) = face_axes(axis);
        let n = self.layout.count;
        for row in 0..n {
            for target_row in 0..n {
                let across = self.place(u, row) - self.place(u, target_row);
                for shift in 0..self.layout.long_row() {
                    self.push(self.widths_km[axis], across, self.shifted(v, shift));
                }
            }
        }
        start
    }

    fn add_shifted_lanes(&mut self, from: Side, onto_axis: usize) -> usize {
        let start = self.values.len();
        let axis = from / 2;
        let common = 3 - axis - onto_axis;
        let n = self.layout.count;
        for away in 0..n {
            let to_plane = self.place(onto_axis, away);
            for target_row in 0..n {
                let from_plane = self.place(axis, mirrored(from, target_row, n));
                for shift in 0..self.layout.long_row() {
                    self.push(to_plane, from_plane, self.shifted(common, shift));
                }
            }
        }
        start
    }

    fn add_shifted_rows(&mut self, from: Side, onto_axis: usize) -> usize {
        let start = self.values.len();
        let axis = from / 2;
        let common = 3 - axis - onto_axis;
        let n = self.layout.count;
        for away in 0..n {
            let to_plane = self.place(onto_axis, away);
            for shift in 0..2 * n - 1 {
                let along = self.shifted(common, shift);
                for lane in 0..self.layout.lanes {
                    let from_plane = self.place(axis, mirrored(from, lane.min(n - 1), n));
                    self.push(to_plane, from_plane, along);
                }
            }
        }
        start
    }
}

/// Index along the axis of side `from`, counted from that side.
fn mirrored(from: Side, index: usize, count: usize) -> usize {
    if from % 2 == 1 { count - 1 - index } else { index }
}

/// How rows from side `from` to side `onto` are stored.
#[must_use]
#[inline]
pub fn rows_between(from: Side, onto: Side) -> Rows {
    let (axis, onto_axis) = (from / 2, onto / 2);
    let common_is_last = axis == onto_axis || face_axes(onto_axis).1 == 3 - axis - onto_axis;
    if common_is_last { Rows::Long } else { Rows::Short }
}
