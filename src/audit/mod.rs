//! The independent checker: does a claim hold for a timetable?
//!
//! It shares the definitions of `timetable` and `claim`, none of the engine's methods, and
//! it never searches. Only its [`Receipt`] lets anything call itself proved. Imports
//! `clock`, `timetable` and `claim`, and nothing above.

mod cases;
mod changes;
mod check;
mod receipt;
mod refusal;

pub use check::{check, check_floor, check_plan, check_violations};
pub use receipt::{Changed, Knowledge, Proved, Receipt};
pub use refusal::Refusal;

use check::{MOST_PRICE, dearest};
