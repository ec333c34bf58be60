//! Where distant waves enter the model: [`EarthWave`], a wavefront of the 1-D
//! Earth, and [`Surface`], the faces of the model that a wave may enter.

use crate::blocks::{Blocks, Cell, Side, face_axes};
use crate::earth::WavefrontTable;
use crate::frame::{Chart, SphereChart};
use crate::incoming::{Arrival, Incoming, enters};
use crate::lattice::Lattice;
use crate::search::fine::{FineSearch, SurfaceStart};
use crate::vec3::{Vec3, dot};

/// Distance (km) within which a point counts as lying on a side of the model.
const ON_SIDE_KM: f64 = 1e-3;

/// The first arrival of one event in the 1-D Earth, at points of the model.
pub struct EarthWave<'a> {
    table: &'a WavefrontTable,
    chart: &'a SphereChart,
    epicentre: Vec3,
}

impl<'a> EarthWave<'a> {
    /// The wave of an event below `epicentre` (grid coordinates, km; the depth
    /// is that of the table).
    pub fn new(table: &'a WavefrontTable, chart: &'a SphereChart, epicentre: [f64; 2]) -> Self {
        let radius = chart.radius_km();
        let position = chart.position([epicentre[0], epicentre[1], 0.0]);
        Self {
            table,
            chart,
            epicentre: position.map(|component| component / radius),
        }
    }
}

impl Incoming for EarthWave<'_> {
    fn at(&self, grid: Vec3) -> Option<Arrival> {
        let radius = self.chart.radius_km();
        let surface = [grid[0], grid[1], 0.0];
        let cosine = dot(self.epicentre, self.chart.position(surface)) / radius;
        let value = self.table.at(cosine.acos(), grid[2])?;
        let per_cosine = -value.per_radian_s / (1.0 - cosine * cosine).sqrt() / radius;
        let tangents = self.chart.tangents(surface);
        Some(Arrival {
            time_s: value.time_s,
            gradient: [
                per_cosine * dot(self.epicentre, tangents[0]),
                per_cosine * dot(self.epicentre, tangents[1]),
                value.per_depth_s_per_km,
            ],
        })
    }
}

/// A face of the model's surface.
#[derive(Debug, Clone, Copy)]
struct SurfaceFace {
    block: u32,
    side: Side,
    corners: [u32; 4],
}

/// The base and the sides of a model: faces, and the block corners on them.
#[derive(Debug)]
pub struct Surface {
    faces: Vec<SurfaceFace>,
    corners: Vec<Vec3>,
    corner_nodes: Vec<usize>,
    corner_sides: Vec<Vec<Side>>,
}

/// Incoming times of one wave at the corners of a [`Surface`].
#[derive(Debug, Clone)]
pub struct CornerTimes {
    /// Earliest of the times (s).
    pub earliest_s: f64,
    /// Times after the earliest (s); infinite where the wave does not enter.
    pub after_s: Vec<f32>,
}

/// The best corner to enter at, for one wave and one receiver.
#[derive(Debug, Clone, Copy)]
pub struct Entry {
    /// Grid coordinates (km).
    pub point: Vec3,
    /// Index of the corner.
    pub corner: usize,
}

/// The axis of the side of the model that a wave enters most steeply at a point
/// of the surface (grid coordinates, km); `None` where it does not enter.
pub fn entry_axis_at<C: Chart>(blocks: &Blocks<C>, wave: &dyn Incoming, point: Vec3) -> Option<u8> {
    let arrival = wave.at(point)?;
    (0..6)
        .filter(|&side| {
            let edges = blocks.edges(side / 2);
            let edge = edges[(side % 2) * (edges.len() - 1)];
            (point[side / 2] - edge).abs() <= ON_SIDE_KM && enters(&arrival, side)
        })
        .max_by(|a, b| {
            let steepness = |side: Side| arrival.gradient[side / 2].abs();
            steepness(*a).total_cmp(&steepness(*b))
        })
        .map(|side| (side / 2) as u8)
}

impl Surface {
    /// All faces through which a distant wave may enter.
    pub fn new<C: Chart>(blocks: &Blocks<C>, lattice: &Lattice) -> Self {
        let mut surface = Self {
            faces: Vec::new(),
            corners: Vec::new(),
            corner_nodes: Vec::new(),
            corner_sides: Vec::new(),
        };
        let mut known = std::collections::HashMap::new();
        for side in [0, 1, 2, 3, 5] {
            let axis = side / 2;
            let (u, v) = face_axes(axis);
            for i in 0..blocks.size(u) {
                for j in 0..blocks.size(v) {
                    let mut cell: Cell = [0; 3];
                    (cell[u], cell[v]) = (i, j);
                    cell[axis] = (side % 2) * (blocks.size(axis) - 1);
                    let corners = [(0, 0), (0, 1), (1, 0), (1, 1)].map(|(du, dv)| {
                        let mut corner = cell;
                        corner[axis] += side % 2;
                        corner[u] += du;
                        corner[v] += dv;
                        *known.entry(corner).or_insert_with(|| {
                            surface.add_corner(blocks, lattice, corner);
                            (surface.corners.len() - 1) as u32
                        })
                    });
                    for corner in corners {
                        let sides = &mut surface.corner_sides[corner as usize];
                        if !sides.contains(&side) {
                            sides.push(side);
                        }
                    }
                    let block = blocks.index(cell);
                    surface.faces.push(SurfaceFace {
                        block,
                        side,
                        corners,
                    });
                }
            }
        }
        surface
    }

    fn add_corner<C: Chart>(&mut self, blocks: &Blocks<C>, lattice: &Lattice, corner: Cell) {
        self.corners
            .push([0, 1, 2].map(|axis| blocks.edges(axis)[corner[axis]]));
        self.corner_nodes.push(lattice.corner(corner));
        self.corner_sides.push(Vec::new());
    }

    /// Times of an incoming wave at every corner.
    pub fn sample(&self, wave: &dyn Incoming) -> CornerTimes {
        let times: Vec<f64> = self
            .corners
            .iter()
            .zip(&self.corner_sides)
            .map(|(&corner, sides)| {
                wave.at(corner)
                    .filter(|arrival| sides.iter().any(|&side| enters(arrival, side)))
                    .map_or(f64::INFINITY, |arrival| arrival.time_s)
            })
            .collect();
        let earliest_s = times.iter().copied().fold(f64::INFINITY, f64::min);
        CornerTimes {
            earliest_s,
            after_s: times
                .iter()
                .map(|time| (time - earliest_s) as f32)
                .collect(),
        }
    }

    /// Coarse times at the corners, from a field over all lattice nodes.
    pub fn pick_times(&self, field: &[f32], out: &mut Vec<f32>) {
        out.clear();
        out.extend(self.corner_nodes.iter().map(|&node| field[node]));
    }

    /// The corner with the earliest sum of incoming and coarse time.
    pub fn best_entry(&self, wave: &CornerTimes, coarse: &[f32]) -> Option<Entry> {
        let mut best = (f32::INFINITY, 0);
        for (corner, (&outside, &inside)) in wave.after_s.iter().zip(coarse).enumerate() {
            if outside + inside < best.0 {
                best = (outside + inside, corner);
            }
        }
        best.0.is_finite().then(|| Entry {
            point: self.corners[best.1],
            corner: best.1,
        })
    }

    /// The axis of the side of the model that a wave enters most steeply at a
    /// corner.
    pub fn entry_axis(&self, wave: &dyn Incoming, entry: Entry) -> Option<u8> {
        let arrival = wave.at(entry.point)?;
        self.corner_sides[entry.corner]
            .iter()
            .filter(|&&side| enters(&arrival, side))
            .max_by(|&&a, &&b| {
                let steepness = |side: Side| arrival.gradient[side / 2].abs();
                steepness(a).total_cmp(&steepness(b))
            })
            .map(|&side| (side / 2) as u8)
    }

    /// Fills `start` with the faces where an incoming wave may begin a path
    /// earlier than `limit_s` (seconds after `wave.earliest_s`), given coarse
    /// times at the corners and the factor on them.
    pub fn seed<C: Chart>(
        &self,
        search: &FineSearch<'_, C>,
        incoming: &dyn Incoming,
        wave: &CornerTimes,
        (coarse, scale, limit_s): (&[f32], f32, f32),
        start: &mut SurfaceStart,
    ) {
        start.faces.clear();
        start.times.clear();
        for face in &self.faces {
            let least = face
                .corners
                .iter()
                .map(|&corner| wave.after_s[corner as usize] + scale * coarse[corner as usize])
                .fold(f32::INFINITY, f32::min);
            if least > limit_s {
                continue;
            }
            start.faces.push((face.block, face.side));
            let first = start.times.len();
            start.times.resize(first + search.size(), f32::INFINITY);
            let out = &mut start.times[first..];
            sample_face(search, face, incoming, wave.earliest_s, out);
        }
    }
}

/// Places of the samples along each side of a face, as shares of its width.
const SAMPLES: [f64; 3] = [0.0, 0.5, 1.0];

/// Fills `out` with incoming times (s after `earliest_s`) at the nodes of a face:
/// quadratic between three by three samples where the wave enters at all of
/// them, else node by node.
fn sample_face<C: Chart>(
    search: &FineSearch<'_, C>,
    face: &SurfaceFace,
    incoming: &dyn Incoming,
    earliest_s: f64,
    out: &mut [f32],
) {
    let time_at = |at: Vec3| {
        incoming
            .at(at)
            .filter(|arrival| enters(arrival, face.side))
            .map_or(f64::INFINITY, |arrival| arrival.time_s - earliest_s)
    };
    let samples = SAMPLES
        .map(|u| SAMPLES.map(|v| time_at(search.face_position(face.block, face.side, [u, v]))));
    let everywhere = samples.iter().flatten().all(|time| time.is_finite());
    for place in search.places(face.side) {
        let [u, v] = search.fractions(face.side, place);
        out[place] = if everywhere {
            let (across, along) = (quadratic(u), quadratic(v));
            let rows = samples.map(|row| dot(row, along));
            dot(rows, across) as f32
        } else {
            time_at(search.node_position(face.block, face.side, place)) as f32
        };
    }
}

/// Weights of the three [`SAMPLES`] at a share of the width (Lagrange).
fn quadratic(share: f64) -> Vec3 {
    let (start, middle, end) = (share, share - 0.5, share - 1.0);
    [2.0 * middle * end, -4.0 * start * end, 2.0 * start * middle]
}
