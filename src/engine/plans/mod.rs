//! Ways to a plan.

pub(super) mod align;
pub(crate) mod alike;
pub(super) mod greedy;
mod joint;
pub(super) mod keep;
pub(super) mod rows;
pub(super) mod slices;
pub(super) mod tabu;

/// No resource.
pub(crate) const NONE: u32 = u32::MAX;

/// The resource of each item, or [`NONE`].
pub(crate) type Assignment = Vec<u32>;
