//! Whole data sets of rays, traced in parallel: [`RayBatch`].

use std::ops::Range;

use rayon::prelude::*;

use crate::beginning::Beginning;
use crate::blocks::Blocks;
use crate::bound_check::BoundCheck;
use crate::entry::{CornerTimes, EarthWave, Surface};
use crate::error::{CoreError, Result};
use crate::fermat::straight_path;
use crate::frame::{Chart, SphereChart};
use crate::monitor::Monitor;
use crate::path::Path;
use crate::quality::Quality;
use crate::tracer::{Ray, Tracer, Workspace};
use crate::vec3::Vec3;
use crate::waves::DistantWaves;

/// How a path is found.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Method {
    /// The ray of least time.
    Bent,
    /// The coarse graph's path, unrefined.
    Graph,
    /// The straight chord.
    Straight,
}

/// Rays in the order of their pairs. Each ray's path lengths form a row of a
/// sparse matrix over blocks, with rising column indices.
#[derive(Debug, Clone, Default)]
pub struct RayBatch {
    /// False where no ray exists; its row and poly-line are empty.
    pub traced: Vec<bool>,
    /// Travel time (s) from the event or source to the receiver.
    pub time_s: Vec<f64>,
    /// Part of it outside the model (s).
    pub outside_time_s: Vec<f64>,
    /// Start of each row, and the end of the last.
    pub row_pointers: Vec<i64>,
    /// Block of each stored value.
    pub columns: Vec<i32>,
    /// Path length (km) of each stored value.
    pub lengths_km: Vec<f64>,
    /// Start of each poly-line, and the end of the last.
    pub point_offsets: Vec<i64>,
    /// Grid coordinates (km) of all poly-lines.
    pub points_km: Vec<Vec3>,
    /// Block of the segment that begins at each point; −1 at a poly-line's end.
    pub segment_blocks: Vec<i32>,
    /// What a second search inside a wider bound found for some of the rays.
    pub bound_check: BoundCheck,
}

/// Rays of the same pairs in a similar model, from which to start.
#[derive(Debug, Clone, Copy)]
pub struct Earlier<'a> {
    /// Start of each poly-line, and the end of the last.
    pub point_offsets: &'a [i64],
    /// Their points (grid coordinates, km).
    pub points_km: &'a [Vec3],
}

impl<'a> Earlier<'a> {
    fn check(&self, pairs: usize) -> Result<()> {
        let rising = self.point_offsets.windows(2).all(|pair| pair[0] <= pair[1]);
        let ends = (self.point_offsets.first(), self.point_offsets.last());
        let whole = (Some(&0), Some(&(self.points_km.len() as i64)));
        if rising && ends == whole && self.point_offsets.len() == pairs + 1 {
            return Ok(());
        }
        Err(CoreError::invalid(
            "earlier rays",
            format!("{pairs} poly-lines, one per pair"),
            format!(
                "{} offsets and {} points",
                self.point_offsets.len(),
                self.points_km.len()
            ),
        ))
    }

    fn points(&self, pair: usize) -> &'a [Vec3] {
        &self.points_km[self.point_offsets[pair] as usize..self.point_offsets[pair + 1] as usize]
    }
}

/// Traces rays between points inside a model. `pairs` holds indices into
/// `sources` and `receivers` (grid coordinates, km).
///
/// # Errors
/// [`CoreError::Invalid`] for a point outside the model or an index out of
/// range, [`CoreError::Interrupted`] when the monitor asks for it.
pub fn trace_between<C: Chart>(
    blocks: &Blocks<C>,
    sources: &[Vec3],
    receivers: &[Vec3],
    pairs: &[[u32; 2]],
    (method, quality): (Method, Quality),
    monitor: &Monitor,
) -> Result<RayBatch> {
    check_inside(blocks, "source", sources)?;
    check_inside(blocks, "receiver", receivers)?;
    check_pairs(pairs, sources.len(), receivers.len())?;
    monitor.set_total(pairs.len() as u64);
    if method == Method::Straight {
        let rays = chords(
            blocks,
            pairs.iter().map(|pair| {
                let from = sources[pair[0] as usize];
                Some((from, 0.0, receivers[pair[1] as usize]))
            }),
        );
        return Ok(pack(blocks, rays));
    }
    // Reciprocity: search from the side that needs fewer searches.
    let from_sources = distinct(pairs, 0) < distinct(pairs, 1);
    let (near, far) = if from_sources { (0, 1) } else { (1, 0) };
    let ends = [sources, receivers];
    let quality = quality.suited_to(blocks);
    let lattice = quality.lattice(blocks);
    let tracer = Tracer::new(blocks, &lattice, None, quality);
    let groups = grouped(pairs, near);
    let batches = per_group(
        &groups,
        || tracer.workspace(),
        |workspace, members| {
            let goal = ends[near][pairs[members[0]][near] as usize];
            let points: Vec<Vec3> = members
                .iter()
                .map(|&member| ends[far][pairs[member][far] as usize])
                .collect();
            let (mut rays, check) = if method == Method::Graph {
                let paths = tracer.graph_paths(goal, &points, workspace, monitor)?;
                (paths, BoundCheck::default())
            } else {
                let beginnings: Vec<_> = points.into_iter().map(Beginning::Point).collect();
                traced_and_checked(&tracer, goal, (&beginnings, members), workspace, monitor)?
            };
            if from_sources {
                rays.iter_mut().flatten().for_each(|ray| ray.path.reverse());
            }
            Ok(RayBatch {
                bound_check: check,
                ..pack(blocks, rays)
            })
        },
    )?;
    Ok(in_order(pairs.len(), &groups, batches))
}

/// The rays of some pairs to one receiver, and the check of their bound.
fn traced_and_checked<'b, C: Chart>(
    tracer: &Tracer<'b, C>,
    receiver: Vec3,
    (beginnings, members): (&[Beginning<'b>], &[usize]),
    workspace: &mut Workspace<'b, C>,
    monitor: &Monitor,
) -> Result<(Vec<Option<Ray>>, BoundCheck)> {
    let rays = tracer.trace_to(receiver, beginnings, workspace, monitor)?;
    let mut check = BoundCheck::default();
    for ((ray, &beginning), &member) in rays.iter().zip(beginnings).zip(members) {
        if let (Some(ray), true) = (ray, BoundCheck::takes(member)) {
            check.add(tracer.bound_gain(receiver, beginning, ray, workspace));
        }
    }
    Ok((rays, check))
}

/// Traces rays of distant events to stations inside a model. `pairs` holds
/// indices into `waves` and `stations` (grid coordinates, km); rays of the same
/// pairs in a similar model make the search cheaper.
///
/// # Errors
/// As [`trace_between`].
pub fn trace_distant(
    blocks: &Blocks<SphereChart>,
    waves: DistantWaves,
    stations: &[Vec3],
    pairs: &[[u32; 2]],
    quality: Quality,
    earlier: Option<Earlier<'_>>,
    monitor: &Monitor,
) -> Result<RayBatch> {
    earlier.map_or(Ok(()), |earlier| earlier.check(pairs.len()))?;
    check_inside(blocks, "station", stations)?;
    check_pairs(pairs, waves.len(), stations.len())?;
    monitor.set_total(pairs.len() as u64);
    let quality = quality.suited_to(blocks);
    let lattice = quality.lattice(blocks);
    let surface = Surface::new(blocks, &lattice);
    let incoming: Vec<Option<EarthWave<'_>>> = waves
        .tables
        .iter()
        .zip(&waves.epicentres)
        .map(|(table, &epicentre)| {
            table
                .as_ref()
                .map(|table| EarthWave::new(table, blocks.chart(), epicentre))
        })
        .collect();
    let corners: Vec<Option<CornerTimes>> = incoming
        .par_iter()
        .map(|wave| wave.as_ref().map(|wave| surface.sample(wave)))
        .collect();
    let tracer = Tracer::new(blocks, &lattice, Some(&surface), quality);
    let groups = grouped(pairs, 1);
    let batches = per_group(
        &groups,
        || tracer.workspace(),
        |workspace, members| {
            let beginnings: Vec<_> = members
                .iter()
                .map(|&member| {
                    let event = pairs[member][0] as usize;
                    match (&incoming[event], &corners[event]) {
                        (Some(incoming), Some(corners)) => Beginning::Wave {
                            incoming,
                            corners,
                            earlier: earlier.map_or(&[][..], |earlier| earlier.points(member)),
                        },
                        _ => Beginning::Nowhere,
                    }
                })
                .collect();
            let station = stations[pairs[members[0]][1] as usize];
            let found = (&beginnings[..], members);
            let (rays, bound_check) =
                traced_and_checked(&tracer, station, found, workspace, monitor)?;
            Ok(RayBatch {
                bound_check,
                ..pack(blocks, rays)
            })
        },
    )?;
    drop((incoming, corners));
    drop(waves);
    Ok(in_order(pairs.len(), &groups, batches))
}

/// Straight chords from given entry points to stations; `outside_time_s` is
/// kept as the time up to the entry. Pairs with a non-finite entry give no ray.
///
/// # Errors
/// [`CoreError::Invalid`] if the arrays' lengths disagree.
pub fn straight_from_entries<C: Chart>(
    blocks: &Blocks<C>,
    entries: &[Vec3],
    outside_time_s: &[f64],
    receivers: &[Vec3],
) -> Result<RayBatch> {
    if entries.len() != outside_time_s.len() || entries.len() != receivers.len() {
        return Err(CoreError::invalid(
            "entries, times and receivers",
            "equal lengths",
            format!(
                "{}, {}, {}",
                entries.len(),
                outside_time_s.len(),
                receivers.len()
            ),
        ));
    }
    let ends = entries.iter().zip(outside_time_s).zip(receivers);
    let rays = chords(
        blocks,
        ends.map(|((&from, &time), &to)| time.is_finite().then_some((from, time, to))),
    );
    Ok(pack(blocks, rays))
}

fn chords<C: Chart>(
    blocks: &Blocks<C>,
    ends: impl Iterator<Item = Option<(Vec3, f64, Vec3)>>,
) -> Vec<Option<Ray>> {
    ends.map(|ends| {
        let (from, outside_time_s, to) = ends?;
        let mut path = Path::default();
        let found = blocks
            .around(from)
            .into_iter()
            .any(|block| straight_path(blocks, block, from, to, &mut path));
        found.then_some(Ray {
            path,
            outside_time_s,
        })
    })
    .collect()
}

/// The pairs that share their index in column `by`, in rising order.
fn grouped(pairs: &[[u32; 2]], by: usize) -> Vec<Vec<usize>> {
    let mut order: Vec<usize> = (0..pairs.len()).collect();
    order.sort_by_key(|&pair| (pairs[pair][by], pair));
    order
        .chunk_by(|&a, &b| pairs[a][by] == pairs[b][by])
        .map(<[usize]>::to_vec)
        .collect()
}

/// Runs `work` on every group, in parallel.
fn per_group<W>(
    groups: &[Vec<usize>],
    workspace: impl Fn() -> W + Sync + Send,
    work: impl Fn(&mut W, &[usize]) -> Result<RayBatch> + Sync + Send,
) -> Result<Vec<RayBatch>> {
    groups
        .par_iter()
        .with_max_len(1)
        .map_init(workspace, |workspace, members| work(workspace, members))
        .collect()
}

/// Joins batches; ray `k` of each is that of pair `groups[…][k]`. Arrays are
/// moved one after the other, so that hardly more than one exists twice.
fn in_order(count: usize, groups: &[Vec<usize>], mut batches: Vec<RayBatch>) -> RayBatch {
    let mut places = vec![(0, 0); count];
    for (batch, members) in groups.iter().enumerate() {
        for (ray, &member) in members.iter().enumerate() {
            places[member] = (batch, ray);
        }
    }
    let one = |_: &RayBatch, ray: usize| ray..ray + 1;
    let row = |batch: &RayBatch, ray: usize| batch.row(ray);
    let line = |batch: &RayBatch, ray: usize| batch.line(ray);
    let ends = |range: &dyn Fn(&RayBatch, usize) -> Range<usize>| {
        let mut ends = vec![0_i64];
        for &(batch, ray) in &places {
            ends.push(ends[ends.len() - 1] + range(&batches[batch], ray).len() as i64);
        }
        ends
    };
    let (row_pointers, point_offsets) = (ends(&row), ends(&line));
    let mut bound_check = BoundCheck::default();
    for batch in &batches {
        bound_check.join(batch.bound_check);
    }
    let parts = &mut batches;
    RayBatch {
        traced: moved(&places, parts, |batch| &mut batch.traced, one),
        time_s: moved(&places, parts, |batch| &mut batch.time_s, one),
        outside_time_s: moved(&places, parts, |batch| &mut batch.outside_time_s, one),
        columns: moved(&places, parts, |batch| &mut batch.columns, row),
        lengths_km: moved(&places, parts, |batch| &mut batch.lengths_km, row),
        points_km: moved(&places, parts, |batch| &mut batch.points_km, line),
        segment_blocks: moved(&places, parts, |batch| &mut batch.segment_blocks, line),
        row_pointers,
        point_offsets,
        bound_check,
    }
}

/// One array of all batches, the part of every ray in the order of `places`.
fn moved<T: Copy>(
    places: &[(usize, usize)],
    batches: &mut [RayBatch],
    array: impl Fn(&mut RayBatch) -> &mut Vec<T>,
    part: impl Fn(&RayBatch, usize) -> Range<usize>,
) -> Vec<T> {
    let arrays: Vec<Vec<T>> = batches
        .iter_mut()
        .map(|batch| std::mem::take(array(batch)))
        .collect();
    let mut all = Vec::with_capacity(arrays.iter().map(Vec::len).sum());
    for &(batch, ray) in places {
        all.extend_from_slice(&arrays[batch][part(&batches[batch], ray)]);
    }
    all
}

fn distinct(pairs: &[[u32; 2]], column: usize) -> usize {
    pairs
        .iter()
        .map(|pair| pair[column])
        .collect::<std::collections::HashSet<_>>()
        .len()
}

fn check_inside<C: Chart>(blocks: &Blocks<C>, what: &str, points: &[Vec3]) -> Result<()> {
    let outside = points.iter().position(|&point| !blocks.contains(point));
    outside.map_or(Ok(()), |index| {
        Err(CoreError::invalid(
            format!("{what} {index}"),
            "a point inside the block model",
            format!("{:?} km", points[index]),
        ))
    })
}

fn check_pairs(pairs: &[[u32; 2]], first: usize, second: usize) -> Result<()> {
    let wrong = pairs
        .iter()
        .find(|pair| pair[0] as usize >= first || pair[1] as usize >= second);
    wrong.map_or(Ok(()), |pair| {
        Err(CoreError::invalid(
            "pair",
            format!("indices below {first} and {second}"),
            format!("{pair:?}"),
        ))
    })
}

/// Path lengths by block, times and poly-lines of all rays.
fn pack<C: Chart>(blocks: &Blocks<C>, rays: Vec<Option<Ray>>) -> RayBatch {
    let mut batch = RayBatch {
        row_pointers: vec![0],
        point_offsets: vec![0],
        ..RayBatch::default()
    };
    let mut row: Vec<(u32, f64)> = Vec::new();
    for ray in rays {
        batch.traced.push(ray.is_some());
        row.clear();
        let (mut inside, mut outside) = (f64::NAN, f64::NAN);
        if let Some(ray) = ray {
            batch.append_points(&ray.path);
            row.extend(segment_lengths(blocks, &ray.path));
            row.sort_by_key(|entry| entry.0);
            row.dedup_by(|next, kept| {
                let same = next.0 == kept.0;
                if same {
                    kept.1 += next.1;
                }
                same
            });
            inside = row
                .iter()
                .map(|&(block, length)| blocks.slowness_of(block) * length)
                .sum();
            outside = ray.outside_time_s;
        }
        batch.columns.extend(row.iter().map(|entry| entry.0 as i32));
        batch.lengths_km.extend(row.iter().map(|entry| entry.1));
        batch.row_pointers.push(batch.columns.len() as i64);
        batch.point_offsets.push(batch.points_km.len() as i64);
        batch.time_s.push(inside + outside);
        batch.outside_time_s.push(outside);
    }
    batch.columns.shrink_to_fit();
    batch.lengths_km.shrink_to_fit();
    batch.points_km.shrink_to_fit();
    batch.segment_blocks.shrink_to_fit();
    batch
}

fn segment_lengths<C: Chart>(blocks: &Blocks<C>, path: &Path) -> Vec<(u32, f64)> {
    path.points
        .windows(2)
        .zip(&path.blocks)
        .map(|(ends, &block)| (block, blocks.chart().distance(ends[0], ends[1])))
        .filter(|entry| entry.1 > 0.0)
        .collect()
}

impl RayBatch {
    fn append_points(&mut self, path: &Path) {
        self.points_km.extend(&path.points);
        self.segment_blocks
            .extend(path.blocks.iter().map(|&block| block as i32));
        self.segment_blocks.push(-1);
    }

    fn row(&self, ray: usize) -> Range<usize> {
        self.row_pointers[ray] as usize..self.row_pointers[ray + 1] as usize
    }

    fn line(&self, ray: usize) -> Range<usize> {
        self.point_offsets[ray] as usize..self.point_offsets[ray + 1] as usize
    }
}
