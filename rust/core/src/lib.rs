//! Numerical core of rayloom: rays, sensitivity matrices and one-dimensional
//! Earth models, without Python, printing or files.
//!
//! Every long call takes a [`monitor::Monitor`] and returns
//! [`error::CoreError`] on failure; results never depend on the number of
//! threads.

pub mod earth;
pub mod error;
pub mod monitor;
pub mod products;
