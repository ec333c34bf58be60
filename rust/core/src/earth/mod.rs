//! One-dimensional Earth models: ray integrals through spherical shells, first
//! arrivals and tables of them.
//!
//! [`RadialModel`] holds the velocity of one wave type, linear in radius inside
//! each tabulated layer. A [`WavefrontTable`] gives the first arrival from one
//! source depth at any point of a window of distance and depth.
//!
//! Angles are in radians, radii and depths in kilometres, times in seconds and
//! ray parameters in seconds per radian.

mod fan;
mod radial;
mod route;
mod shell;
mod wavefront;

pub use radial::{HIGHEST_KM, RadialModel, Side};
pub use shell::{Shell, Travel};
pub use wavefront::{WavefrontTable, WavefrontValue};
