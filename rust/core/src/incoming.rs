//! The wave that reaches the model from outside: the trait [`Incoming`].

use crate::vec3::Vec3;

/// Arrival of the incoming wave at a point.
#[derive(Debug, Clone, Copy)]
pub struct Arrival {
    /// Time since the origin of the event (s).
    pub time_s: f64,
    /// Derivative of the time by each grid coordinate (s/km).
    pub gradient: Vec3,
}

/// A wave known outside the model, and on its surface.
pub trait Incoming: Sync {
    /// Arrival at a point (grid coordinates, km), or `None` where the wave does
    /// not come.
    fn at(&self, grid: Vec3) -> Option<Arrival>;
}

/// True if the wave travels into the model through the face `side`: upwards
/// through the base, inwards through a side, never through the top.
#[must_use]
pub fn enters(arrival: &Arrival, side: usize) -> bool {
    const TOP: usize = 4;
    let upward = arrival.gradient[2] < 0.0;
    let along = arrival.gradient[side / 2];
    let inward = if side.is_multiple_of(2) {
        along > 0.0
    } else {
        along < 0.0
    };
    side != TOP && upward && inward
}
