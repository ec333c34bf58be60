//! Straight chords through curved blocks, and chord pulling: a span of the path
//! gives way to the straight line between its ends where that is earlier.

use crate::blocks::Blocks;
use crate::fermat::{LEAST_GAIN_S, Refiner};
use crate::frame::Chart;
use crate::path::{FREE, Path};
use crate::vec3::{Vec3, lerp, sub};

/// Distance (km) within which a point counts as lying on a plane.
const ON_PLANE_KM: f64 = 1e-9;

/// The straight line from `from`, in or on block `first`, to `to` (grid
/// coordinates, km), cut at every face it crosses. False if rounding at an edge
/// breaks the sequence or the line leaves the model; `out` is then incomplete.
pub fn straight_path<C: Chart>(
    blocks: &Blocks<C>,
    first: u32,
    from: Vec3,
    to: Vec3,
    out: &mut Path,
) -> bool {
    let chart = blocks.chart();
    let start = chart.position(from);
    let way = sub(chart.position(to), start);
    let mut crossings: Vec<(f64, usize, usize)> = Vec::with_capacity(16);
    for axis in 0..3 {
        let (mut low, mut high) = (from[axis].min(to[axis]), from[axis].max(to[axis]));
        if let Some(t) = chart.extremum(axis, start, way)
            && t > 0.0
            && t < 1.0
        {
            let extreme = chart.coordinates(lerp(start, chart.position(to), t))[axis];
            (low, high) = (low.min(extreme), high.max(extreme));
        }
        let edges = blocks.edges(axis);
        let planes = edges.partition_point(|&edge| edge <= low + ON_PLANE_KM)
            ..edges.partition_point(|&edge| edge < high - ON_PLANE_KM);
        for plane in planes {
            let times = chart.crossings(axis, edges[plane], start, way);
            let inside = times.into_iter().filter(|t| (0.0..=1.0).contains(t));
            crossings.extend(inside.map(|t| (t, axis, plane)));
        }
    }
    crossings.sort_by(|a, b| a.0.total_cmp(&b.0));
    out.start(from, FREE);
    let mut cell = blocks.cell(first);
    for (t, axis, plane) in crossings {
        let block = blocks.index(cell);
        let mut point = chart.coordinates([0, 1, 2].map(|k| start[k] + t * way[k]));
        for (k, coordinate) in point.iter_mut().enumerate() {
            let (low, high) = blocks.range(block, k);
            *coordinate = coordinate.clamp(low, high);
        }
        point[axis] = blocks.edges(axis)[plane];
        if plane == cell[axis] + 1 && plane < blocks.size(axis) {
            cell[axis] += 1;
        } else if plane == cell[axis] && plane > 0 {
            cell[axis] -= 1;
        } else {
            return false;
        }
        out.push(block, point, axis as u8);
    }
    let last = blocks.index(cell);
    let reaches = (0..3).all(|axis| {
        let (low, high) = blocks.range(last, axis);
        to[axis] >= low - ON_PLANE_KM && to[axis] <= high + ON_PLANE_KM
    });
    out.push(last, to, FREE);
    reaches
}

impl<C: Chart> Refiner<'_, C> {
    /// Tries chords over spans of the given numbers of segments; returns how
    /// many were accepted.
    pub(super) fn pull_chords(&mut self, path: &mut Path, spans: &[usize]) -> usize {
        let mut accepted = 0;
        for &span in spans {
            let stride = (span / 2).max(1);
            let mut first = 0;
            while path.len() >= 2 && first + 1 < path.len() {
                let mut last = first + span - 1;
                if last >= path.len() {
                    if first > 0 && last + 1 - path.len() >= stride {
                        break;
                    }
                    last = path.len() - 1;
                }
                accepted += usize::from(self.pull_chord(path, first, last));
                first += stride;
            }
        }
        accepted
    }

    /// Replaces the way from the middle of segment `first` to the middle of
    /// segment `last` (from or to the path's ends where they are the outermost).
    fn pull_chord(&mut self, path: &mut Path, first: usize, last: usize) -> bool {
        let middle = |segment: usize| lerp(path.points[segment], path.points[segment + 1], 0.5);
        let from = if first == 0 {
            path.points[0]
        } else {
            middle(first)
        };
        let to = if last + 1 == path.len() {
            path.points[last + 1]
        } else {
            middle(last)
        };
        let chart = self.blocks.chart();
        let mut old = 0.0;
        let mut here = chart.position(from);
        for segment in first..=last {
            let end = if segment == last {
                to
            } else {
                path.points[segment + 1]
            };
            let next = chart.position(end);
            let slowness = self.blocks.slowness_of(path.blocks[segment]);
            old += slowness * crate::vec3::distance(here, next);
            here = next;
        }
        let start = path.blocks[first];
        if !straight_path(self.blocks, start, from, to, &mut self.trial)
            || self.trial.blocks.last() != Some(&path.blocks[last])
            || self.trial.time(self.blocks) >= old - LEAST_GAIN_S
        {
            return false;
        }
        let ends = self.trial.len();
        self.trial.points[0] = path.points[first];
        self.trial.axes[0] = path.axes[first];
        self.trial.points[ends] = path.points[last + 1];
        self.trial.axes[ends] = path.axes[last + 1];
        path.splice(first..last + 1, &self.trial);
        true
    }
}
