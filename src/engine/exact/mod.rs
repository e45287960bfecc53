//! Exact search with a proof that can be kept: for small problems and what is left of large
//! ones.

pub(super) mod cases;
mod left;
