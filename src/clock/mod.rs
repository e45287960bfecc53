//! Time: instants, half-open spans, civil time in a zone, lengths, repeats.
//!
//! Inside the program every moment is a whole second since 1970 UTC; files and
//! people speak civil time in the timetable's zone. Imports nothing from the crate.

mod instant;
mod length;
mod repeat;
mod zone;

pub use instant::{DAY, Instant, Span, merge};
pub use length::{LengthError, parse_length, print_length};
pub use repeat::{MOST_STARTS, RepeatError, civil_starts, starts};
pub use zone::{Resolved, Zone, parse_civil, parse_date, parse_time_of_day};

/// The earliest and the latest year a timetable may speak of. Zone rules outside
/// are guesses, and a date outside is nearly always a typing mistake.
pub const YEARS: std::ops::RangeInclusive<i32> = 1970..=2199;
