//! Numerical core of rayloom: rays, sensitivity matrices and one-dimensional
//! Earth models, without Python, printing or files.
//!
//! The way through the crate: [`frame`] and [`blocks`] describe the model,
//! [`lattice`] its graph, [`search`] finds paths on it, [`fermat`] refines them,
//! [`tracer`] joins the three as thoroughly as [`quality`] says, [`rays`] traces
//! whole data sets in parallel and packs their sensitivities, [`products`]
//! multiplies with them; [`earth`], [`waves`] and [`entry`] bring the waves from
//! outside.
//!
//! Every long call takes a [`monitor::Monitor`] and returns
//! [`error::CoreError`] on failure; results never depend on the number of
//! threads.

pub mod beginning;
pub mod blocks;
pub mod bound_check;
pub mod course;
pub mod earth;
pub mod entry;
pub mod error;
pub mod fermat;
pub mod frame;
pub mod incoming;
pub mod lattice;
pub mod monitor;
pub mod path;
pub mod products;
pub mod quality;
pub mod rays;
pub mod relax;
pub mod search;
pub mod tracer;
pub mod undisturbed;
pub mod vec3;
pub mod waves;
