//! Where the nodes of the fine graph lie.

use crate::blocks::{Side, face_axes};
use crate::frame::Chart;
use crate::search::fine::FineSearch;
use crate::vec3::Vec3;

impl<C: Chart> FineSearch<'_, C> {
    /// Grid coordinates (km) of the node at a place on a face.
    pub fn node_position(&self, block: u32, side: Side, place: usize) -> Vec3 {
        self.face_position(block, side, self.fractions(side, place))
    }

    /// Shares of a face's widths at which a place lies.
    pub fn fractions(&self, side: Side, place: usize) -> [f64; 2] {
        let (u, v) = face_axes(side / 2);
        let lanes = self.counts.face(side / 2).lanes;
        let (row, column) = (place / lanes, place % lanes);
        [
            self.counts.fraction(u, row),
            self.counts.fraction(v, column),
        ]
    }

    /// Grid coordinates (km) of a point on a face, given as shares of its widths.
    pub fn face_position(&self, block: u32, side: Side, shares: [f64; 2]) -> Vec3 {
        let axis = side / 2;
        let (u, v) = face_axes(axis);
        let mut at = [0.0; 3];
        let (low, high) = self.blocks.range(block, axis);
        at[axis] = if side % 2 == 1 { high } else { low };
        for (along, share) in [u, v].into_iter().zip(shares) {
            let (low, high) = self.blocks.range(block, along);
            at[along] = low + (high - low) * share;
        }
        at
    }

    /// Places of all nodes on a face.
    pub fn places(&self, side: Side) -> impl Iterator<Item = usize> + use<C> {
        let layout = self.counts.face(side / 2);
        (0..layout.rows)
            .flat_map(move |row| (0..layout.columns).map(move |column| row * layout.lanes + column))
    }
}
