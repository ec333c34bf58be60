//! Shortest paths on graphs of boundary nodes: over the whole model from one
//! point ([`coarse`]), and finer around one ray inside a proven bound
//! ([`fine`]).

pub mod backtrack;
pub mod box_tables;
pub mod boxes;
pub mod buckets;
pub mod coarse;
pub mod face_kernel;
pub mod fine;
mod fine_backtrack;
mod fine_nodes;
