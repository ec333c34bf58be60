//! Fermat refinement: from a graph's path to the minimum of travel time over
//! crossing points, block sequence and entry point ([`Refiner`]).
//!
//! For a given sequence of flat blocks the time is convex in the crossing
//! points, and [`newton`] finds its minimum; [`chords`] and [`flips`] change the
//! sequence. Only gains are accepted.

mod chords;
mod flips;
mod newton;

pub use chords::straight_path;

use crate::blocks::Blocks;
use crate::frame::Chart;
use crate::incoming::{Incoming, enters};
use crate::path::Path;
use flips::FlipMemory;
use newton::Newton;

/// Gains below this (s) do not count as progress.
const LEAST_GAIN_S: f64 = 2e-7;

/// How hard to refine.
#[derive(Debug, Clone, Copy)]
pub struct Effort {
    /// Rounds of chord pulling before the flips.
    pub chord_rounds: usize,
    /// Rounds of edge flips.
    pub flip_rounds: usize,
    /// A flip is given up if it is later by more than this share of the mean time
    /// through a block, before its crossing points are optimised.
    pub flip_patience: f64,
}

/// Refines paths in one block model, reusing its memory from ray to ray.
pub struct Refiner<'a, C> {
    blocks: &'a Blocks<C>,
    incoming: Option<&'a dyn Incoming>,
    scale_km: f64,
    transit_s: f64,
    newton: Newton,
    trial: Path,
    memory: FlipMemory,
}

impl<'a, C: Chart> Refiner<'a, C> {
    /// A refiner for paths from fixed points, or, after
    /// [`Self::set_incoming`], from the model's surface.
    pub fn new(blocks: &'a Blocks<C>) -> Self {
        Self {
            blocks,
            incoming: None,
            scale_km: blocks.mean_width_km(),
            transit_s: blocks.mean_transit_s(),
            newton: Newton::default(),
            trial: Path::default(),
            memory: FlipMemory::default(),
        }
    }

    /// Lets the first point of a path move over the model's surface, where this
    /// wave enters; `None` fixes it.
    pub fn set_incoming(&mut self, incoming: Option<&'a dyn Incoming>) {
        self.incoming = incoming;
    }

    /// Travel time (s) of a path, the time outside the model included; infinite
    /// where no wave enters at its first point.
    pub fn total_time(&self, path: &Path) -> f64 {
        self.outside_time(path) + path.time(self.blocks)
    }

    /// Travel time (s) from the event to a path's first point.
    pub fn outside_time(&self, path: &Path) -> f64 {
        self.incoming.map_or(0.0, |incoming| {
            incoming
                .at(path.points[0])
                .filter(|arrival| enters(arrival, self.entry_side(path)))
                .map_or(f64::INFINITY, |arrival| arrival.time_s)
        })
    }

    /// The side of its block through which a path enters the model.
    fn entry_side(&self, path: &Path) -> usize {
        let axis = usize::from(path.axes[0]);
        let high = self.blocks.cell(path.blocks[0])[axis] + 1 == self.blocks.size(axis);
        let at_high = path.points[0][axis] >= self.blocks.range(path.blocks[0], axis).1 - 1e-9;
        2 * axis + usize::from(high && at_high)
    }

    /// Moves the crossing points to their best places in the present sequence.
    pub fn settle(&mut self, path: &mut Path) {
        path.cut_loops(self.blocks);
        self.optimise(path, 0.02, 8);
        self.optimise(path, 0.001, 8);
    }

    /// Refines a path in place; its time never rises. Without any rounds the
    /// crossing points are settled only.
    pub fn refine(&mut self, path: &mut Path, effort: Effort) {
        self.settle(path);
        if effort.chord_rounds + effort.flip_rounds == 0 {
            return;
        }
        for _ in 0..effort.chord_rounds {
            if self.pull_chords(path, &[1000, 24, 12, 6, 4, 3, 2]) == 0 {
                break;
            }
            path.cut_loops(self.blocks);
            self.optimise(path, 0.01, 5);
        }
        self.memory.clear();
        for _ in 0..effort.flip_rounds {
            if self.flip_round(path, effort.flip_patience * self.transit_s) == 0 {
                break;
            }
            path.cut_loops(self.blocks);
            self.optimise(path, 0.01, 6);
        }
        self.polish(path);
    }

    /// Last digits: the smoothing of lengths shrinks to nothing.
    pub fn polish(&mut self, path: &mut Path) {
        self.optimise(path, 1e-3, 8);
        self.optimise(path, 1e-4, 6);
        path.cut_loops(self.blocks);
    }

    fn optimise(&mut self, path: &mut Path, smoothing: f64, iterations: usize) {
        let smoothing_km = smoothing * self.scale_km;
        self.newton
            .minimise(self.blocks, self.incoming, path, smoothing_km, iterations);
    }
}
