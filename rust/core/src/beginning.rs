//! Where rays begin: [`Beginning`].

use crate::entry::CornerTimes;
use crate::incoming::Incoming;
use crate::vec3::Vec3;

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
        /// Its ray in a similar model (grid coordinates, km); empty if unknown.
        earlier: &'a [Vec3],
    },
    /// No direct wave comes.
    Nowhere,
}

impl<'a> Beginning<'a> {
    /// The wave, if it begins on the surface.
    pub(crate) fn incoming(&self) -> Option<&'a dyn Incoming> {
        match *self {
            Self::Wave { incoming, .. } => Some(incoming),
            Self::Point(_) | Self::Nowhere => None,
        }
    }

    /// The point, if it begins inside.
    pub(crate) fn point(&self) -> Option<Vec3> {
        match self {
            Self::Point(point) => Some(*point),
            Self::Wave { .. } | Self::Nowhere => None,
        }
    }
}
