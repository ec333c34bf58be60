//! The block model: [`Blocks`], three edge arrays and a constant slowness in
//! each block.

use crate::error::{CoreError, Result};
use crate::frame::Chart;
use crate::vec3::Vec3;

/// Block indices along the three axes.
pub type Cell = [usize; 3];

/// A face of a block: twice the axis, plus one on the side of larger
/// coordinates.
pub type Side = usize;

/// The two axes along a face normal to `axis`, in rising order.
#[inline]
#[must_use]
pub fn face_axes(axis: usize) -> (usize, usize) {
    match axis {
        0 => (1, 2),
        1 => (0, 2),
        _ => (0, 1),
    }
}

/// A block model on a [`Chart`]. Arrays of block values have shape
/// `(nx, ny, nz)` in C order; axis 2 is depth, rising downwards.
#[derive(Debug, Clone)]
pub struct Blocks<C> {
    chart: C,
    edges: [Vec<f64>; 3],
    slowness: Vec<f64>,
    cells: Vec<[u16; 3]>,
}

impl<C: Chart> Blocks<C> {
    /// A model from rising edges (km of grid coordinate) and slowness (s/km).
    ///
    /// # Errors
    /// [`CoreError::Invalid`] for edges that do not rise, a wrong number of
    /// slowness values, or slowness that is not positive and finite.
    pub fn new(chart: C, edges: [Vec<f64>; 3], slowness: Vec<f64>) -> Result<Self> {
        for (axis, values) in edges.iter().enumerate() {
            let rising = values.windows(2).all(|pair| pair[0] < pair[1]);
            if values.len() < 2 || values.len() > usize::from(u16::MAX) || !rising {
                return Err(CoreError::invalid(
                    format!("edges of axis {axis}"),
                    "2 to 65535 rising, finite values",
                    format!("{} values", values.len()),
                ));
            }
        }
        let shape = [0, 1, 2].map(|axis| edges[axis].len() - 1);
        let count = shape.iter().product::<usize>();
        if slowness.len() != count {
            return Err(CoreError::invalid(
                "slowness",
                format!("{count} values, one per block"),
                slowness.len().to_string(),
            ));
        }
        if let Some(bad) = slowness.iter().find(|s| !(s.is_finite() && **s > 0.0)) {
            return Err(CoreError::invalid(
                "slowness",
                "positive, finite s/km",
                bad.to_string(),
            ));
        }
        let mut cells = Vec::with_capacity(count);
        for ix in 0..shape[0] as u16 {
            for iy in 0..shape[1] as u16 {
                cells.extend((0..shape[2] as u16).map(|iz| [ix, iy, iz]));
            }
        }
        Ok(Self {
            chart,
            edges,
            slowness,
            cells,
        })
    }

    /// The coordinates' chart.
    #[inline]
    pub fn chart(&self) -> &C {
        &self.chart
    }

    /// Edges (km) along one axis.
    #[inline]
    pub fn edges(&self, axis: usize) -> &[f64] {
        &self.edges[axis]
    }

    /// Number of blocks along one axis.
    #[inline]
    pub fn size(&self, axis: usize) -> usize {
        self.edges[axis].len() - 1
    }

    /// Number of blocks.
    #[inline]
    pub fn count(&self) -> usize {
        self.slowness.len()
    }

    /// Slowness (s/km) of every block.
    #[inline]
    pub fn slowness(&self) -> &[f64] {
        &self.slowness
    }

    /// Slowness (s/km) of one block.
    #[inline]
    pub fn slowness_of(&self, block: u32) -> f64 {
        self.slowness[block as usize]
    }

    /// Distance in memory between neighbours along one axis.
    #[inline]
    pub fn stride(&self, axis: usize) -> usize {
        match axis {
            0 => self.size(1) * self.size(2),
            1 => self.size(2),
            _ => 1,
        }
    }

    /// Index of a cell.
    #[inline]
    pub fn index(&self, cell: Cell) -> u32 {
        ((cell[0] * self.size(1) + cell[1]) * self.size(2) + cell[2]) as u32
    }

    /// Cell of an index.
    #[inline]
    pub fn cell(&self, block: u32) -> Cell {
        self.cells[block as usize].map(usize::from)
    }

    /// Lower and upper edge (km) of a block along one axis.
    #[inline]
    pub fn range(&self, block: u32, axis: usize) -> (f64, f64) {
        let index = usize::from(self.cells[block as usize][axis]);
        (self.edges[axis][index], self.edges[axis][index + 1])
    }

    /// The block across `side`, or `None` at the model's outside.
    #[inline]
    pub fn neighbour(&self, block: u32, side: Side) -> Option<u32> {
        let axis = side / 2;
        let index = usize::from(self.cells[block as usize][axis]);
        let stride = self.stride(axis) as u32;
        if side % 2 == 1 {
            (index + 1 < self.size(axis)).then(|| block + stride)
        } else {
            (index > 0).then(|| block - stride)
        }
    }

    /// Mean width (km) along an axis.
    pub fn mean_width_along(&self, axis: usize) -> f64 {
        let edges = &self.edges[axis];
        (edges[edges.len() - 1] - edges[0]) / self.size(axis) as f64
    }

    /// Geometric mean of the mean widths (km) along the three axes.
    pub fn mean_width_km(&self) -> f64 {
        let product: f64 = (0..3).map(|axis| self.mean_width_along(axis)).product();
        product.cbrt()
    }

    /// Largest of the three mean widths over their geometric mean: 1 for cubes.
    pub fn flatness(&self) -> f64 {
        let widest = (0..3)
            .map(|axis| self.mean_width_along(axis))
            .fold(0.0, f64::max);
        widest / self.mean_width_km()
    }

    /// Mean time (s) through a block along its widest axis.
    pub fn mean_transit_s(&self) -> f64 {
        let mean = self.slowness.iter().sum::<f64>() / self.count() as f64;
        mean * self.mean_width_km() * self.flatness()
    }

    /// Time (s) along the longest block edge at the slowest block's slowness.
    pub fn longest_transit_s(&self) -> f64 {
        let widths = self.edges.iter().flat_map(|edges| edges.windows(2));
        let longest = widths.map(|pair| pair[1] - pair[0]).fold(0.0, f64::max);
        longest * self.slowness.iter().copied().fold(0.0, f64::max)
    }

    /// True if the point (grid coordinates) lies in the model or on its surface.
    pub fn contains(&self, point: Vec3) -> bool {
        (0..3).all(|axis| {
            let edges = &self.edges[axis];
            point[axis] >= edges[0] && point[axis] <= edges[edges.len() - 1]
        })
    }

    /// All blocks whose closure holds the point; several on a face, edge or
    /// corner, none outside.
    pub fn around(&self, point: Vec3) -> Vec<u32> {
        let spans = [0, 1, 2].map(|axis| {
            let edges = &self.edges[axis];
            let last = self.size(axis);
            let first = edges[1..].partition_point(|&edge| edge < point[axis]);
            let end = edges[..last].partition_point(|&edge| edge <= point[axis]);
            first..end
        });
        let mut found = Vec::with_capacity(2);
        for ix in spans[0].clone() {
            for iy in spans[1].clone() {
                found.extend(spans[2].clone().map(|iz| self.index([ix, iy, iz])));
            }
        }
        found
    }
}
