//! Requests from elsewhere: CSV in, a timetable out, rows that cannot be read set aside.
//!
//! Imports `clock`, `text`, `timetable`, `claim` and `document`.

mod columns;
mod csv_in;
mod write;

pub use columns::Columns;
pub use csv_in::{Intake, SetAside, read_csv};
pub use write::{set_aside_csv, timetable_text};

use std::sync::Arc;

/// Makes a cell safe to open in a spreadsheet: one that would be taken for a formula gets a
/// quote in front (OWASP, "CSV Injection").
pub fn plain_cell(cell: &str) -> String {
    let cell: String = crate::text::clean(cell).into_owned();
    if cell.starts_with(['=', '+', '-', '@', '\t', '\r']) {
        format!("'{cell}")
    } else {
        cell
    }
}

/// An id from any text: runs of other characters become `-`.
fn id_from(text: &str) -> Option<Arc<str>> {
    let mut id = String::new();
    for c in text.chars().take(150) {
        if c.is_alphanumeric() || matches!(c, '_' | '.') {
            id.push(c);
        } else if !id.ends_with('-') {
            id.push('-');
        }
    }
    let id = id.trim_matches('-');
    (!id.is_empty()).then(|| id.into())
}
