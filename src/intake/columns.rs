//! Which columns mean what.

use crate::clock::Zone;
use chrono::NaiveDate;

/// What the person says about the columns of a CSV file.
#[derive(Clone, Debug)]
pub struct Columns {
    /// Columns that together make the id, joined by `-`; without any, the line number does.
    pub id: Vec<String>,
    /// The title.
    pub title: Option<String>,
    /// The start.
    pub start: String,
    /// The end.
    pub end: Option<String>,
    /// The length, instead of the end: `1h30m`, or whole minutes.
    pub length: Option<String>,
    /// Seats taken.
    pub size: Option<String>,
    /// People, separated by `;` or `,`.
    pub people: Option<String>,
    /// The resource.
    pub resource: Option<String>,
    /// The date that start and end count within.
    pub day: Option<String>,
    /// Start and end are whole minutes since this date began.
    pub minutes_from: Option<NaiveDate>,
    /// Only rows in which these columns have these values.
    pub only: Vec<(String, String)>,
    /// Cells with this content count as empty.
    pub blank: Vec<String>,
    /// The resource column is a plan that was issued, not a pin.
    pub as_issued: bool,
    /// What separates the cells of a row.
    pub separator: u8,
    /// The zone of the times.
    pub zone: Zone,
}
