//! Sentences: what is known, why something has no place, what a finding means. Everything
//! from files is cleaned here before it can reach a terminal.
//!
//! Imports `clock`, `text`, `timetable`, `claim`, `overlap`, `audit` and `engine`.

mod reason;
mod state;
mod why;

pub use reason::{choice, finding, unfit, unplaced};
pub use state::{
    Progress, changes, count_of, count_words, doubled, other_choice, peaks, span, state, state_name,
};
pub use why::{ground, no_place, why};

/// A cautious line for everything that speaks of people and rooms: the figures are the
/// file's own.
pub const CAUTION: &str = "Seats, hours and rests are as the file says and are not verified here; \
local codes and licensed practice come first.";

/// A list as people say it: `a, b and c`, cut after `most` with a count of the rest.
pub fn list(names: &[&str], most: usize) -> String {
    match names {
        [] => "nothing".into(),
        [one] => (*one).into(),
        _ if names.len() > most.max(1) => {
            let most = most.max(1);
            format!(
                "{} and {} more",
                names[..most].join(", "),
                names.len() - most
            )
        }
        [before @ .., last] => format!("{} and {last}", before.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::list;

    #[test]
    fn lists_are_said_as_people_say_them() {
        assert_eq!(list(&[], 3), "nothing");
        assert_eq!(list(&["a"], 3), "a");
        assert_eq!(list(&["a", "b"], 3), "a and b");
        assert_eq!(list(&["a", "b", "c"], 3), "a, b and c");
        assert_eq!(list(&["a", "b", "c", "d", "e"], 3), "a, b, c and 2 more");
    }
}
