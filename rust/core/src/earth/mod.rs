//! One-dimensional Earth models: ray integrals through spherical shells, first
//! arrivals and tables of them.
//!
//! [`RadialModel`] holds the velocity of one wave type, linear in radius inside
//! each tabulated layer. A [`WavefrontTable`] gives the first arrival from one
//! source depth at any point of a window of distance and depth. [`LayeredEarth`]
//! joins both wave types; [`first_arrivals`] solves for the rays of a [`Phase`]
//! one by one, and [`ellipticity_s`] corrects their times for the Earth's shape.
//!
//! Angles are in radians, radii and depths in kilometres, times in seconds and
//! ray parameters in seconds per radian.

mod arrival;
mod ellipticity;
mod fan;
mod hydrostatic;
mod layered;
mod phase;
mod radial;
mod route;
mod shell;
mod wavefront;

pub use arrival::{Arrival, Pairs, first_arrivals};
pub use ellipticity::{Departures, ellipticity_s};
pub use hydrostatic::EllipticityProfile;
pub use layered::LayeredEarth;
pub use phase::{Anchor, Leg, PHASES, Phase, Wave};
pub use radial::{HIGHEST_KM, RadialModel, Side};
pub use shell::{Shell, Travel};
pub use wavefront::{WavefrontTable, WavefrontValue};
