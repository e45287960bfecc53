//! The one edit language: a line of text per change, the same in the command line, in
//! scripts and in what is kept. Printing then reading is the identity.
//!
//! Imports `clock`, `text` and `timetable`.

mod apply;
mod field;
mod parse;
mod print;

pub use apply::{Refused, Touched, apply};
pub use field::{Field, print_list};
pub use parse::{Context, Misread, parse};
pub use print::print;

use crate::clock::{Instant, Span};
use crate::timetable::Prefer;
use std::sync::Arc;

/// One change, absolute: nothing in it depends on when or where it is read again.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Edit {
    /// What is done.
    pub what: Change,
    /// The stated reason.
    pub because: Option<Arc<str>>,
}

/// What can be done to a timetable.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Change {
    /// Start a piece elsewhere; its length stays.
    Move {
        /// Which.
        piece: Arc<str>,
        /// Its new start.
        to: Instant,
    },
    /// Keep a piece on a resource.
    Pin {
        /// Which.
        piece: Arc<str>,
        /// Where.
        on: Arc<str>,
    },
    /// Let it go to any again.
    Unpin(Arc<str>),
    /// Keep a piece at its start.
    Fasten(Arc<str>),
    /// Let it be moved again.
    Loosen(Arc<str>),
    /// Exchange two placements. The desk knows the placements and turns it into pins.
    Swap(Arc<str>, Arc<str>),
    /// Take a request out of the plan.
    Withdraw(Arc<str>),
    /// Put it back in.
    Restore(Arc<str>),
    /// Take a resource out for a while.
    Close {
        /// Which.
        resource: Arc<str>,
        /// Half-open.
        span: Span,
    },
    /// Put it back in.
    Reopen {
        /// Which.
        resource: Arc<str>,
        /// Half-open.
        span: Span,
    },
    /// Somebody asks for time.
    Add {
        /// Its id, not used before.
        id: Arc<str>,
        /// Its time.
        span: Span,
        /// What else is said of it.
        fields: Vec<Field>,
    },
    /// There is one resource more.
    AddResource {
        /// Its id, not used before.
        id: Arc<str>,
        /// The kind it belongs to, by name.
        kind: Option<Arc<str>>,
        /// What else is said of it.
        fields: Vec<Field>,
    },
    /// Says something else of a request or a resource.
    Set {
        /// Which.
        id: Arc<str>,
        /// What.
        field: Field,
    },
    /// Take a request or a resource out of the file.
    Drop(Arc<str>),
    /// What began before that moment stays where and when it is.
    Settle(Instant),
    /// What comes first where fewest resources and fewest changes pull apart.
    Prefer(Prefer),
    /// Take the last step back.
    Undo,
    /// Do again what was taken back.
    Redo,
}

impl Change {
    /// The request it is about, where it is about one.
    pub fn subject(&self) -> Option<&Arc<str>> {
        match self {
            Change::Move { piece, .. }
            | Change::Pin { piece, .. }
            | Change::Unpin(piece)
            | Change::Fasten(piece)
            | Change::Loosen(piece)
            | Change::Swap(piece, _)
            | Change::Withdraw(piece)
            | Change::Restore(piece)
            | Change::Add { id: piece, .. }
            | Change::Set { id: piece, .. }
            | Change::Drop(piece) => Some(piece),
            Change::Close { .. }
            | Change::Reopen { .. }
            | Change::AddResource { .. }
            | Change::Settle(_)
            | Change::Prefer(_)
            | Change::Undo
            | Change::Redo => None,
        }
    }
}

impl From<Change> for Edit {
    fn from(what: Change) -> Edit {
        Edit {
            what,
            because: None,
        }
    }
}
