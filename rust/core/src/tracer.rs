//! From starts and ends to rays: [`Tracer`] runs the coarse search of each
//! receiver, then for every ray the first guess, the fine search inside its
//! bound and the Fermat refinement.

use crate::beginning::Beginning;
use crate::blocks::Blocks;
use crate::course::path_along;
use crate::entry::{Surface, entry_axis_at};
use crate::error::Result;
use crate::fermat::{Effort, Refiner};
use crate::frame::Chart;
use crate::lattice::Lattice;
use crate::monitor::Monitor;
use crate::path::Path;
use crate::quality::Quality;
use crate::search::backtrack::trace_back;
use crate::search::coarse::{CoarseField, CoarseSearch};
use crate::search::fine::{Bound, FineField, FineSearch, Start, SurfaceStart};
use crate::undisturbed::{undisturbed_leg, undisturbed_ray};
use crate::vec3::Vec3;

/// A known ray of a similar model that gains more than this (block transits) when
/// it settles or in the fine search around it is no guide.
const TRUSTED_GAIN: f64 = 0.002;
/// Added to the slack where the bound itself is checked (block transits).
const GENEROUS_SLACK: f64 = 0.2;
/// A wave may enter a face earlier than at its corners by about this (block
/// transits).
const FACE_SAG: f64 = 0.01;

/// A coarse search ends at this factor on the undisturbed time through the model
/// …
const LEG_STRETCH: f64 = 1.25;
/// … plus this many block transits.
const LEG_MARGIN: f64 = 2.0;

/// Of two paths the later one is not refined further if it is later by more than
/// this (block transits).
const HOPELESS: f64 = 0.05;

/// One traced ray.
#[derive(Debug, Clone)]
pub struct Ray {
    /// Its way from the beginning to the receiver.
    pub path: Path,
    /// Time outside the model (s).
    pub outside_time_s: f64,
}

/// The coarse graph's path: its times to scale the field by.
#[derive(Debug, Clone, Copy)]
struct GraphLeg {
    /// Time inside the model (s).
    inside_s: f64,
    /// Time from the event on (s).
    total_s: f64,
}

impl GraphLeg {
    fn of<C: Chart>(path: &Path, blocks: &Blocks<C>, refiner: &Refiner<'_, C>) -> Self {
        Self {
            inside_s: path.time(blocks),
            total_s: refiner.total_time(path),
        }
    }
}

/// The ray of a similar model, settled in this one.
struct Known {
    path: Path,
    /// Whether it hardly changed, so that a narrow search around it will do.
    trusted: bool,
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
        let (fine_nodes, fine_bias) = quality.fine_graph(blocks);
        Self {
            blocks,
            coarse: CoarseSearch::new(blocks, lattice),
            fine: (quality.fine_nodes > 0).then(|| FineSearch::new(blocks, lattice, fine_nodes)),
            surface,
            quality,
            transit_s: blocks.mean_transit_s(),
            fine_bias,
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
        let points: Vec<Vec3> = beginnings.iter().filter_map(Beginning::point).collect();
        if points.len() == beginnings.len() {
            let slack = self.quality.slack + GENEROUS_SLACK;
            let margin_s = (slack + LEG_MARGIN) * self.blocks.longest_transit_s();
            self.coarse.run_to(
                receiver,
                &points,
                margin_s as f32,
                &mut workspace.coarse,
                monitor,
            )?;
        } else {
            let limit_s = self.latest_leg(receiver, beginnings) as f32;
            self.coarse
                .run(receiver, limit_s, &mut workspace.coarse, monitor)?;
        }
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
            .run_to(receiver, points, 0.0, &mut workspace.coarse, monitor)?;
        let traced = points.iter().map(|&point| {
            monitor.advance(1);
            trace_back(&self.coarse, &workspace.coarse, receiver, point).map(|path| Ray {
                path,
                outside_time_s: 0.0,
            })
        });
        Ok(traced.collect())
    }

    /// Searches again around a ray just traced, inside a wider bound, and returns
    /// by how much (s) it can be earlier; zero if it cannot. The workspace must
    /// hold the search of its receiver.
    pub fn bound_gain<'b>(
        &self,
        receiver: Vec3,
        beginning: Beginning<'b>,
        ray: &Ray,
        workspace: &mut Workspace<'b, C>,
    ) -> f64
    where
        'a: 'b,
    {
        workspace.refiner.set_incoming(beginning.incoming());
        let Some(guess) = self.first_guess(receiver, beginning, workspace) else {
            return 0.0;
        };
        let graph = GraphLeg::of(&guess, self.blocks, &workspace.refiner);
        let slacks = [self.quality.slack + GENEROUS_SLACK];
        let found = self.search_around(receiver, beginning, &ray.path, graph, &slacks, workspace);
        found.map_or(0.0, |mut found| {
            workspace.refiner.refine(&mut found, self.quality.last);
            let present_s = workspace.refiner.total_time(&ray.path);
            (present_s - workspace.refiner.total_time(&found)).max(0.0)
        })
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
        workspace.refiner.set_incoming(beginning.incoming());
        let (mut path, graph, known) = self.starting_ray(receiver, beginning, workspace)?;
        let mut rounds: &[(&[f64], Effort)] = &[(&self.quality.slacks(), self.quality.last)];
        let narrow = [self.quality.slack_again];
        let both = [(&narrow[..], self.quality.again), rounds[0]];
        if known {
            rounds = &both;
        }
        for &(slacks, effort) in rounds {
            let before_s = workspace.refiner.total_time(&path);
            let found = self.search_around(receiver, beginning, &path, graph, slacks, workspace);
            let refiner = &mut workspace.refiner;
            path = if slacks.len() == 1 {
                self.again_or_found((path, effort), found, refiner)
            } else {
                self.earlier((path, effort), found, refiner)
            };
            if before_s - refiner.total_time(&path) < self.trusted_gain_s() {
                break;
            }
        }
        let outside_time_s = workspace.refiner.outside_time(&path);
        outside_time_s.is_finite().then_some(Ray {
            path,
            outside_time_s,
        })
    }

    /// A known path, refined, or one found around it where that is earlier even
    /// before its last refinement.
    fn again_or_found(
        &self,
        (mut path, effort): (Path, Effort),
        found: Option<Path>,
        refiner: &mut Refiner<'_, C>,
    ) -> Path {
        refiner.refine(&mut path, effort);
        if let Some(mut other) = found {
            refiner.settle(&mut other);
            if refiner.total_time(&other) < refiner.total_time(&path) {
                refiner.refine(&mut other, self.quality.last);
                return other;
            }
        }
        path
    }

    /// The earlier of a path and one found around it, both refined; a path that is
    /// late by much before its last refinement is given up.
    fn earlier(
        &self,
        (mut path, effort): (Path, Effort),
        found: Option<Path>,
        refiner: &mut Refiner<'_, C>,
    ) -> Path {
        if let Some(mut other) = found {
            refiner.settle(&mut other);
            let gain_s = refiner.total_time(&path) - refiner.total_time(&other);
            let close_s = HOPELESS * self.transit_s;
            if gain_s > -close_s {
                refiner.refine(&mut other, self.quality.last);
                if gain_s > close_s {
                    return other;
                }
                refiner.refine(&mut path, effort);
                return if refiner.total_time(&other) < refiner.total_time(&path) {
                    other
                } else {
                    path
                };
            }
        }
        refiner.refine(&mut path, effort);
        path
    }

    /// The ray to search around, the graph's leg, and whether that ray is known
    /// from a similar model and hardly changed.
    fn starting_ray<'b>(
        &self,
        receiver: Vec3,
        beginning: Beginning<'b>,
        workspace: &mut Workspace<'b, C>,
    ) -> Option<(Path, GraphLeg, bool)>
    where
        'a: 'b,
    {
        let mut path = self.first_guess(receiver, beginning, workspace)?;
        let refiner = &mut workspace.refiner;
        let graph = GraphLeg::of(&path, self.blocks, refiner);
        let known = self.settled_again(beginning, refiner);
        let mut trusted = known.as_ref().is_some_and(|known| known.trusted);
        if !trusted {
            refiner.refine(&mut path, self.quality.first);
            if let Some(incoming) = beginning.incoming()
                && let Some(mut other) = undisturbed_ray(self.blocks, incoming, receiver)
            {
                refiner.refine(&mut other, self.quality.first);
                if refiner.total_time(&other) < refiner.total_time(&path) {
                    path = other;
                }
            }
        }
        match known {
            Some(known) if refiner.total_time(&known.path) <= refiner.total_time(&path) => {
                path = known.path;
            }
            _ => trusted = false,
        }
        Some((path, graph, trusted))
    }

    /// The known ray of a similar model, settled in this one.
    fn settled_again<'b>(
        &self,
        beginning: Beginning<'b>,
        refiner: &mut Refiner<'b, C>,
    ) -> Option<Known>
    where
        'a: 'b,
    {
        let Beginning::Wave {
            incoming, earlier, ..
        } = beginning
        else {
            return None;
        };
        let mut path = path_along(self.blocks, earlier)?;
        path.axes[0] = entry_axis_at(self.blocks, incoming, path.points[0])?;
        let before_s = refiner.total_time(&path);
        refiner.settle(&mut path);
        let gain_s = before_s - refiner.total_time(&path);
        gain_s.is_finite().then_some(Known {
            path,
            trusted: gain_s < self.trusted_gain_s(),
        })
    }

    fn trusted_gain_s(&self) -> f64 {
        TRUSTED_GAIN * self.transit_s
    }

    /// The path of the first of several ever wider fine searches around a
    /// present one that finds any.
    fn search_around<'b>(
        &self,
        receiver: Vec3,
        beginning: Beginning<'b>,
        present: &Path,
        graph: GraphLeg,
        slacks: &[f64],
        workspace: &mut Workspace<'b, C>,
    ) -> Option<Path>
    where
        'a: 'b,
    {
        let fine = self.fine.as_ref()?;
        slacks.iter().find_map(|slack| {
            let bound = (graph, slack * self.transit_s);
            self.search_again(fine, receiver, beginning, present, bound, workspace)
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
            Beginning::Wave {
                incoming, corners, ..
            } => {
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
        (graph, slack_s): (GraphLeg, f64),
        workspace: &mut Workspace<'_, C>,
    ) -> Option<Path> {
        let inside = present.time(self.blocks);
        let stretched = inside * (1.0 + self.fine_bias);
        let gain_s = graph.total_s - workspace.refiner.total_time(present);
        let scale = ((1.0 - gain_s / graph.inside_s) * (1.0 + self.fine_bias)) as f32;
        let mut limit_s = stretched + slack_s;
        let start = match beginning {
            Beginning::Nowhere => return None,
            Beginning::Point(point) => Start::Point(point),
            Beginning::Wave {
                incoming, corners, ..
            } => {
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
