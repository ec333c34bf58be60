//! From a filled [`CoarseField`] back to the path that reached a point:
//! [`trace_back`].
//!
//! No predecessors are stored; each step looks for the node whose time plus the
//! way from it explains the present time best.

use crate::blocks::Cell;
use crate::frame::Chart;
use crate::path::{FREE, Path};
use crate::search::coarse::{CoarseField, CoarseSearch, split_shape};
use crate::vec3::Vec3;

/// A step of the way back.
struct Step {
    time: f32,
    block: u32,
    /// The node stepped to and its own time, or `None` for the source.
    node: Option<(usize, f32)>,
}

/// The path from `point` (grid coordinates, km) to the search's `source`, in
/// that order. `None` if the point was not reached.
pub fn trace_back<C: Chart>(
    search: &CoarseSearch<'_, C>,
    field: &CoarseField,
    source: Vec3,
    point: Vec3,
) -> Option<Path> {
    let blocks = search.blocks();
    let lattice = search.lattice();
    let home = blocks.around(source);
    let mut path = Path::default();
    path.start(point, FREE);
    let mut candidates = blocks.around(point);
    let mut at = point;
    let mut below = f32::INFINITY;
    loop {
        let mut best: Option<Step> = None;
        for &block in &candidates {
            let within = home.contains(&block).then_some(source);
            let Some(step) = best_step(search, field, block, at, within, below) else {
                continue;
            };
            if best.as_ref().is_none_or(|known| step.time < known.time) {
                best = Some(step);
            }
        }
        let step = best?;
        if path.blocks.last() == Some(&step.block) {
            path.drop_last();
        } else if !path.is_empty() {
            path.step_into(blocks, step.block).then_some(())?;
        }
        let Some((node, time)) = step.node else {
            path.push(step.block, source, FREE);
            return Some(path);
        };
        let cell = blocks.cell(step.block);
        at = lattice.node_position(cell, node);
        path.push(step.block, at, FREE);
        below = time;
        candidates = holders(search, cell, node);
    }
}

/// All blocks that hold a surface node.
fn holders<C: Chart>(search: &CoarseSearch<'_, C>, cell: Cell, node: usize) -> Vec<u32> {
    let blocks = search.blocks();
    let steps = search.lattice().surface()[node].steps;
    let last = search.lattice().subdivisions();
    let span = [0, 1, 2].map(|axis| {
        let low = cell[axis] - usize::from(steps[axis] == 0 && cell[axis] > 0);
        let more = steps[axis] == last[axis] && cell[axis] + 1 < blocks.size(axis);
        low..=cell[axis] + usize::from(more)
    });
    let mut found = Vec::with_capacity(8);
    for ix in span[0].clone() {
        for iy in span[1].clone() {
            found.extend(span[2].clone().map(|iz| blocks.index([ix, iy, iz])));
        }
    }
    found
}

/// The best way out of `at` through one block, to a node earlier than `below`
/// or straight to the source.
fn best_step<C: Chart>(
    search: &CoarseSearch<'_, C>,
    field: &CoarseField,
    block: u32,
    at: Vec3,
    source: Option<Vec3>,
    below: f32,
) -> Option<Step> {
    let blocks = search.blocks();
    let lattice = search.lattice();
    let cell = blocks.cell(block);
    let slowness = blocks.slowness_of(block);
    let direct = source.map(|source| Step {
        time: (blocks.chart().distance(at, source) * slowness) as f32,
        block,
        node: None,
    });
    let shape = split_shape(lattice.shape(cell), lattice.lanes());
    let local = local_position(search, cell, at);
    let base = lattice.base(cell);
    let mut best = direct;
    for (number, node) in lattice.surface().iter().enumerate() {
        let known = field.times()[base + node.offset];
        if known >= below {
            continue;
        }
        let dx = shape.0[number] - local[0];
        let dy = shape.1[number] - local[1];
        let dz = shape.2[number] - local[2];
        let time = known + slowness as f32 * (dx * dx + dy * dy + dz * dz).sqrt();
        if time.is_finite() && best.as_ref().is_none_or(|step| time < step.time) {
            best = Some(Step {
                time,
                block,
                node: Some((number, known)),
            });
        }
    }
    best
}

/// A point in the Cartesian axes of [`crate::lattice::Lattice::shape`].
fn local_position<C: Chart>(search: &CoarseSearch<'_, C>, cell: Cell, at: Vec3) -> [f32; 3] {
    let blocks = search.blocks();
    let corner = search.lattice().node_position(cell, 0);
    let chart = blocks.chart();
    let turned = |mut grid: Vec3| {
        grid[0] -= corner[0];
        chart.position(grid)
    };
    let (origin, position) = (turned(corner), turned(at));
    [0, 1, 2].map(|axis| (position[axis] - origin[axis]) as f32)
}
