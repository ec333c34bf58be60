//! One ray as a sequence of blocks and the points where it crosses from one to
//! the next: [`Path`].

use crate::blocks::Blocks;
use crate::frame::Chart;
use crate::vec3::Vec3;

/// Marks a point that is not on a face: a source or a receiver.
pub const FREE: u8 = 3;

/// A poly-line through blocks. Segment `i` runs from point `i` to point `i + 1`
/// inside block `i`; point `i` lies on a face normal to `axes[i]` between blocks
/// `i − 1` and `i`, or is an end.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Path {
    /// Grid coordinates (km); one more than there are blocks.
    pub points: Vec<Vec3>,
    /// Axis of the face each point lies on, or [`FREE`].
    pub axes: Vec<u8>,
    /// Block of each segment.
    pub blocks: Vec<u32>,
}

impl Path {
    /// Begins a path at a point.
    pub fn start(&mut self, point: Vec3, axis: u8) {
        self.points.clear();
        self.axes.clear();
        self.blocks.clear();
        self.points.push(point);
        self.axes.push(axis);
    }

    /// Adds a segment through `block` to `point`.
    pub fn push(&mut self, block: u32, point: Vec3, axis: u8) {
        self.blocks.push(block);
        self.points.push(point);
        self.axes.push(axis);
    }

    /// Takes the last segment and its end away.
    pub fn drop_last(&mut self) {
        self.blocks.pop();
        self.points.pop();
        self.axes.pop();
    }

    /// Number of segments.
    pub fn len(&self) -> usize {
        self.blocks.len()
    }

    /// True for a path without segments.
    pub fn is_empty(&self) -> bool {
        self.blocks.is_empty()
    }

    /// Swaps the two ends.
    pub fn reverse(&mut self) {
        self.points.reverse();
        self.axes.reverse();
        self.blocks.reverse();
    }

    /// Travel time (s) of segments `range`.
    pub fn time_of<C: Chart>(&self, blocks: &Blocks<C>, range: std::ops::Range<usize>) -> f64 {
        let chart = blocks.chart();
        let mut last = chart.position(self.points[range.start]);
        let mut time = 0.0;
        for segment in range {
            let next = chart.position(self.points[segment + 1]);
            time += blocks.slowness_of(self.blocks[segment]) * crate::vec3::distance(last, next);
            last = next;
        }
        time
    }

    /// Travel time (s) along the whole path.
    pub fn time<C: Chart>(&self, blocks: &Blocks<C>) -> f64 {
        self.time_of(blocks, 0..self.len())
    }

    /// Continues in `block` from the last point, which both the last block and
    /// `block` hold: steps from block to block through zero-length segments
    /// where they only share an edge or a corner. The last point then lies on
    /// the face into `block`. Returns false if they do not meet there.
    pub fn step_into<C: Chart>(&mut self, blocks: &Blocks<C>, block: u32) -> bool {
        let (Some(&from), Some(&point)) = (self.blocks.last(), self.points.last()) else {
            return false;
        };
        let target = blocks.cell(block);
        let mut cell = blocks.cell(from);
        let mut first = true;
        for axis in 0..3 {
            if cell[axis] == target[axis] {
                continue;
            }
            let up = target[axis] > cell[axis];
            let plane = blocks.edges(axis)[cell[axis] + usize::from(up)];
            if target[axis].abs_diff(cell[axis]) != 1 || (point[axis] - plane).abs() > 1e-6 {
                return false;
            }
            let mut on_plane = point;
            on_plane[axis] = plane;
            if !first {
                self.push(blocks.index(cell), on_plane, axis as u8);
            }
            let last = self.points.len() - 1;
            self.points[last] = on_plane;
            self.axes[last] = axis as u8;
            cell[axis] = target[axis];
            first = false;
        }
        true
    }

    /// Cuts out loops: where a block comes back within a few segments and the
    /// direct way is not slower, the detour goes.
    pub fn cut_loops<C: Chart>(&mut self, blocks: &Blocks<C>) {
        const WINDOW: usize = 6;
        let mut first = 0;
        while first < self.len() {
            let end = (first + WINDOW).min(self.len() - 1);
            let again = (first + 1..=end)
                .rev()
                .find(|&later| self.blocks[later] == self.blocks[first]);
            if let Some(later) = again {
                let direct = blocks.slowness_of(self.blocks[first])
                    * blocks
                        .chart()
                        .distance(self.points[first], self.points[later + 1]);
                if direct <= self.time_of(blocks, first..later + 1) + 1e-12 {
                    self.points.drain(first + 1..=later);
                    self.axes.drain(first + 1..=later);
                    self.blocks.drain(first + 1..=later);
                }
            }
            first += 1;
        }
    }

    /// Replaces segments `range` and all their points by another path.
    pub fn splice(&mut self, range: std::ops::Range<usize>, other: &Path) {
        let points = range.start..=range.end;
        self.points
            .splice(points.clone(), other.points.iter().copied());
        self.axes.splice(points, other.axes.iter().copied());
        self.blocks.splice(range, other.blocks.iter().copied());
    }
}
