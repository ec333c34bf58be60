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
}

/// Where the rows from one node to a face start, and how near they come.
#[derive(Debug, Clone, Copy, Default)]
pub struct RowsFrom {
    /// Index of the first distance among [`BoxTables::values`].
    pub start: u32,
    /// Least distance between node and face, as a share of the box's width
    /// across the face.
    pub least: f32,
}

/// [`RowsFrom`] for every place on every side of a box, to every other side;
/// the same for all boxes.
#[derive(Debug)]
pub struct RowIndex {
    size: usize,
    rows: Vec<RowsFrom>,
}

impl RowIndex {
    /// The index of a layout.
    #[must_use]
    pub fn new(layout: FaceLayout) -> Self {
        let starts = section_starts(layout);
        let size = layout.size();
        let mut rows = vec![RowsFrom::default(); 36 * size];
        for from in 0..6 {
            for onto in (0..6).filter(|&onto| onto != from) {
                for row in 0..layout.count {
                    for column in 0..layout.count {
                        let place = row * layout.lanes + column;
                        let mut found = rows_from(layout, from, (row, column), onto);
                        found.start += starts[from][onto / 2] as u32;
                        rows[(from * 6 + onto) * size + place] = found;
                    }
                }
            }
        }
        Self { size, rows }
    }

    /// Rows from all places of side `from` to side `onto`.
    #[must_use]
    #[inline]
    pub fn between(&self, from: Side, onto: Side) -> &[RowsFrom] {
        &self.rows[(from * 6 + onto) * self.size..][..self.size]
    }
}

/// Rows from node (`row`, `column`) of side `from` to side `onto`, counted from
/// the start of their section.
fn rows_from(
    layout: FaceLayout,
    from: Side,
    (row, column): (usize, usize),
    onto: Side,
) -> RowsFrom {
    let n = layout.count;
    if from / 2 == onto / 2 {
        return RowsFrom {
            start: (row * n * layout.long_row() + (n - 1 - column)) as u32,
            least: 1.0,
        };
    }
    let (first, _) = face_axes(from / 2);
    let (away, common) = if first == onto / 2 {
        (row, column)
    } else {
        (column, row)
    };
    let away = mirrored(onto, away, n);
    let shift = n - 1 - common;
    let start = match rows_between(from, onto) {
        Rows::Long => away * n * layout.long_row() + shift,
        Rows::Short => (away * (2 * n - 1) + shift) * layout.lanes,
    };
    RowsFrom {
        start: start as u32,
        least: layout.fraction(away) as f32,
    }
}

/// Where the section from each side to each axis starts in a box's table, in
/// the order in which [`BoxTables::new`] fills it.
fn section_starts(layout: FaceLayout) -> [[usize; 3]; 6] {
    let n = layout.count;
    let mut starts = [[0; 3]; 6];
    let mut next = 0;
    for axis in 0..3 {
        starts[2 * axis][axis] = next;
        starts[2 * axis + 1][axis] = next;
        next += n * n * layout.long_row();
    }
    for (from, starts) in starts.iter_mut().enumerate() {
        for onto in (0..3).filter(|&axis| axis != from / 2) {
            starts[onto] = next;
            next += match rows_between(from, 2 * onto) {
                Rows::Long => n * n * layout.long_row(),
                Rows::Short => n * (2 * n - 1) * layout.lanes,
            };
        }
    }
    starts
}

impl BoxTables {
    /// Tabulates a box of the given widths (km).
    #[must_use]
    pub fn new(layout: FaceLayout, widths_km: [f64; 3]) -> Self {
        let mut tables = Self {
            layout,
            widths_km,
            values: Vec::new(),
        };
        for axis in 0..3 {
            tables.add_opposite(axis);
        }
        for from in 0..6 {
            for onto in (0..3).filter(|&axis| axis != from / 2) {
                match rows_between(from, 2 * onto) {
                    Rows::Long => tables.add_shifted_lanes(from, onto),
                    Rows::Short => tables.add_shifted_rows(from, onto),
                }
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

    fn add_opposite(&mut self, axis: usize) {
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
    }

    fn add_shifted_lanes(&mut self, from: Side, onto_axis: usize) {
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
    }

    fn add_shifted_rows(&mut self, from: Side, onto_axis: usize) {
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
    }
}

/// Index along the axis of side `from`, counted from that side.
fn mirrored(from: Side, index: usize, count: usize) -> usize {
    if from % 2 == 1 {
        count - 1 - index
    } else {
        index
    }
}

/// How rows from side `from` to side `onto` are stored.
#[must_use]
#[inline]
pub fn rows_between(from: Side, onto: Side) -> Rows {
    let (axis, onto_axis) = (from / 2, onto / 2);
    let common_is_last = axis == onto_axis || face_axes(onto_axis).1 == 3 - axis - onto_axis;
    if common_is_last {
        Rows::Long
    } else {
        Rows::Short
    }
}
