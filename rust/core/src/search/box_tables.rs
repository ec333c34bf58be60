//! Distances between the face nodes of a block, tabulated: [`BoxTables`].
//!
//! In a box whose edges carry equally spaced nodes, each axis its own number, the distance between nodes
//! of two faces depends on two indices and one difference of indices only. The
//! tables hold those few values so that the distances from one node to a whole
//! face are contiguous rows, shifted by that difference:
//!
//! - *shifted lanes* (rows twice a face's): the common axis of both faces runs along
//!   the target's rows, or the faces are opposite; the row starts at `n − 1 − j` for n nodes along that axis;
//! - *shifted rows* (rows as long as a face's): the common axis runs across the
//!   target's rows; the block of rows starts at row `n − 1 − j`.

use crate::blocks::{Side, face_axes};

/// Share of a face left free at its rim, so that a node belongs to one face.
pub const RIM: f64 = 0.003;

/// Most nodes along an edge.
pub const MOST_NODES: usize = 16;

/// Layout of the nodes on a face: rows of nodes, padded to `lanes`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct FaceLayout {
    /// Nodes along the first axis of the face.
    pub rows: usize,
    /// Nodes along the second axis of the face.
    pub columns: usize,
    /// Length of a row in memory.
    pub lanes: usize,
}

impl FaceLayout {
    /// Length of an array over a face, whole vectors.
    #[must_use]
    pub fn size(self) -> usize {
        (self.rows * self.lanes).next_multiple_of(16)
    }

    /// Length of a row of shifted lanes.
    #[must_use]
    pub fn long_row(self) -> usize {
        2 * self.lanes
    }
}

/// Nodes along the edges of a block, and so on its faces.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct NodeCounts([usize; 3]);

impl NodeCounts {
    /// Nodes along each axis, 2 to [`MOST_NODES`].
    #[must_use]
    pub fn new(along: [usize; 3]) -> Self {
        Self(along.map(|count| count.clamp(2, MOST_NODES)))
    }

    /// Nodes along an axis.
    #[must_use]
    pub fn along(self, axis: usize) -> usize {
        self.0[axis]
    }

    /// The layout of faces normal to an axis.
    #[must_use]
    pub fn face(self, axis: usize) -> FaceLayout {
        let (u, v) = face_axes(axis);
        FaceLayout {
            rows: self.0[u],
            columns: self.0[v],
            lanes: self.0[v].next_power_of_two().max(8),
        }
    }

    /// Length of an array that holds any face.
    #[must_use]
    pub fn size(self) -> usize {
        let sizes = [0, 1, 2].map(|axis| self.face(axis).size());
        sizes[0].max(sizes[1]).max(sizes[2])
    }

    /// Place of a node along an axis, as a share of the block's width.
    #[must_use]
    pub fn fraction(self, axis: usize, index: usize) -> f64 {
        RIM + (1.0 - 2.0 * RIM) * index as f64 / (self.0[axis] - 1) as f64
    }
}

/// How the rows from one node to a face lie in memory.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Rows {
    /// Rows of [`FaceLayout::long_row`], read from a shifted start.
    Long = 0,
    /// Rows of a face's lanes.
    Short = 1,
}

/// Distances (km) inside one box.
#[derive(Debug)]
pub struct BoxTables {
    counts: NodeCounts,
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
    /// The index for given nodes.
    #[must_use]
    pub fn new(counts: NodeCounts) -> Self {
        let starts = section_starts(counts);
        let size = counts.size();
        let mut rows = vec![RowsFrom::default(); 36 * size];
        for from in 0..6 {
            let layout = counts.face(from / 2);
            for onto in (0..6).filter(|&onto| onto != from) {
                for row in 0..layout.rows {
                    for column in 0..layout.columns {
                        let place = row * layout.lanes + column;
                        let mut found = rows_from(counts, from, (row, column), onto);
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
    counts: NodeCounts,
    from: Side,
    (row, column): (usize, usize),
    onto: Side,
) -> RowsFrom {
    let (axis, onto_axis) = (from / 2, onto / 2);
    let target = counts.face(onto_axis);
    if axis == onto_axis {
        return RowsFrom {
            start: (row * target.rows * target.long_row() + (target.columns - 1 - column)) as u32,
            least: 1.0,
        };
    }
    let (first, _) = face_axes(axis);
    let (away, common) = if first == onto_axis {
        (row, column)
    } else {
        (column, row)
    };
    let along = counts.along(3 - axis - onto_axis);
    let away = mirrored(onto, away, counts.along(onto_axis));
    let shift = along - 1 - common;
    let start = match rows_between(from, onto) {
        Rows::Long => away * target.rows * target.long_row() + shift,
        Rows::Short => (away * (2 * along - 1) + shift) * target.lanes,
    };
    RowsFrom {
        start: start as u32,
        least: counts.fraction(onto_axis, away) as f32,
    }
}

/// Where the section from each side to each axis starts in a box's table, in
/// the order in which [`BoxTables::new`] fills it.
fn section_starts(counts: NodeCounts) -> [[usize; 3]; 6] {
    let mut starts = [[0; 3]; 6];
    let mut next = 0;
    for axis in 0..3 {
        let layout = counts.face(axis);
        starts[2 * axis][axis] = next;
        starts[2 * axis + 1][axis] = next;
        next += layout.rows * layout.rows * layout.long_row();
    }
    for (from, starts) in starts.iter_mut().enumerate() {
        for onto in (0..3).filter(|&axis| axis != from / 2) {
            starts[onto] = next;
            let target = counts.face(onto);
            let rows = match rows_between(from, 2 * onto) {
                Rows::Long => target.rows * target.long_row(),
                Rows::Short => (2 * counts.along(3 - from / 2 - onto) - 1) * target.lanes,
            };
            next += counts.along(onto) * rows;
        }
    }
    starts
}

impl BoxTables {
    /// Tabulates a box of the given widths (km).
    #[must_use]
    pub fn new(counts: NodeCounts, widths_km: [f64; 3]) -> Self {
        let mut tables = Self {
            counts,
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
        self.counts.fraction(axis, index) * self.widths_km[axis]
    }

    /// Distance (km) along `axis` between nodes `shift − (n − 1)` apart.
    fn shifted(&self, axis: usize, shift: usize) -> f64 {
        let steps = shift as f64 - (self.counts.along(axis) - 1) as f64;
        steps * (self.place(axis, 1) - self.place(axis, 0))
    }

    fn push(&mut self, a: f64, b: f64, c: f64) {
        self.values.push((a * a + b * b + c * c).sqrt() as f32);
    }

    fn add_opposite(&mut self, axis: usize) {
        let (u, v) = face_axes(axis);
        let layout = self.counts.face(axis);
        for row in 0..layout.rows {
            for target_row in 0..layout.rows {
                let across = self.place(u, row) - self.place(u, target_row);
                for shift in 0..layout.long_row() {
                    self.push(self.widths_km[axis], across, self.shifted(v, shift));
                }
            }
        }
    }

    fn add_shifted_lanes(&mut self, from: Side, onto_axis: usize) {
        let axis = from / 2;
        let common = 3 - axis - onto_axis;
        let target = self.counts.face(onto_axis);
        for away in 0..self.counts.along(onto_axis) {
            let to_plane = self.place(onto_axis, away);
            for target_row in 0..target.rows {
                let from_plane = self.place(axis, mirrored(from, target_row, target.rows));
                for shift in 0..target.long_row() {
                    self.push(to_plane, from_plane, self.shifted(common, shift));
                }
            }
        }
    }

    fn add_shifted_rows(&mut self, from: Side, onto_axis: usize) {
        let axis = from / 2;
        let common = 3 - axis - onto_axis;
        let target = self.counts.face(onto_axis);
        let last = target.columns - 1;
        for away in 0..self.counts.along(onto_axis) {
            let to_plane = self.place(onto_axis, away);
            for shift in 0..2 * self.counts.along(common) - 1 {
                let along = self.shifted(common, shift);
                for lane in 0..target.lanes {
                    let column = mirrored(from, lane.min(last), target.columns);
                    self.push(to_plane, self.place(axis, column), along);
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
