//! Edge flips: where a crossing sits at the rim of its face, the ray may be
//! earlier through the blocks beyond that edge.
//!
//! A crossing between blocks A and B near an edge is tried between their
//! neighbours A′ and B′ beyond it; an entry point near the rim of its face is
//! tried on the next face of the model's surface. A few segments around the
//! change are optimised before the verdict.

use crate::blocks::{Blocks, face_axes};
use crate::fermat::{LEAST_GAIN_S, Refiner};
use crate::frame::Chart;
use crate::path::Path;
use crate::vec3::{Vec3, distance};

/// Segments kept on each side of a change while it is optimised.
const WINDOW: usize = 2;
/// Share of a face's width that counts as its rim.
const RIM: f64 = 0.03;
/// Where a moved crossing starts, as a share of the new face's width.
const INSIDE: f64 = 0.05;

/// Flips that failed, so that they are not tried again while nothing near them
/// has moved.
#[derive(Debug, Default)]
pub(super) struct FlipMemory {
    failed: Vec<(u32, u32, u8, Vec3, Vec3)>,
}

impl FlipMemory {
    pub(super) fn clear(&mut self) {
        self.failed.clear();
    }

    fn holds(&self, key: &(u32, u32, u8, Vec3, Vec3), tolerance_km: f64) -> bool {
        self.failed.iter().any(|known| {
            (known.0, known.1, known.2) == (key.0, key.1, key.2)
                && distance(known.3, key.3) < tolerance_km
                && distance(known.4, key.4) < tolerance_km
        })
    }
}

/// A new course: segments `low..high` give way to `middle`.
struct Detour {
    low: usize,
    high: usize,
    middle: Vec<(u32, Vec3, u8)>,
    entry: Option<(Vec3, u8)>,
}

impl<C: Chart> Refiner<'_, C> {
    /// Tries every crossing near a rim once; returns how many flips gained.
    pub(super) fn flip_round(&mut self, path: &mut Path, patience_s: f64) -> usize {
        let mut gained = 0;
        let mut point = usize::from(self.incoming.is_none() || path.axes[0] > 2);
        while point < path.len() {
            gained += usize::from(self.flip_at(path, point, patience_s));
            point += 1;
        }
        gained
    }

    fn flip_at(&mut self, path: &mut Path, point: usize, patience_s: f64) -> bool {
        let (u, v) = face_axes(usize::from(path.axes[point]));
        for along in [u, v] {
            if point >= path.len() {
                return false;
            }
            let (low, high) = self.blocks.range(path.blocks[point], along);
            let at = path.points[point][along];
            let up = if at - low < RIM * (high - low) {
                false
            } else if high - at < RIM * (high - low) {
                true
            } else {
                continue;
            };
            let before = path.blocks[point.saturating_sub(1)];
            let code = (2 * along + usize::from(up)) as u8;
            let key = (
                before,
                path.blocks[point],
                code,
                path.points[point.saturating_sub(1)],
                path.points[point + 1],
            );
            if self.memory.holds(&key, 0.02 * self.scale_km) {
                continue;
            }
            if self.try_side(path, point, along, up, patience_s) {
                return true;
            }
            self.memory.failed.push(key);
        }
        false
    }

    fn try_side(
        &mut self,
        path: &mut Path,
        point: usize,
        along: usize,
        up: bool,
        patience_s: f64,
    ) -> bool {
        let detours = if point == 0 {
            entry_detours(self.blocks, path, along, up)
        } else {
            crossing_detours(self.blocks, path, point, along, up)
        };
        detours
            .iter()
            .any(|detour| self.try_detour(path, detour, patience_s))
    }

    fn try_detour(&mut self, path: &mut Path, detour: &Detour, patience_s: f64) -> bool {
        let low = detour.low.saturating_sub(WINDOW);
        let high = (detour.high + WINDOW).min(path.len());
        let mut trial = std::mem::take(&mut self.trial);
        assemble(path, detour, low, high, &mut trial);
        let from_surface = low == 0;
        let old = self.window_time(path, low..high, from_surface);
        let gained = self.window_time(&trial, 0..trial.len(), from_surface) <= old + patience_s
            && self.gains(&mut trial, old, from_surface);
        if gained {
            path.splice(low..high, &trial);
        }
        self.trial = trial;
        gained
    }

    fn gains(&mut self, trial: &mut Path, old: f64, from_surface: bool) -> bool {
        self.optimise_window(trial, 0.01, 5, from_surface);
        let mut new = self.window_time(trial, 0..trial.len(), from_surface);
        if new >= old - LEAST_GAIN_S && new < old + 1e-4 {
            self.optimise_window(trial, 0.001, 4, from_surface);
            new = self.window_time(trial, 0..trial.len(), from_surface);
        }
        new < old - LEAST_GAIN_S
    }

    fn optimise_window(
        &mut self,
        trial: &mut Path,
        smoothing: f64,
        iterations: usize,
        from_surface: bool,
    ) {
        let incoming = self.incoming.filter(|_| from_surface);
        let smoothing_km = smoothing * self.scale_km;
        self.newton
            .minimise(self.blocks, incoming, trial, smoothing_km, iterations);
    }

    fn window_time(&self, path: &Path, range: std::ops::Range<usize>, from_surface: bool) -> f64 {
        let outside = if from_surface {
            self.outside_time(path)
        } else {
            0.0
        };
        outside + path.time_of(self.blocks, range)
    }
}

/// Copies segments `low..high` of `path` with the detour in place.
fn assemble(path: &Path, detour: &Detour, low: usize, high: usize, trial: &mut Path) {
    let (point, axis) = match detour.entry {
        Some(entry) => entry,
        None => (path.points[low], path.axes[low]),
    };
    trial.start(point, axis);
    if detour.entry.is_none() {
        for segment in low..detour.low {
            trial.push(
                path.blocks[segment],
                path.points[segment + 1],
                path.axes[segment + 1],
            );
        }
    }
    for &(block, point, axis) in &detour.middle {
        trial.push(block, point, axis);
    }
    for segment in detour.high..high {
        trial.push(
            path.blocks[segment],
            path.points[segment + 1],
            path.axes[segment + 1],
        );
    }
}

/// Courses for a crossing moved over the edge towards `along`.
fn crossing_detours<C: Chart>(
    blocks: &Blocks<C>,
    path: &Path,
    point: usize,
    along: usize,
    up: bool,
) -> Vec<Detour> {
    let side = 2 * along + usize::from(up);
    let (before, after) = (path.blocks[point - 1], path.blocks[point]);
    let (Some(new_before), Some(new_after)) = (
        blocks.neighbour(before, side),
        blocks.neighbour(after, side),
    ) else {
        return Vec::new();
    };
    let comes_from = point >= 2 && path.blocks[point - 2] == new_before;
    let goes_to = point + 1 < path.len() && path.blocks[point + 1] == new_after;
    let mut merges = vec![(comes_from, goes_to)];
    if comes_from || goes_to {
        merges.push((false, false));
    }
    merges
        .into_iter()
        .map(|(join_left, join_right)| {
            let low = if join_left { point - 2 } else { point - 1 };
            let high = if join_right { point + 2 } else { point + 1 };
            let (from, to) = (path.points[low], path.points[high]);
            let axis = usize::from(path.axes[point]);
            let plane = path.points[point][axis];
            let mut moved = on_plane(from, to, axis, plane);
            confine(blocks, &mut moved, new_before, axis, along, up);
            let edge = edge_of(blocks, before, along, up);
            let mut middle = Vec::with_capacity(4);
            if !join_left {
                middle.push((
                    before,
                    across(blocks, from, moved, along, edge, before),
                    along as u8,
                ));
            }
            middle.push((new_before, moved, axis as u8));
            if join_right {
                middle.push((new_after, to, path.axes[high]));
            } else {
                middle.push((
                    new_after,
                    across(blocks, moved, to, along, edge, after),
                    along as u8,
                ));
                middle.push((after, to, path.axes[high]));
            }
            Detour {
                low,
                high,
                middle,
                entry: None,
            }
        })
        .collect()
}

/// Courses for an entry point moved over the rim of its face.
fn entry_detours<C: Chart>(blocks: &Blocks<C>, path: &Path, along: usize, up: bool) -> Vec<Detour> {
    let block = path.blocks[0];
    let axis = usize::from(path.axes[0]);
    let old_entry = path.points[0];
    let Some(next) = blocks.neighbour(block, 2 * along + usize::from(up)) else {
        return vec![onto_next_surface(blocks, path, along, up)];
    };
    let edge = edge_of(blocks, block, along, up);
    let mut entry = old_entry;
    confine(blocks, &mut entry, next, axis, along, up);
    let joins = path.len() > 1 && path.blocks[1] == next;
    let through_both = Detour {
        low: 0,
        high: 1,
        middle: vec![
            (
                next,
                across(blocks, entry, path.points[1], along, edge, block),
                along as u8,
            ),
            (block, path.points[1], path.axes[1]),
        ],
        entry: Some((entry, axis as u8)),
    };
    if !joins {
        return vec![through_both];
    }
    let direct = Detour {
        low: 0,
        high: 2,
        middle: vec![(next, path.points[2], path.axes[2])],
        entry: Some((entry, axis as u8)),
    };
    vec![direct, through_both]
}

/// Moves the entry of the first block from one side of the model's surface to
/// the adjoining one.
fn onto_next_surface<C: Chart>(blocks: &Blocks<C>, path: &Path, along: usize, up: bool) -> Detour {
    let block = path.blocks[0];
    let axis = usize::from(path.axes[0]);
    let mut entry = path.points[0];
    entry[along] = edge_of(blocks, block, along, up);
    let (low, high) = blocks.range(block, axis);
    let inset = INSIDE * (high - low);
    entry[axis] = entry[axis].clamp(low + inset, high - inset);
    Detour {
        low: 0,
        high: 1,
        middle: vec![(block, path.points[1], path.axes[1])],
        entry: Some((entry, along as u8)),
    }
}

/// The upper or lower edge (km) of a block.
fn edge_of<C: Chart>(blocks: &Blocks<C>, block: u32, along: usize, up: bool) -> f64 {
    let (low, high) = blocks.range(block, along);
    if up { high } else { low }
}

/// The point where the line from `from` to `to` (in grid coordinates) meets a
/// plane, or the middle if it runs along it.
fn on_plane(from: Vec3, to: Vec3, axis: usize, plane: f64) -> Vec3 {
    let rise = to[axis] - from[axis];
    let share = if rise.abs() > 1e-9 {
        ((plane - from[axis]) / rise).clamp(0.0, 1.0)
    } else {
        0.5
    };
    let mut point = crate::vec3::lerp(from, to, share);
    point[axis] = plane;
    point
}

/// Keeps a crossing on the face of `block` normal to `axis`, a little inside
/// the edge it came over.
fn confine<C: Chart>(
    blocks: &Blocks<C>,
    point: &mut Vec3,
    block: u32,
    axis: usize,
    along: usize,
    up: bool,
) {
    let other = 3 - axis - along;
    let (low, high) = blocks.range(block, other);
    point[other] = point[other].clamp(low, high);
    let (low, high) = blocks.range(block, along);
    let inset = INSIDE * (high - low);
    point[along] = if up {
        point[along].clamp(low + inset, high)
    } else {
        point[along].clamp(low, high - inset)
    };
}

/// Where the line between two points crosses the edge plane of `block`.
fn across<C: Chart>(
    blocks: &Blocks<C>,
    from: Vec3,
    to: Vec3,
    along: usize,
    edge: f64,
    block: u32,
) -> Vec3 {
    let mut point = on_plane(from, to, along, edge);
    for axis in (0..3).filter(|&axis| axis != along) {
        let (low, high) = blocks.range(block, axis);
        point[axis] = point[axis].clamp(low, high);
    }
    point
}
