//! The way back through a filled [`FineField`]: the path that reached the goal.

use crate::blocks::{Side, face_axes};
use crate::frame::Chart;
use crate::path::{FREE, Path};
use crate::search::fine::{FineField, FineSearch, Start};
use crate::vec3::Vec3;

/// A way from a point back to a node on a face of its block.
#[derive(Clone, Copy)]
struct Step {
    time_s: f32,
    block: u32,
    side: Side,
    place: usize,
    node_time_s: f32,
}

/// Where the way back has arrived.
struct Position {
    at: Vec3,
    blocks: Vec<u32>,
    /// Side of the block just entered; no way leads back through it.
    arrived_by: Option<Side>,
    /// Nodes not earlier than this cannot come before.
    time_s: f32,
}

impl<C: Chart> FineSearch<'_, C> {
    /// The path from the start to `goal`, or `None` if the goal was not reached.
    pub(super) fn trace_back(
        &self,
        start: Start<'_>,
        goal: Vec3,
        field: &FineField,
    ) -> Option<Path> {
        let mut path = Path::default();
        path.start(goal, FREE);
        let mut position = Position {
            at: goal,
            blocks: self.blocks.around(goal),
            arrived_by: None,
            time_s: f32::INFINITY,
        };
        loop {
            let step = position
                .blocks
                .iter()
                .filter_map(|&block| self.best_step(block, &position, field))
                .min_by(|a, b| a.time_s.total_cmp(&b.time_s));
            if let Start::Point(source) = start
                && let Some((time_s, block)) = self.direct_way(source, &position)
                && step.is_none_or(|step| time_s <= step.time_s)
            {
                path.push(block, source, FREE);
                path.reverse();
                return Some(path);
            }
            let step = step?;
            position.at = self.node_position(step.block, step.side, step.place);
            path.push(step.block, position.at, (step.side / 2) as u8);
            let Some(next) = self.blocks.neighbour(step.block, step.side) else {
                path.reverse();
                return Some(path);
            };
            position.blocks.clear();
            position.blocks.push(next);
            position.arrived_by = Some(step.side ^ 1);
            position.time_s = step.node_time_s;
        }
    }

    /// Time (s) straight from the source, where it shares a block with the
    /// position.
    fn direct_way(&self, source: Vec3, position: &Position) -> Option<(f32, u32)> {
        let home = self.blocks.around(source);
        let shared = position.blocks.iter().filter(|block| home.contains(block));
        let way = self.blocks.chart().distance(position.at, source);
        shared
            .map(|&block| ((way * self.blocks.slowness_of(block)) as f32, block))
            .min_by(|a, b| a.0.total_cmp(&b.0))
    }

    /// The best node to come from on the faces of one block.
    fn best_step(&self, block: u32, position: &Position, field: &FineField) -> Option<Step> {
        let table = self.table(block);
        let width = [0, 1, 2].map(|axis| table.width_km(axis));
        let here = [0, 1, 2].map(|axis| {
            let (low, high) = self.blocks.range(block, axis);
            (position.at[axis] - low) / (high - low) * width[axis]
        });
        let slowness = self.blocks.slowness_of(block) as f32;
        let cell = self.blocks.cell(block);
        let mut best: Option<Step> = None;
        for side in (0..6).filter(|&side| Some(side) != position.arrived_by) {
            let Some(times) = field.times_on(self.face_id(cell, side), self.size()) else {
                continue;
            };
            let axis = side / 2;
            let (u, v) = face_axes(axis);
            let (counts, layout) = (self.counts(), self.counts().face(axis));
            let across = here[axis] - if side % 2 == 1 { width[axis] } else { 0.0 };
            for place in self
                .places(side)
                .filter(|&place| times[place] < position.time_s)
            {
                let (row, column) = (place / layout.lanes, place % layout.lanes);
                let du = here[u] - counts.fraction(u, row) * width[u];
                let dv = here[v] - counts.fraction(v, column) * width[v];
                let way = (across * across + du * du + dv * dv).sqrt();
                let time_s = times[place] + slowness * way as f32;
                if best.is_none_or(|step| time_s < step.time_s) {
                    best = Some(Step {
                        time_s,
                        block,
                        side,
                        place,
                        node_time_s: times[place],
                    });
                }
            }
        }
        best
    }
}
