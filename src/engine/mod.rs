//! The search: fewest resources, with the reason why not fewer.
//!
//! It works on a [`Problem`] of plain arrays, prints nothing, reads no environment and
//! knows no terminal; whoever calls it holds the [`Stopper`] and decides how long. Its
//! answers are claims: `audit` decides whether they hold. Imports `clock`, `timetable`,
//! `claim` and `overlap`.
//!
//! One method per file, each with its source: `bounds` are lower bounds, `plans` are ways
//! to a plan, `exact` goes through cases, `changes` stays near to an earlier plan, `solve` is
//! the anytime loop over them.

mod bounds;
mod changes;
mod exact;
mod plans;
mod problem;
mod random;
pub mod reasons;
mod solve;
mod stop;
pub mod who;

pub use plans::alike::{bound_and_count, partition};
pub use problem::{Class, Item, Problem};
pub use solve::{Before, Budget, Reference, solve};
pub use stop::{Either, Flag, Never, Stopper, Until};
