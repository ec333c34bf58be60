//! From starts and ends to rays: [`Tracer`] runs the coarse search of each
//! receiver, then for every ray the first guess, the fine search inside its
//! bound and the Fermat refinement.

use crate::blocks::Blocks;
use crate::entry::{CornerTimes, Surface};
use crate::error::Result;
use crate::fermat::{Effort, Refiner};
use crate::frame::Chart;
use crate::incoming::Incoming;
use crate::lattice::Lattice;
use crate::monitor::Monitor;
use crate::path::Path;
use crate::search::backtrack::trace_back;
use crate::search::coarse::{CoarseField, CoarseSearch};
use crate::search::fine::{Bound, FineField, FineSearch, Start, SurfaceStart};
use crate::undisturbed::{undisturbed_leg, undisturbed_ray};
use crate::vec3::Vec3;

/// Added to the slack of a fine search that found nothing (block transits).
const RETRY_SLACK: f64 = 0.1;
/// A wave may enter a face earlier than at its corners by about this (block
/// transits).
const FACE_SAG: f64 = 0.01;

/// A coarse search ends at this factor on the undisturbed time through the model
/// …
const LEG_STRETCH: f64 = 1.25;
/// … plus this many block transits.
const LEG_MARGIN: f64 = 2.0;

/// Flatness beyond which graphs get more nodes …
const FLAT_BLOCKS: f64 = 1.4;
/// … so many more along each side of a fine face.
const MORE_FINE_NODES: usize = 4;

/// How finely to search and how hard to refine.
#[derive(Debug, Clone, Copy)]
pub struct Quality {
    /// Nodes inside each block edge of the coarse graph (and squared in each
    /// face).
    pub coarse_nodes: usize,
    /// Whether every edge carries just that many, however long it is.
    pub uniform_nodes: bool,
    /// Nodes along each side of a face of the fine graph; 0 leaves the fine
    /// search out.
    pub fine_nodes: usize,
    /// Relative excess of the fine graph's times over true ones, in cubes; it
    /// grows with the square of the blocks' flatness.
    pub fine_bias: f64,
    /// How much later than the present ray a fine path may be, as a share of the
    /// mean time through a block.
    pub slack: f64,
    /// Refinement before the fine search.
    pub first: Effort,
    /// Refinement after the fine search.
    pub last: Effort,
}

impl Quality {
    /// The everyday level.
    #[must_use]
    pub fn standard() -> Self {
        Self {
            coarse_nodes: 2,
            uniform_nodes: false,
            fine_nodes: 8,
            fine_bias: 0.0033,
            slack: 0.08,
            first: effort(0, 0),
            last: effort(2, 10),
        }
    }

    /// About three times smaller errors, at about twice the cost.
    #[must_use]
    pub fn thorough() -> Self {
        Self {
            coarse_nodes: 3,
            uniform_nodes: false,
            fine_nodes: 12,
            fine_bias: 0.0016,
            slack: 0.05,
            first: effort(2, 4),
            last: effort(3, 20),
        }
    }
}

impl Quality {
    /// The same level for a given model: flat blocks need more nodes on both
    /// graphs for the same error.
    #[must_use]
    pub fn suited_to<C: Chart>(mut self, blocks: &Blocks<C>) -> Self {
        if blocks.flatness() > FLAT_BLOCKS {
            self.coarse_nodes += usize::from(!self.uniform_nodes);
            self.fine_nodes += self.fine_nodes.min(MORE_FINE_NODES);
            self.fine_bias *= (1.0 - MORE_FINE_NODES as f64 / self.fine_nodes as f64).powi(2);
        }
        self
    }

    /// The coarse graph's nodes in a model.
    #[must_use]
    pub fn lattice<C: Chart>(&self, blocks: &Blocks<C>) -> Lattice {
        if self.uniform_nodes {
            Lattice::uniform(blocks, self.coarse_nodes)
        } else {
            Lattice::new(blocks, self.coarse_nodes)
        }
    }
}

fn effort(chord_rounds: usize, flip_rounds: usize) -> Effort {
    Effort {
        chord_rounds,
        flip_rounds,
        flip_patience: 0.16,
    }
}

/// Where a ray begins.
#[derive(Clone, Copy)]
pub enum Beginning<'a> {
    /// At a point inside the model (grid coordinates, km).
    Point(Vec3),
    /// On the model's surface, with a wave from outside.
    Wave {
        /// The wave.
        incoming: &'a dyn Incoming,
        /// Its times at the surface's corners.
        corners: &'a CornerTimes,
    },
    /// No direct wave comes.
    Nowhere,
}

/// One traced ray.
#[derive(Debug, Clone)]
pub struct Ray {
    /// Its way from the beginning to the receiver.
    pub path: Path,
    /// Time outside the model (s).
    pub outside_time_s: f64,
}

/// Traces rays in one block model.
pub struct Tracer<'a, C> {
    blocks: &'a Blocks<C>,
    coarse: CoarseSearch<'a, C>,
    fine: Option<FineSearch<'a, C>>,
    surface: Option<&'a Surface>,
    quality: Quality,
    transit_s: f64,
    fine_bias: f64,
}

/// Memory of one thread.
pub struct Workspace<'a, C> {
    coarse: CoarseField,
    corner_times: Vec<f32>,
    fine: FineField,
    start: SurfaceStart,
    refiner: Refiner<'a, C>,
}

impl<'a, C: Chart> Tracer<'a, C> {
    /// A tracer; `surface` is needed for waves from outside.
    pub fn new(
        blocks: &'a Blocks<C>,
        lattice: &'a Lattice,
        surface: Option<&'a Surface>,
        quality: Quality,
    ) -> Self {
        Self {
            blocks,
            coarse: CoarseSearch::new(blocks, lattice),
            fine: (quality.fine_nodes > 0)
                .then(|| FineSearch::new(blocks, lattice, quality.fine_nodes)),
            surface,
            quality,
            transit_s: blocks.mean_transit_s(),
            fine_bias: quality.fine_bias * blocks.flatness().powi(2),
        }
    }

    /// Memory for [`Self::trace_to`].
    pub fn workspace(&self) -> Workspace<'a, C> {
        Workspace {
            coarse: CoarseField::default(),
            corner_times: Vec::new(),
            fine: FineField::default(),
            start: SurfaceStart::default(),
            refiner: Refiner::new(self.blocks),
        }
    }

    /// Rays from every beginning to one receiver (grid coordinates, km), in the
    /// order of the beginnings; `None` where there is no ray.
    ///
    /// # Errors
    /// [`crate::error::CoreError::Interrupted`] when the monitor asks for it.
    pub fn trace_to<'b>(
        &self,
        receiver: Vec3,
        beginnings: &[Beginning<'b>],
        workspace: &mut Workspace<'b, C>,
        monitor: &Monitor,
    ) -> Result<Vec<Option<Ray>>>
    where
        'a: 'b,
    {
        let limit_s = self.latest_leg(receiver, beginnings);
        self.coarse
            .run(receiver, limit_s as f32, &mut workspace.coarse, monitor)?;
        if let Some(surface) = self.surface {
            surface.pick_times(workspace.coarse.times(), &mut workspace.corner_times);
        }
        let mut rays = Vec::with_capacity(beginnings.len());
        for &beginning in beginnings {
            monitor.check()?;
            rays.push(self.trace_one(receiver, beginning, workspace));
            monitor.advance(1);
        }
        Ok(rays)
    }

    /// An upper bound on the time (s) that any of the rays spends in the model:
    /// that of the undisturbed wave below the receiver, generously stretched.
    fn latest_leg(&self, receiver: Vec3, beginnings: &[Beginning<'_>]) -> f64 {
        let depths = self.blocks.edges(2);
        let base = depths[depths.len() - 1];
        let mut latest = 0.0_f64;
        for beginning in beginnings {
            match beginning {
                Beginning::Nowhere => {}
                Beginning::Point(_) => return f64::INFINITY,
                Beginning::Wave { incoming, .. } => {
                    match undisturbed_leg(*incoming, receiver, base) {
                        Some(leg) => latest = latest.max(leg),
                        None => return f64::INFINITY,
                    }
                }
            }
        }
        LEG_STRETCH * latest + LEG_MARGIN * self.transit_s
    }

    /// The path of the coarse graph alone, from a point to a receiver.
    ///
    /// # Errors
    /// [`crate::error::CoreError::Interrupted`] when the monitor asks for it.
    pub fn graph_paths(
        &self,
        receiver: Vec3,
        points: &[Vec3],
        workspace: &mut Workspace<'_, C>,
        monitor: &Monitor,
    ) -> Result<Vec<Option<Ray>>> {
        self.coarse
            .run(receiver, f32::INFINITY, &mut workspace.coarse, monitor)?;
        let traced = points.iter().map(|&point| {
            monitor.advance(1);
            trace_back(&self.coarse, &workspace.coarse, receiver, point).map(|path| Ray {
                path,
                outside_time_s: 0.0,
            })
        });
        Ok(traced.collect())
    }

    fn trace_one<'b>(
        &self,
        receiver: Vec3,
        beginning: Beginning<'b>,
        workspace: &mut Workspace<'b, C>,
    ) -> Option<Ray>
    where
        'a: 'b,
    {
        let mut path = self.first_guess(receiver, beginning, workspace)?;
        workspace.refiner.set_incoming(match beginning {
            Beginning::Wave { incoming, .. } => Some(incoming),
            Beginning::Point(_) | Beginning::Nowhere => None,
        });
        let refiner = &mut workspace.refiner;
        let graph_s = path.time(self.blocks);
        let graph_total_s = refiner.total_time(&path);
        refiner.refine(&mut path, self.quality.first);
        if let Beginning::Wave { incoming, .. } = beginning
            && let Some(mut other) = undisturbed_ray(self.blocks, incoming, receiver)
        {
            refiner.refine(&mut other, self.quality.first);
            if refiner.total_time(&other) < refiner.total_time(&path) {
                path = other;
            }
        }
        let gain = graph_total_s - refiner.total_time(&path);
        let graph_share = 1.0 - gain / graph_s;
        let mut found = None;
        if let Some(fine) = &self.fine {
            found = [0.0, RETRY_SLACK].iter().find_map(|extra| {
                let slack_s = (self.quality.slack + extra) * self.transit_s;
                self.search_again(
                    fine,
                    receiver,
                    beginning,
                    &path,
                    (graph_share, slack_s),
                    workspace,
                )
            });
        }
        let refiner = &mut workspace.refiner;
        refiner.refine(&mut path, self.quality.last);
        if let Some(mut other) = found {
            refiner.refine(&mut other, self.quality.last);
            if refiner.total_time(&other) < refiner.total_time(&path) {
                path = other;
            }
        }
        let outside_time_s = refiner.outside_time(&path);
        outside_time_s.is_finite().then_some(Ray {
            path,
            outside_time_s,
        })
    }

    /// The coarse graph's best path.
    fn first_guess(
        &self,
        receiver: Vec3,
        beginning: Beginning<'_>,
        workspace: &Workspace<'_, C>,
    ) -> Option<Path> {
        match beginning {
            Beginning::Nowhere => None,
            Beginning::Point(point) => trace_back(&self.coarse, &workspace.coarse, receiver, point),
            Beginning::Wave { incoming, corners } => {
                let surface = self.surface?;
                let entry = surface.best_entry(corners, &workspace.corner_times)?;
                let mut path = trace_back(&self.coarse, &workspace.coarse, receiver, entry.point)?;
                path.axes[0] = surface.entry_axis(incoming, entry)?;
                Some(path)
            }
        }
    }

    /// The best path of the fine graph inside the bound that the present ray
    /// proves.
    fn search_again(
        &self,
        fine: &FineSearch<'a, C>,
        receiver: Vec3,
        beginning: Beginning<'_>,
        present: &Path,
        (graph_share, slack_s): (f64, f64),
        workspace: &mut Workspace<'_, C>,
    ) -> Option<Path> {
        let inside = present.time(self.blocks);
        let stretched = inside * (1.0 + self.fine_bias);
        let scale = (graph_share * (1.0 + self.fine_bias)) as f32;
        let mut limit_s = stretched + slack_s;
        let start = match beginning {
            Beginning::Nowhere => return None,
            Beginning::Point(point) => Start::Point(point),
            Beginning::Wave { incoming, corners } => {
                limit_s += workspace.refiner.outside_time(present) - corners.earliest_s;
                let coarse = &workspace.corner_times[..];
                self.surface?.seed(
                    fine,
                    incoming,
                    corners,
                    (coarse, scale, (limit_s + FACE_SAG * self.transit_s) as f32),
                    &mut workspace.start,
                );
                Start::Surface(&workspace.start)
            }
        };
        let bound = Bound {
            potential: workspace.coarse.times(),
            scale,
            limit_s: limit_s as f32,
        };
        fine.run(start, receiver, bound, &mut workspace.fine)
    }
}
