//! The coarse graph's nodes: [`Lattice`], block corners plus a few nodes on
//! every edge and face, on a regular subdivision of the blocks.
//!
//! Longer edges carry more nodes, so that their spacing is about the same along
//! all axes. All nodes of a block see each other; no edge is stored. Neighbouring blocks
//! share the nodes of their common face, edge or corner. The lattice is
//! addressed as if blocks had interior nodes too, which stay unused.

use std::collections::HashMap;

use crate::blocks::{Blocks, Cell, face_axes};
use crate::frame::Chart;
use crate::relax::LANES;
use crate::vec3::{Vec3, norm};

/// Most values that tables of distances may hold in all (1 MiB).
const LARGEST_TABLES: usize = 1 << 18;

/// Most nodes on a block's surface; their numbers fit a byte.
const MOST_SURFACE_NODES: usize = 224;

/// A node on the surface of a block.
#[derive(Debug, Clone)]
pub struct SurfaceNode {
    /// Subdivision indices inside the block, from 0 to the axis's subdivisions.
    pub steps: [usize; 3],
    /// Offset in the lattice from the block's first node.
    pub offset: usize,
    /// The neighbouring blocks that hold this node too: displacement by −1, 0
    /// or 1 along each axis as `9 (dx+1) + 3 (dy+1) + (dz+1)`, and its number
    /// among that block's surface nodes.
    pub shared: Vec<(u8, u8)>,
}

/// Node numbering and block shapes for one set of edges.
#[derive(Debug)]
pub struct Lattice {
    subdivisions: [usize; 3],
    strides: [usize; 3],
    node_count: usize,
    surface: Vec<SurfaceNode>,
    lanes: usize,
    coordinates: Vec<Vec<f64>>,
    shapes: Vec<f32>,
    distances: Vec<f32>,
    shape_columns: Vec<usize>,
    shape_rows: [Vec<usize>; 2],
    row_counts: [usize; 2],
}

impl Lattice {
    /// A lattice with `per_edge` nodes inside each edge and `per_edge²` inside
    /// each face of a cube; in other blocks as many in all, shared out by length.
    pub fn new<C: Chart>(blocks: &Blocks<C>, per_edge: usize) -> Self {
        Self::subdivided(blocks, subdivisions(blocks, per_edge + 1))
    }

    /// A lattice with `per_edge` nodes inside each edge and `per_edge²` inside
    /// each face, whatever the blocks' shape.
    pub fn uniform<C: Chart>(blocks: &Blocks<C>, per_edge: usize) -> Self {
        Self::subdivided(blocks, [per_edge + 1; 3])
    }

    fn subdivided<C: Chart>(blocks: &Blocks<C>, subdivisions: [usize; 3]) -> Self {
        let sizes = [0, 1, 2].map(|axis| blocks.size(axis) * subdivisions[axis] + 1);
        let strides = [sizes[1] * sizes[2], sizes[2], 1];
        let surface = surface_nodes(subdivisions, strides);
        let coordinates = (0..3)
            .map(|axis| node_coordinates(blocks.edges(axis), subdivisions[axis]))
            .collect();
        let lanes = surface.len().div_ceil(LANES) * LANES;
        let mut lattice = Self {
            subdivisions,
            strides,
            node_count: sizes.iter().product(),
            surface,
            lanes,
            coordinates,
            shapes: Vec::new(),
            distances: Vec::new(),
            shape_columns: shape_classes(blocks.edges(0), true),
            shape_rows: [
                shape_classes(blocks.edges(1), C::FLAT),
                shape_classes(blocks.edges(2), C::FLAT),
            ],
            row_counts: [0; 2],
        };
        lattice.fill_shapes(blocks);
        lattice.fill_distances();
        lattice
    }

    /// Subdivisions of a block edge along each axis.
    pub fn subdivisions(&self) -> [usize; 3] {
        self.subdivisions
    }

    /// Length of an array with one value per lattice node.
    pub fn node_count(&self) -> usize {
        self.node_count
    }

    /// The nodes on a block's surface.
    pub fn surface(&self) -> &[SurfaceNode] {
        &self.surface
    }

    /// Number of surface nodes rounded up to whole SIMD lanes.
    pub fn lanes(&self) -> usize {
        self.lanes
    }

    /// Lattice index of a block's first node.
    #[inline]
    pub fn base(&self, cell: Cell) -> usize {
        (0..3)
            .map(|axis| cell[axis] * self.subdivisions[axis] * self.strides[axis])
            .sum()
    }

    /// Lattice index of a block corner.
    #[inline]
    pub fn corner(&self, corner: Cell) -> usize {
        self.base(corner)
    }

    /// First node of a face and the strides along its two axes.
    #[inline]
    pub fn face(&self, cell: Cell, side: usize) -> (usize, usize, usize) {
        let axis = side / 2;
        let mut start = cell;
        start[axis] += side % 2;
        let (u, v) = face_axes(axis);
        (self.base(start), self.strides[u], self.strides[v])
    }

    /// Grid coordinates (km) of a block's surface node.
    #[inline]
    pub fn node_position(&self, cell: Cell, node: usize) -> Vec3 {
        let steps = self.surface[node].steps;
        [0, 1, 2]
            .map(|axis| self.coordinates[axis][cell[axis] * self.subdivisions[axis] + steps[axis]])
    }

    /// Cartesian positions of a block's surface nodes relative to its first
    /// corner, turned by the block's longitude: x of all lanes, then y, then z
    /// (km). Congruent blocks share one table. Padding lanes lie far away.
    #[inline]
    pub fn shape(&self, cell: Cell) -> &[f32] {
        let class = self.shape_class(cell);
        let length = 3 * self.lanes;
        &self.shapes[class * length..][..length]
    }

    /// Distances (km) between all surface nodes of a block, a row of
    /// [`Self::lanes`] for each; only where blocks have few enough shapes for
    /// the tables to stay in a near cache.
    #[inline]
    pub fn distances(&self, cell: Cell) -> Option<&[f32]> {
        if self.distances.is_empty() {
            return None;
        }
        let length = self.surface.len() * self.lanes;
        let class = self.shape_class(cell);
        Some(&self.distances[class * length..][..length])
    }

    fn fill_distances(&mut self) {
        let classes = self.shapes.len() / (3 * self.lanes);
        let length = self.surface.len() * self.lanes;
        if classes * length > LARGEST_TABLES {
            return;
        }
        for shape in self.shapes.chunks(3 * self.lanes) {
            let (x, rest) = shape.split_at(self.lanes);
            let (y, z) = rest.split_at(self.lanes);
            for from in 0..self.surface.len() {
                self.distances.extend((0..self.lanes).map(|onto| {
                    let way = [x, y, z].map(|lanes| f64::from(lanes[onto] - lanes[from]));
                    norm(way) as f32
                }));
            }
        }
    }

    fn shape_class(&self, cell: Cell) -> usize {
        let row = self.shape_rows[0][cell[1]] * self.row_counts[1] + self.shape_rows[1][cell[2]];
        self.shape_columns[cell[0]] * self.row_counts[0] * self.row_counts[1] + row
    }

    fn fill_shapes<C: Chart>(&mut self, blocks: &Blocks<C>) {
        let first_of = |classes: &[usize]| -> Vec<usize> {
            let count = classes.iter().max().map_or(0, |last| last + 1);
            (0..count)
                .map(|class| classes.iter().position(|&c| c == class).unwrap_or(0))
                .collect()
        };
        let columns = first_of(&self.shape_columns);
        let rows = [first_of(&self.shape_rows[0]), first_of(&self.shape_rows[1])];
        self.row_counts = [rows[0].len(), rows[1].len()];
        for &ix in &columns {
            for &iy in &rows[0] {
                for &iz in &rows[1] {
                    let shape = self.shape_of(blocks, [ix, iy, iz]);
                    self.shapes.extend_from_slice(&shape);
                }
            }
        }
    }

    fn shape_of<C: Chart>(&self, blocks: &Blocks<C>, cell: Cell) -> Vec<f32> {
        let first_x = blocks.edges(0)[cell[0]];
        let turned = |node: usize| {
            let mut grid = self.node_position(cell, node);
            grid[0] -= first_x;
            blocks.chart().position(grid)
        };
        let origin = turned(0);
        let mut shape = vec![1e6_f32; 3 * self.lanes];
        for node in 0..self.surface.len() {
            let position = turned(node);
            for axis in 0..3 {
                shape[axis * self.lanes + node] = (position[axis] - origin[axis]) as f32;
            }
        }
        shape
    }
}

/// Classes of equal blocks along an axis: by width where blocks may be moved
/// along it without changing shape, else each its own.
fn shape_classes(edges: &[f64], movable: bool) -> Vec<usize> {
    if !movable {
        return (0..edges.len() - 1).collect();
    }
    let mut known = HashMap::new();
    edges
        .windows(2)
        .map(|pair| {
            let micrometres = ((pair[1] - pair[0]) * 1e9).round() as i64;
            let next = known.len();
            *known.entry(micrometres).or_insert(next)
        })
        .collect()
}

fn node_coordinates(edges: &[f64], subdivisions: usize) -> Vec<f64> {
    let mut coordinates = Vec::with_capacity((edges.len() - 1) * subdivisions + 1);
    for pair in edges.windows(2) {
        let step = (pair[1] - pair[0]) / subdivisions as f64;
        coordinates.extend((0..subdivisions).map(|k| pair[0] + step * k as f64));
    }
    coordinates.extend(edges.last());
    coordinates
}

/// Subdivisions along each axis: `in_cube` for cubes, more along axes whose
/// blocks are wider than the mean and fewer along others.
fn subdivisions<C: Chart>(blocks: &Blocks<C>, in_cube: usize) -> [usize; 3] {
    let spacing = blocks.mean_width_km() / in_cube as f64;
    let mut wanted = [0, 1, 2].map(|axis| {
        let steps = blocks.mean_width_along(axis) / spacing;
        (steps.round() as usize).max(2)
    });
    while surface_count(wanted) > MOST_SURFACE_NODES {
        let longest = (0..3).max_by_key(|&axis| wanted[axis]).unwrap_or(0);
        wanted[longest] -= 1;
    }
    wanted
}

fn surface_count(subdivisions: [usize; 3]) -> usize {
    let all: usize = subdivisions.iter().map(|steps| steps + 1).product();
    let inside: usize = subdivisions.iter().map(|steps| steps - 1).product();
    all - inside
}

fn surface_nodes(subdivisions: [usize; 3], strides: [usize; 3]) -> Vec<SurfaceNode> {
    let on_surface = |steps: [usize; 3]| {
        (0..3).any(|axis| steps[axis] == 0 || steps[axis] == subdivisions[axis])
    };
    let mut all = Vec::new();
    for a in 0..=subdivisions[0] {
        for b in 0..=subdivisions[1] {
            let line = (0..=subdivisions[2]).map(|c| [a, b, c]);
            all.extend(line.filter(|&steps| on_surface(steps)));
        }
    }
    let number: HashMap<[usize; 3], u8> = all.iter().copied().zip(0..).collect();
    all.iter()
        .map(|&steps| SurfaceNode {
            steps,
            offset: (0..3).map(|axis| steps[axis] * strides[axis]).sum(),
            shared: shared_with(steps, subdivisions, &number),
        })
        .collect()
}

fn shared_with(
    steps: [usize; 3],
    subdivisions: [usize; 3],
    number: &HashMap<[usize; 3], u8>,
) -> Vec<(u8, u8)> {
    let mut shared = Vec::new();
    for code in (0..27_u8).filter(|&code| code != 13) {
        let shift = [code / 9, code / 3 % 3, code % 3];
        let inside = [0, 1, 2].map(|axis| match shift[axis] {
            0 if steps[axis] == 0 => Some(subdivisions[axis]),
            1 => Some(steps[axis]),
            2 if steps[axis] == subdivisions[axis] => Some(0),
            _ => None,
        });
        if let [Some(a), Some(b), Some(c)] = inside {
            shared.push((code, number[&[a, b, c]]));
        }
    }
    shared
}
