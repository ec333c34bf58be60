//! Search around one ray on a fine graph, inside a proven bound: [`FineSearch`].
//!
//! Nodes are rows of points on every face, as many along each axis as it asks
//! for; each face has its own copies, and there are no corner or edge nodes.
//! Blocks and faces are created when first reached. A node stays alive only while
//! its time plus the scaled coarse time on to the goal stays below the bound (a
//! goal-directed search with the coarse field as its potential). Only the faces just reached from one side are relaxed into the
//! block on the other: within a block all nodes see each other, so a path never
//! spends two segments in one block.

use crate::blocks::{Blocks, Cell, Side, face_axes};
use crate::frame::Chart;
use crate::lattice::Lattice;
use crate::path::Path;
use crate::relax::lowered;
use crate::search::box_tables::{BoxTables, NodeCounts, RowIndex, Rows, rows_between};
use crate::search::boxes::BoxSet;
use crate::search::buckets::BucketQueue;
use crate::search::face_kernel::{Tabulated, relax_face};
use crate::vec3::Vec3;

const UNKNOWN: u32 = u32::MAX;
const OUTSIDE: u32 = u32::MAX - 1;

/// Where a fine search begins.
#[derive(Debug, Clone, Copy)]
pub enum Start<'a> {
    /// At a point (grid coordinates, km).
    Point(Vec3),
    /// On faces of the model's surface, with the incoming time (s) at each of
    /// the face's nodes.
    Surface(&'a SurfaceStart),
}

/// Faces on the model's surface and incoming times on their nodes.
#[derive(Debug, Default)]
pub struct SurfaceStart {
    /// Block and side of each face.
    pub faces: Vec<(u32, Side)>,
    /// Times (s) of each face in turn, [`FineSearch::size`] long, one per place of
    /// the face's layout; infinite where no wave enters.
    pub times: Vec<f32>,
}

/// The fine graph of one block model.
#[derive(Debug)]
pub struct FineSearch<'a, C> {
    pub(super) blocks: &'a Blocks<C>,
    lattice: &'a Lattice,
    pub(super) counts: NodeCounts,
    size: usize,
    rows: RowIndex,
    boxes: BoxSet,
    interpolation: [Vec<(usize, f32)>; 3],
    bucket_width_s: f32,
    face_offsets: [usize; 3],
    face_count: usize,
}

/// What bounds one search.
#[derive(Debug, Clone, Copy)]
pub struct Bound<'a> {
    /// Coarse times (s) from the goal, per lattice node.
    pub potential: &'a [f32],
    /// Factor on the potential.
    pub scale: f32,
    /// Latest time at the goal (s).
    pub limit_s: f32,
}

/// Memory of one search, reused from ray to ray.
#[derive(Debug, Default)]
pub struct FineField {
    stamp: u32,
    block_stamp: Vec<u32>,
    block_slot: Vec<u32>,
    face_stamp: Vec<u32>,
    face_slot: Vec<u32>,
    visited: Vec<BlockSlot>,
    pending: Vec<u64>,
    faces: Vec<FaceSlot>,
    times: Vec<f32>,
    potentials: Vec<f32>,
    queue: BucketQueue,
    sources: [Vec<(u32, f32)>; 6],
    chosen: [Vec<Tabulated>; 2],
    old: Vec<f32>,
}

#[derive(Debug, Clone, Copy)]
struct BlockSlot {
    block: u32,
    faces: [u32; 6],
    neighbours: [u32; 6],
}

#[derive(Debug, Clone, Copy)]
struct FaceSlot {
    least_potential: f32,
    filled: bool,
}

impl FineField {
    /// Times (s) at the places of a face, if the last search filled it.
    pub(super) fn times_on(&self, face_id: usize, size: usize) -> Option<&[f32]> {
        let face = *self.face_slot.get(face_id)? as usize;
        let filled = self.face_stamp[face_id] == self.stamp && self.faces[face].filled;
        filled.then(|| &self.times[face * size..][..size])
    }
}

impl<'a, C: Chart> FineSearch<'a, C> {
    /// Prepares searches with given nodes along the blocks' edges; the potential
    /// comes from a coarse search over `lattice`.
    pub fn new(blocks: &'a Blocks<C>, lattice: &'a Lattice, counts: NodeCounts) -> Self {
        let interpolation = [0, 1, 2].map(|axis| {
            let steps = lattice.subdivisions()[axis];
            (0..counts.along(axis))
                .map(|index| {
                    let place = counts.fraction(axis, index) * steps as f64;
                    let step = (place as usize).min(steps - 1);
                    (step, (place - step as f64) as f32)
                })
                .collect()
        });
        let fastest = blocks
            .slowness()
            .iter()
            .copied()
            .fold(f64::INFINITY, f64::min);
        let narrowest = (0..3)
            .flat_map(|axis| blocks.edges(axis).windows(2))
            .map(|pair| pair[1] - pair[0])
            .fold(f64::INFINITY, f64::min);
        let size = [0, 1, 2].map(|axis| blocks.size(axis));
        let x_faces = (size[0] + 1) * size[1] * size[2];
        let y_faces = size[0] * (size[1] + 1) * size[2];
        Self {
            blocks,
            lattice,
            counts,
            size: counts.size(),
            rows: RowIndex::new(counts),
            boxes: BoxSet::new(blocks, counts),
            interpolation,
            bucket_width_s: (0.5 * fastest * narrowest) as f32,
            face_offsets: [0, x_faces, x_faces + y_faces],
            face_count: x_faces + y_faces + size[0] * size[1] * (size[2] + 1),
        }
    }

    /// Nodes along the blocks' edges.
    pub fn counts(&self) -> NodeCounts {
        self.counts
    }

    /// Length of an array that holds any face.
    pub fn size(&self) -> usize {
        self.size
    }

    pub(super) fn table(&self, block: u32) -> &BoxTables {
        self.boxes.table(block)
    }

    pub(super) fn face_id(&self, cell: Cell, side: Side) -> usize {
        let axis = side / 2;
        let mut at = cell;
        at[axis] += side % 2;
        let mut size = [0, 1, 2].map(|a| self.blocks.size(a));
        size[axis] += 1;
        self.face_offsets[axis] + (at[0] * size[1] + at[1]) * size[2] + at[2]
    }

    fn words(&self) -> usize {
        self.size.div_ceil(64)
    }

    /// Searches from `start` and returns the path from there to `goal` (grid
    /// coordinates, km), or `None` if nothing inside the bound reaches it.
    pub fn run(
        &self,
        start: Start<'_>,
        goal: Vec3,
        bound: Bound<'_>,
        field: &mut FineField,
    ) -> Option<Path> {
        self.reset(field);
        match start {
            Start::Point(source) => self.start_at_point(source, bound, field),
            Start::Surface(surface) => self.start_on_surface(surface, bound, field),
        }
        while let Some(slot) = field.queue.pop() {
            self.visit(slot as usize, bound, field);
        }
        self.trace_back(start, goal, field)
    }

    fn reset(&self, field: &mut FineField) {
        field.block_stamp.resize(self.blocks.count(), 0);
        field.block_slot.resize(self.blocks.count(), 0);
        field.face_stamp.resize(self.face_count, 0);
        field.face_slot.resize(self.face_count, 0);
        field.stamp += 1;
        field.visited.clear();
        field.pending.clear();
        field.faces.clear();
        field.queue.reset(0, self.bucket_width_s);
        field.old.resize(self.size, 0.0);
    }

    fn start_at_point(&self, source: Vec3, bound: Bound<'_>, field: &mut FineField) {
        for block in self.blocks.around(source) {
            let slot = self.block_slot(block, field);
            let slowness = self.blocks.slowness_of(block);
            for side in 0..6 {
                if field.visited[slot].neighbours[side] == OUTSIDE {
                    continue;
                }
                let face = self.filled_face(slot, side, bound, field);
                let mut times = vec![f32::INFINITY; self.size];
                for place in self.places(side) {
                    let at = self.node_position(block, side, place);
                    times[place] = (self.blocks.chart().distance(at, source) * slowness) as f32;
                }
                let next = self.neighbour_slot(slot, side, field);
                self.offer(&times, face, next, side ^ 1, bound, field);
            }
        }
    }

    fn start_on_surface(&self, surface: &SurfaceStart, bound: Bound<'_>, field: &mut FineField) {
        let size = self.size;
        for (&(block, side), times) in surface.faces.iter().zip(surface.times.chunks(size)) {
            let slot = self.block_slot(block, field);
            let face = self.filled_face(slot, side, bound, field);
            self.offer(times, face, slot, side, bound, field);
        }
    }

    /// Lowers the times of a face's nodes and marks those alive as pending in
    /// the block `slot`, whose side `side` the face is.
    fn offer(
        &self,
        times: &[f32],
        face: usize,
        slot: usize,
        side: Side,
        bound: Bound<'_>,
        field: &mut FineField,
    ) {
        let words = self.words();
        let mut earliest = f32::INFINITY;
        for (node, &time) in times.iter().enumerate() {
            let place = face * self.size + node;
            if time >= field.times[place] {
                continue;
            }
            field.times[place] = time;
            if time + bound.scale * field.potentials[place] <= bound.limit_s {
                let word = (slot * 6 + side) * words + node / 64;
                field.pending[word] |= 1 << (node % 64);
                earliest = earliest.min(time);
            }
        }
        field.visited[slot].faces[side] = face as u32;
        if earliest.is_finite() {
            field.queue.lower(slot as u32, earliest);
        }
    }

    fn block_slot(&self, block: u32, field: &mut FineField) -> usize {
        let index = block as usize;
        if field.block_stamp[index] == field.stamp {
            return field.block_slot[index] as usize;
        }
        let slot = field.visited.len();
        field.block_stamp[index] = field.stamp;
        field.block_slot[index] = slot as u32;
        let neighbours = [0, 1, 2, 3, 4, 5].map(|side| {
            if self.blocks.neighbour(block, side).is_some() {
                UNKNOWN
            } else {
                OUTSIDE
            }
        });
        field.visited.push(BlockSlot {
            block,
            faces: [UNKNOWN; 6],
            neighbours,
        });
        field
            .pending
            .resize(field.visited.len() * 6 * self.words(), 0);
        field.queue.add_slot();
        slot
    }

    fn face(&self, slot: usize, side: Side, bound: Bound<'_>, field: &mut FineField) -> usize {
        let known = field.visited[slot].faces[side];
        if known != UNKNOWN {
            return known as usize;
        }
        let cell = self.blocks.cell(field.visited[slot].block);
        let id = self.face_id(cell, side);
        if field.face_stamp[id] != field.stamp {
            field.face_stamp[id] = field.stamp;
            field.face_slot[id] = field.faces.len() as u32;
            let (start, stride_u, stride_v) = self.lattice.face(cell, side);
            let mut least = f32::INFINITY;
            let (u, v) = face_axes(side / 2);
            for i in 0..=self.lattice.subdivisions()[u] {
                for j in 0..=self.lattice.subdivisions()[v] {
                    least = least.min(bound.potential[start + i * stride_u + j * stride_v]);
                }
            }
            field.faces.push(FaceSlot {
                least_potential: least,
                filled: false,
            });
            let length = field.faces.len() * self.size;
            if field.times.len() < length {
                field.times.resize(length, f32::INFINITY);
                field.potentials.resize(length, f32::INFINITY);
            }
        }
        field.visited[slot].faces[side] = field.face_slot[id];
        field.face_slot[id] as usize
    }

    /// Like [`Self::face`], with times cleared and potentials interpolated.
    fn filled_face(
        &self,
        slot: usize,
        side: Side,
        bound: Bound<'_>,
        field: &mut FineField,
    ) -> usize {
        let face = self.face(slot, side, bound, field);
        if field.faces[face].filled {
            return face;
        }
        field.faces[face].filled = true;
        let size = self.size;
        let place = face * size;
        field.times[place..place + size].fill(f32::INFINITY);
        field.potentials[place..place + size].fill(f32::INFINITY);
        let cell = self.blocks.cell(field.visited[slot].block);
        let (start, stride_u, stride_v) = self.lattice.face(cell, side);
        let coarse = |i: usize, j: usize| bound.potential[start + i * stride_u + j * stride_v];
        let (u, v) = face_axes(side / 2);
        let lanes = self.counts.face(side / 2).lanes;
        for (row, &(i, fu)) in self.interpolation[u].iter().enumerate() {
            for (column, &(j, fv)) in self.interpolation[v].iter().enumerate() {
                let low = coarse(i, j) + fv * (coarse(i, j + 1) - coarse(i, j));
                let high = coarse(i + 1, j) + fv * (coarse(i + 1, j + 1) - coarse(i + 1, j));
                field.potentials[place + row * lanes + column] = low + fu * (high - low);
            }
        }
        face
    }

    fn neighbour_slot(&self, slot: usize, side: Side, field: &mut FineField) -> usize {
        let known = field.visited[slot].neighbours[side];
        if known != UNKNOWN {
            return known as usize;
        }
        let block = field.visited[slot].block;
        let stride = self.blocks.stride(side / 2) as u32;
        let next = if side % 2 == 1 {
            block + stride
        } else {
            block - stride
        };
        let next_slot = self.block_slot(next, field);
        field.visited[slot].neighbours[side] = next_slot as u32;
        next_slot
    }

    fn visit(&self, slot: usize, bound: Bound<'_>, field: &mut FineField) {
        let earliest = self.gather_sources(slot, field);
        for side in 0..6 {
            if field.visited[slot].neighbours[side] == OUTSIDE {
                continue;
            }
            let first = (0..6)
                .filter(|&other| other != side)
                .map(|other| earliest[other])
                .fold(f32::INFINITY, f32::min);
            let face = self.face(slot, side, bound, field);
            let latest = bound.limit_s - bound.scale * field.faces[face].least_potential;
            if first <= latest && self.choose_sources(slot, side, latest, field) {
                let face = self.filled_face(slot, side, bound, field);
                self.relax_side(slot, side, face, bound, field);
            }
        }
    }

    /// Collects the pending nodes of each side; returns their earliest times.
    fn gather_sources(&self, slot: usize, field: &mut FineField) -> [f32; 6] {
        let words = self.words();
        let mut earliest = [f32::INFINITY; 6];
        for (side, earliest) in earliest.iter_mut().enumerate() {
            field.sources[side].clear();
            let face = field.visited[slot].faces[side];
            if face == UNKNOWN {
                continue;
            }
            for word in 0..words {
                let mut bits = std::mem::take(&mut field.pending[(slot * 6 + side) * words + word]);
                while bits != 0 {
                    let place = word * 64 + bits.trailing_zeros() as usize;
                    bits &= bits - 1;
                    let time_s = field.times[face as usize * self.size + place];
                    *earliest = earliest.min(time_s);
                    field.sources[side].push((place as u32, time_s));
                }
            }
        }
        earliest
    }

    /// Lists the sources that may reach `side` by `latest`; false if none.
    fn choose_sources(&self, slot: usize, side: Side, latest: f32, field: &mut FineField) -> bool {
        let block = field.visited[slot].block;
        let slowness = self.blocks.slowness_of(block) as f32;
        let per_width = slowness * self.table(block).width_km(side / 2) as f32;
        field.chosen[0].clear();
        field.chosen[1].clear();
        for from in (0..6).filter(|&from| from != side) {
            let chosen = &mut field.chosen[rows_between(from, side) as usize];
            let rows = self.rows.between(from, side);
            for &(place, time_s) in &field.sources[from] {
                let rows = rows[place as usize];
                if time_s + per_width * rows.least <= latest {
                    let start = rows.start;
                    chosen.push(Tabulated { start, time_s });
                }
            }
        }
        !(field.chosen[0].is_empty() && field.chosen[1].is_empty())
    }

    fn relax_side(
        &self,
        slot: usize,
        side: Side,
        face: usize,
        bound: Bound<'_>,
        field: &mut FineField,
    ) {
        let block = field.visited[slot].block;
        let slowness = self.blocks.slowness_of(block) as f32;
        let values = self.table(block).values();
        let layout = self.counts.face(side / 2);
        let (first, size) = (face * self.size, layout.size());
        let times = &mut field.times[first..][..size];
        let old = &mut field.old[..size];
        old.copy_from_slice(times);
        for rows in [Rows::Long, Rows::Short] {
            let chosen = &field.chosen[rows as usize];
            relax_face((layout, rows), values, chosen, slowness, times);
        }
        let words = self.words();
        let potentials = &field.potentials[first..][..size];
        let mut alive = [0_u64; 4];
        let earliest = lowered(
            times,
            old,
            potentials,
            (bound.scale, bound.limit_s),
            &mut alive,
        );
        if earliest.is_finite() {
            let next = self.neighbour_slot(slot, side, field);
            let place = (next * 6 + (side ^ 1)) * words;
            for (word, bits) in alive[..words].iter().enumerate() {
                field.pending[place + word] |= bits;
            }
            field.visited[next].faces[side ^ 1] = face as u32;
            field.queue.lower(next as u32, earliest);
        }
    }
}
