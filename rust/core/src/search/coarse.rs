//! Search over the whole model from one point: [`CoarseSearch`].
//!
//! Shortest paths on a graph of boundary nodes (Moser 1991), solved block by
//! block: a visit relaxes all changed nodes of one block at once, blocks are
//! visited in the order of their earliest pending node, and may be visited
//! again, until nothing changes. The fixed point is that of Dijkstra's method.

use crate::blocks::{Blocks, Cell};
use crate::error::Result;
use crate::frame::Chart;
use crate::lattice::Lattice;
use crate::monitor::Monitor;
use crate::relax::{Changed, relax, relax_tabulated};
use crate::search::buckets::BucketQueue;
use crate::search::face_kernel::Tabulated;
use crate::vec3::Vec3;

/// Visits between two looks at the monitor.
const VISITS_PER_CHECK: usize = 4096;
/// Block visits between two looks at the wanted points.
const VISITS_PER_LOOK: usize = 512;

/// The graph of one block model.
#[derive(Debug)]
pub struct CoarseSearch<'a, C> {
    blocks: &'a Blocks<C>,
    lattice: &'a Lattice,
    slowness: Vec<f32>,
    bucket_width_s: f32,
    words: usize,
}

/// Nodes lowered in one visit, by the displacement of the blocks that share
/// them.
#[derive(Debug)]
struct Handover {
    nodes: [[u64; 4]; 27],
    earliest: [f32; 27],
}

impl Default for Handover {
    fn default() -> Self {
        Self {
            nodes: [[0; 4]; 27],
            earliest: [f32::INFINITY; 27],
        }
    }
}

/// Arrival times of one search and the memory it works in.
#[derive(Debug, Default)]
pub struct CoarseField {
    times: Vec<f32>,
    pending: Vec<u64>,
    queue: BucketQueue,
    changed: Vec<Changed>,
    tabulated: Vec<Tabulated>,
    handed: Handover,
    old: Vec<f32>,
    new: Vec<f32>,
}

impl CoarseField {
    /// Arrival time (s) of every lattice node; infinite where not reached.
    pub fn times(&self) -> &[f32] {
        &self.times
    }
}

impl<'a, C: Chart> CoarseSearch<'a, C> {
    /// Prepares searches in `blocks` over the nodes of `lattice`.
    pub fn new(blocks: &'a Blocks<C>, lattice: &'a Lattice) -> Self {
        let slowness: Vec<f32> = blocks.slowness().iter().map(|&s| s as f32).collect();
        let fastest = slowness.iter().copied().fold(f32::INFINITY, f32::min);
        let narrowest = (0..3)
            .flat_map(|axis| blocks.edges(axis).windows(2))
            .map(|pair| pair[1] - pair[0])
            .fold(f64::INFINITY, f64::min);
        Self {
            blocks,
            lattice,
            slowness,
            bucket_width_s: fastest * narrowest as f32,
            words: lattice.surface().len().div_ceil(64),
        }
    }

    /// Fills `field` with arrival times from `source` (grid coordinates, km),
    /// giving up beyond `limit_s`.
    ///
    /// # Errors
    /// [`crate::error::CoreError::Interrupted`] when the monitor asks for it.
    pub fn run(
        &self,
        source: Vec3,
        limit_s: f32,
        field: &mut CoarseField,
        monitor: &Monitor,
    ) -> Result<()> {
        self.start(source, field);
        let mut visits = 0;
        while let Some(block) = field.queue.pop() {
            self.visit(block, limit_s, field);
            visits += 1;
            if visits % VISITS_PER_CHECK == 0 {
                monitor.check()?;
            }
        }
        Ok(())
    }

    /// As [`Self::run`], but ends once all times up to `margin_s` after the
    /// latest of the points `wanted` (grid coordinates, km) are final.
    ///
    /// # Errors
    /// [`crate::error::CoreError::Interrupted`] when the monitor asks for it.
    pub fn run_to(
        &self,
        source: Vec3,
        wanted: &[Vec3],
        margin_s: f32,
        field: &mut CoarseField,
        monitor: &Monitor,
    ) -> Result<()> {
        self.start(source, field);
        let mut open: Vec<Vec3> = wanted.to_vec();
        let mut latest_s = 0.0_f32;
        let mut limit_s = f32::INFINITY;
        let mut visits = 0;
        while let Some(block) = field.queue.pop() {
            let now_s = field.queue.earliest_s();
            if now_s > limit_s {
                break;
            }
            self.visit(block, limit_s, field);
            visits += 1;
            if visits % VISITS_PER_LOOK == 0 {
                monitor.check()?;
                open.retain(|&point| {
                    let time_s = self.time_at(source, point, field);
                    let settled = time_s <= now_s;
                    if settled {
                        latest_s = latest_s.max(time_s);
                    }
                    !settled
                });
                if open.is_empty() {
                    limit_s = latest_s + margin_s;
                }
            }
        }
        Ok(())
    }

    /// Earliest time (s) at a point, by the nodes of the blocks around it; that
    /// of a straight way where it shares a block with the source.
    fn time_at(&self, source: Vec3, point: Vec3, field: &CoarseField) -> f32 {
        let home = self.blocks.around(source);
        let mut best = f32::INFINITY;
        for block in self.blocks.around(point) {
            let cell = self.blocks.cell(block);
            let base = self.lattice.base(cell);
            let slowness = self.blocks.slowness_of(block);
            if home.contains(&block) {
                let way = self.blocks.chart().distance(source, point);
                best = best.min((way * slowness) as f32);
            }
            for (number, node) in self.lattice.surface().iter().enumerate() {
                let known = field.times[base + node.offset];
                if known < best {
                    let at = self.lattice.node_position(cell, number);
                    let way = self.blocks.chart().distance(at, point);
                    best = best.min(known + (way * slowness) as f32);
                }
            }
        }
        best
    }

    fn start(&self, source: Vec3, field: &mut CoarseField) {
        let lanes = self.lattice.lanes();
        field.times.clear();
        field.times.resize(self.lattice.node_count(), f32::INFINITY);
        field.pending.clear();
        field.pending.resize(self.blocks.count() * self.words, 0);
        field.queue.reset(self.blocks.count(), self.bucket_width_s);
        field.old.resize(lanes, 0.0);
        field.new.resize(lanes, 0.0);
        for block in self.blocks.around(source) {
            let cell = self.blocks.cell(block);
            let base = self.lattice.base(cell);
            for (number, node) in self.lattice.surface().iter().enumerate() {
                let at = self.lattice.node_position(cell, number);
                let way = self.blocks.chart().distance(at, source);
                let time = (way * self.blocks.slowness_of(block)) as f32;
                if time < field.times[base + node.offset] {
                    field.times[base + node.offset] = time;
                    self.note(number, time, &mut field.handed);
                    field.pending[block as usize * self.words + number / 64] |= 1 << (number % 64);
                    field.queue.lower(block, time);
                }
            }
            self.hand_over(cell, field);
        }
    }

    /// Notes a lowered node for the other blocks that share it.
    #[inline]
    fn note(&self, number: usize, time: f32, handed: &mut Handover) {
        for &(code, there) in &self.lattice.surface()[number].shared {
            let code = usize::from(code);
            handed.nodes[code][usize::from(there) / 64] |= 1 << (there % 64);
            handed.earliest[code] = handed.earliest[code].min(time);
        }
    }

    /// Marks the noted nodes as pending in the blocks around.
    fn hand_over(&self, cell: Cell, field: &mut CoarseField) {
        for code in 0..27_u8 {
            let earliest = &mut field.handed.earliest[usize::from(code)];
            if !earliest.is_finite() {
                continue;
            }
            let time = std::mem::replace(earliest, f32::INFINITY);
            let nodes = std::mem::take(&mut field.handed.nodes[usize::from(code)]);
            if let Some(block) = self.displaced(cell, code) {
                let place = block as usize * self.words;
                for (pending, nodes) in field.pending[place..]
                    .iter_mut()
                    .zip(nodes)
                    .take(self.words)
                {
                    *pending |= nodes;
                }
                field.queue.lower(block, time);
            }
        }
    }

    #[inline]
    fn displaced(&self, cell: Cell, code: u8) -> Option<u32> {
        let shift = [code / 9, code / 3 % 3, code % 3].map(usize::from);
        let mut there = cell;
        for axis in 0..3 {
            let index = there[axis] + shift[axis];
            if index == 0 || index > self.blocks.size(axis) {
                return None;
            }
            there[axis] = index - 1;
        }
        Some(self.blocks.index(there))
    }

    fn visit(&self, block: u32, limit_s: f32, field: &mut CoarseField) {
        let cell = self.blocks.cell(block);
        let base = self.lattice.base(cell);
        let surface = self.lattice.surface();
        for (time, node) in field.old.iter_mut().zip(surface) {
            *time = field.times[base + node.offset];
        }
        field.new.copy_from_slice(&field.old);
        let slowness = self.slowness[block as usize];
        if let Some(table) = self.lattice.distances(cell) {
            let row = self.lattice.lanes() as u32;
            let CoarseField { tabulated, old, .. } = field;
            tabulated.clear();
            for_each_bit(
                &mut field.pending,
                block as usize * self.words,
                self.words,
                |number| {
                    tabulated.push(Tabulated {
                        start: number as u32 * row,
                        time_s: old[number],
                    });
                },
            );
            relax_tabulated(table, tabulated, slowness, &mut field.new);
        } else {
            let (x, y, z) = split_shape(self.lattice.shape(cell), self.lattice.lanes());
            let CoarseField { changed, old, .. } = field;
            changed.clear();
            for_each_bit(
                &mut field.pending,
                block as usize * self.words,
                self.words,
                |number| {
                    changed.push(Changed {
                        at: [x[number], y[number], z[number]],
                        time_s: old[number],
                    });
                },
            );
            relax(x, y, z, changed, slowness, &mut field.new);
        }
        for (number, node) in surface.iter().enumerate() {
            let time = field.new[number];
            if time < field.old[number] && time <= limit_s {
                field.times[base + node.offset] = time;
                self.note(number, time, &mut field.handed);
            }
        }
        self.hand_over(cell, field);
    }

    /// The block model searched.
    pub fn blocks(&self) -> &'a Blocks<C> {
        self.blocks
    }

    /// The lattice searched.
    pub fn lattice(&self) -> &'a Lattice {
        self.lattice
    }
}

/// Splits a shape table into its x, y and z lanes.
#[inline]
pub fn split_shape(shape: &[f32], lanes: usize) -> (&[f32], &[f32], &[f32]) {
    let (x, rest) = shape.split_at(lanes);
    let (y, z) = rest.split_at(lanes);
    (x, y, z)
}

/// Calls `act` with the number of every set bit of a few words, and clears them.
#[inline]
fn for_each_bit(words: &mut [u64], first: usize, count: usize, mut act: impl FnMut(usize)) {
    for (index, word) in words[first..first + count].iter_mut().enumerate() {
        let mut bits = std::mem::take(word);
        while bits != 0 {
            act(index * 64 + bits.trailing_zeros() as usize);
            bits &= bits - 1;
        }
    }
}
