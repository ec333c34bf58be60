//! Search around one ray on a fine graph, inside a proven bound: [`FineSearch`].
//!
//! Nodes are `n × n` points on every face, each face its own copies, without
//! corner or edge nodes. Blocks and faces are created when first reached. A node
//! stays alive only while its time plus the scaled coarse time on to the goal
//! stays below the bound (a goal-directed search with the coarse field as its
//! potential). Only the faces just reached from one side are relaxed into the
//! block on the other: within a block all nodes see each other, so a path never
//! spends two segments in one block.

use crate::blocks::{Blocks, Cell, Side, face_axes};
use crate::frame::Chart;
use crate::lattice::Lattice;
use crate::path::{FREE, Path};
use crate::relax::{Changed, LANES, relax};
use crate::search::buckets::BucketQueue;
use crate::vec3::Vec3;

const UNKNOWN: u32 = u32::MAX;
const OUTSIDE: u32 = u32::MAX - 1;

/// Share of a face left free at its rim, so that a node belongs to one face.
const RIM: f64 = 0.003;

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
    /// `n × n` times (s) of each face in turn; infinite where no wave enters.
    pub times: Vec<f32>,
}

/// The fine graph of one block model.
#[derive(Debug)]
pub struct FineSearch<'a, C> {
    blocks: &'a Blocks<C>,
    lattice: &'a Lattice,
    nodes: usize,
    lanes: usize,
    fractions: Vec<f64>,
    interpolation: Vec<(usize, f32)>,
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
    shapes: Vec<f32>,
    pending: Vec<u64>,
    faces: Vec<FaceSlot>,
    times: Vec<f32>,
    potentials: Vec<f32>,
    queue: BucketQueue,
    sources: [Vec<Changed>; 6],
    chosen: Vec<Changed>,
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
    /// Number of blocks the last search created.
    pub fn block_count(&self) -> usize {
        self.visited.len()
    }
}

impl<'a, C: Chart> FineSearch<'a, C> {
    /// Prepares searches with `nodes × nodes` nodes on each face; the potential
    /// comes from a coarse search over `lattice`.
    pub fn new(blocks: &'a Blocks<C>, lattice: &'a Lattice, nodes: usize) -> Self {
        let fractions: Vec<f64> = (0..nodes)
            .map(|k| RIM + (1.0 - 2.0 * RIM) * k as f64 / (nodes - 1) as f64)
            .collect();
        let steps = lattice.subdivisions();
        let interpolation = fractions
            .iter()
            .map(|&fraction| {
                let place = fraction * steps as f64;
                let step = (place as usize).min(steps - 1);
                (step, (place - step as f64) as f32)
            })
            .collect();
        let fastest = blocks.slowness().iter().copied().fold(f64::INFINITY, f64::min);
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
            nodes,
            lanes: (nodes * nodes).div_ceil(LANES) * LANES,
            fractions,
            interpolation,
            bucket_width_s: (0.5 * fastest * narrowest) as f32,
            face_offsets: [0, x_faces, x_faces + y_faces],
            face_count: x_faces + y_faces + size[0] * size[1] * (size[2] + 1),
        }
    }

    /// Nodes along each side of a face.
    pub fn nodes(&self) -> usize {
        self.nodes
    }

    /// Grid coordinates (km) of a node on a face.
    pub fn node_position(&self, block: u32, side: Side, node: usize) -> Vec3 {
        let axis = side / 2;
        let (u, v) = face_axes(axis);
        let mut at = [0.0; 3];
        let (low, high) = self.blocks.range(block, axis);
        at[axis] = if side % 2 == 1 { high } else { low };
        for (along, k) in [(u, node / self.nodes), (v, node % self.nodes)] {
            let (low, high) = self.blocks.range(block, along);
            at[along] = low + (high - low) * self.fractions[k];
        }
        at
    }

    fn face_id(&self, cell: Cell, side: Side) -> usize {
        let axis = side / 2;
        let mut at = cell;
        at[axis] += side % 2;
        let mut size = [0, 1, 2].map(|a| self.blocks.size(a));
        size[axis] += 1;
        self.face_offsets[axis] + (at[0] * size[1] + at[1]) * size[2] + at[2]
    }

    fn words(&self) -> usize {
        (self.nodes * self.nodes).div_ceil(64)
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
        field.shapes.clear();
        field.pending.clear();
        field.faces.clear();
        field.queue.reset(0, self.bucket_width_s);
        field.old.resize(self.lanes, 0.0);
    }

    fn start_at_point(&self, source: Vec3, bound: Bound<'_>, field: &mut FineField) {
        let count = self.nodes * self.nodes;
        for block in self.blocks.around(source) {
            let slot = self.block_slot(block, field);
            let slowness = self.blocks.slowness_of(block);
            for side in 0..6 {
                if field.visited[slot].neighbours[side] == OUTSIDE {
                    continue;
                }
                let face = self.filled_face(slot, side, bound, field);
                let times: Vec<f32> = (0..count)
                    .map(|node| {
                        let at = self.node_position(block, side, node);
                        (self.blocks.chart().distance(at, source) * slowness) as f32
                    })
                    .collect();
                let next = self.neighbour_slot(slot, side, field);
                self.offer(&times, face, next, side ^ 1, bound, field);
            }
        }
    }

    fn start_on_surface(&self, surface: &SurfaceStart, bound: Bound<'_>, field: &mut FineField) {
        let count = self.nodes * self.nodes;
        for (&(block, side), times) in surface.faces.iter().zip(surface.times.chunks(count)) {
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
            let place = face * self.lanes + node;
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
        self.add_shape(block, field);
        slot
    }

    /// Positions of all face nodes of a block relative to its low corner, in
    /// axes turned by the block's longitude: x, y and z lanes of each side.
    fn add_shape(&self, block: u32, field: &mut FineField) {
        let chart = self.blocks.chart();
        let first = [0, 1, 2].map(|axis| self.blocks.range(block, axis).0);
        let origin = chart.position([0.0, first[1], first[2]]);
        let start = field.shapes.len();
        field.shapes.resize(start + 18 * self.lanes, 1e6);
        for side in 0..6 {
            let lanes = &mut field.shapes[start + 3 * side * self.lanes..][..3 * self.lanes];
            for node in 0..self.nodes * self.nodes {
                let mut grid = self.node_position(block, side, node);
                grid[0] -= first[0];
                let position = chart.position(grid);
                for axis in 0..3 {
                    lanes[axis * self.lanes + node] = (position[axis] - origin[axis]) as f32;
                }
            }
        }
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
            for i in 0..=self.lattice.subdivisions() {
                for j in 0..=self.lattice.subdivisions() {
                    least = least.min(bound.potential[start + i * stride_u + j * stride_v]);
                }
            }
            field.faces.push(FaceSlot {
                least_potential: least,
                filled: false,
            });
            let length = field.faces.len() * self.lanes;
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
        let place = face * self.lanes;
        field.times[place..place + self.lanes].fill(f32::INFINITY);
        let cell = self.blocks.cell(field.visited[slot].block);
        let (start, stride_u, stride_v) = self.lattice.face(cell, side);
        let coarse = |i: usize, j: usize| bound.potential[start + i * stride_u + j * stride_v];
        for (row, &(i, fu)) in self.interpolation.iter().enumerate() {
            for (column, &(j, fv)) in self.interpolation.iter().enumerate() {
                let low = coarse(i, j) + fv * (coarse(i, j + 1) - coarse(i, j));
                let high = coarse(i + 1, j) + fv * (coarse(i + 1, j + 1) - coarse(i + 1, j));
                field.potentials[place + row * self.nodes + column] = low + fu * (high - low);
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
        let next = if side % 2 == 1 { block + stride } else { block - stride };
        let next_slot = self.block_slot(next, field);
        field.visited[slot].neighbours[side] = next_slot as u32;
        next_slot
    }

    fn visit(&self, slot: usize, bound: Bound<'_>, field: &mut FineField) {
        let earliest = self.gather_sources(slot, field);
        let block = field.visited[slot].block;
        let slowness = self.blocks.slowness_of(block) as f32;
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
            if first > latest {
                continue;
            }
            let face = self.filled_face(slot, side, bound, field);
            self.relax_face(slot, side, face, latest, slowness, bound, field);
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
            let shape = &field.shapes[(slot * 6 + side) * 3 * self.lanes..][..3 * self.lanes];
            for word in 0..words {
                let mut bits = std::mem::take(&mut field.pending[(slot * 6 + side) * words + word]);
                while bits != 0 {
                    let node = word * 64 + bits.trailing_zeros() as usize;
                    bits &= bits - 1;
                    let time_s = field.times[face as usize * self.lanes + node];
                    *earliest = earliest.min(time_s);
                    let at = [0, 1, 2].map(|axis| shape[axis * self.lanes + node]);
                    field.sources[side].push(Changed { at, time_s });
                }
            }
        }
        earliest
    }

    #[expect(clippy::too_many_arguments, reason = "one step of the visit, split off")]
    fn relax_face(
        &self,
        slot: usize,
        side: Side,
        face: usize,
        latest: f32,
        slowness: f32,
        bound: Bound<'_>,
        field: &mut FineField,
    ) {
        field.chosen.clear();
        for other in (0..6).filter(|&other| other != side) {
            let alive = field.sources[other].iter().filter(|s| s.time_s <= latest);
            field.chosen.extend(alive);
        }
        if field.chosen.is_empty() {
            return;
        }
        let lanes = self.lanes;
        let shape = &field.shapes[(slot * 6 + side) * 3 * lanes..][..3 * lanes];
        let (x, rest) = shape.split_at(lanes);
        let (y, z) = rest.split_at(lanes);
        let times = &mut field.times[face * lanes..][..lanes];
        field.old.copy_from_slice(times);
        relax(x, y, z, &field.chosen, slowness, times);
        let words = self.words();
        let mut alive = [0_u64; 4];
        let mut earliest = f32::INFINITY;
        let potentials = &field.potentials[face * lanes..][..lanes];
        for node in 0..self.nodes * self.nodes {
            let time = times[node];
            if time < field.old[node] && time + bound.scale * potentials[node] <= bound.limit_s {
                alive[node / 64] |= 1 << (node % 64);
                earliest = earliest.min(time);
            }
        }
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

    fn trace_back(&self, start: Start<'_>, goal: Vec3, field: &FineField) -> Option<Path> {
        let home = match start {
            Start::Point(source) => self.blocks.around(source),
            Start::Surface(_) => Vec::new(),
        };
        let mut path = Path::default();
        path.start(goal, FREE);
        let mut candidates = self.blocks.around(goal);
        let mut at = goal;
        let mut arrived_by = None;
        let mut below = f32::INFINITY;
        loop {
            let mut best = (f32::INFINITY, 0, None);
            for &block in &candidates {
                if let (Start::Point(source), true) = (start, home.contains(&block)) {
                    let way = self.blocks.chart().distance(at, source);
                    let time = (way * self.blocks.slowness_of(block)) as f32;
                    if time <= best.0 {
                        best = (time, block, None);
                    }
                }
                if let Some((time, side, node)) = self.best_node(block, at, (arrived_by, below), field)
                    && time < best.0
                {
                    best = (time, block, Some((side, node)));
                }
            }
            let (time, block, step) = best;
            if !time.is_finite() {
                return None;
            }
            match (step, start) {
                (None, Start::Point(source)) => {
                    path.push(block, source, FREE);
                    path.reverse();
                    return Some(path);
                }
                (None, Start::Surface(_)) => return None,
                (Some((side, node)), _) => {
                    at = self.node_position(block, side, node);
                    below = self.node_time(block, side, node, field);
                    path.push(block, at, (side / 2) as u8);
                    let Some(next) = self.blocks.neighbour(block, side) else {
                        path.reverse();
                        return Some(path);
                    };
                    candidates.clear();
                    candidates.push(next);
                    arrived_by = Some(side ^ 1);
                }
            }
        }
    }

    fn node_time(&self, block: u32, side: Side, node: usize, field: &FineField) -> f32 {
        let face = field.face_slot[self.face_id(self.blocks.cell(block), side)] as usize;
        field.times[face * self.lanes + node]
    }

    /// The best node of a block's faces to come from: not of the side just
    /// left, and earlier than the present node.
    fn best_node(
        &self,
        block: u32,
        at: Vec3,
        (except, below): (Option<Side>, f32),
        field: &FineField,
    ) -> Option<(f32, Side, usize)> {
        if field.block_stamp[block as usize] != field.stamp {
            return None;
        }
        let slot = field.block_slot[block as usize] as usize;
        let chart = self.blocks.chart();
        let first = [0, 1, 2].map(|axis| self.blocks.range(block, axis).0);
        let origin = chart.position([0.0, first[1], first[2]]);
        let here = chart.position([at[0] - first[0], at[1], at[2]]);
        let local = [0, 1, 2].map(|axis| (here[axis] - origin[axis]) as f32);
        let slowness = self.blocks.slowness_of(block) as f32;
        let cell = self.blocks.cell(block);
        let mut best: Option<(f32, Side, usize)> = None;
        for side in (0..6).filter(|&side| Some(side) != except) {
            let id = self.face_id(cell, side);
            let face = field.face_slot[id] as usize;
            if field.face_stamp[id] != field.stamp || !field.faces[face].filled {
                continue;
            }
            let times = &field.times[face * self.lanes..][..self.lanes];
            let shape = &field.shapes[(slot * 6 + side) * 3 * self.lanes..][..3 * self.lanes];
            for node in 0..self.nodes * self.nodes {
                let dx = shape[node] - local[0];
                let dy = shape[self.lanes + node] - local[1];
                let dz = shape[2 * self.lanes + node] - local[2];
                let time = times[node] + slowness * (dx * dx + dy * dy + dz * dz).sqrt();
                if times[node] < below && best.is_none_or(|known| time < known.0) {
                    best = Some((time, side, node));
                }
            }
        }
        best
    }
}
