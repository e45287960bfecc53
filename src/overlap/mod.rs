//! The overlap structure of a set of spans: load over time, peaks, a largest clique,
//! components, the overlap graph, and clashes between people.
//!
//! Interval graphs are perfect (Berge 1960 for intervals): the largest clique, the largest
//! load at a moment and the fewest colours are the same number. Imports `clock` and
//! `timetable`.

mod clash;
mod graph;
mod load;

pub use clash::{Clash, clashes};
pub use graph::{Graph, overlap_graph};
pub use load::{Load, Peak, components, largest_load, load};
