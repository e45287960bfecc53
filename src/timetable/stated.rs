//! The statements themselves, as in the file.

use super::{Closure, Opening, Repeats};
use crate::clock::{Instant, Span, Zone};
use std::sync::Arc;

/// What one resource and several are called.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Noun {
    /// One of them.
    pub one: Arc<str>,
    /// Several.
    pub several: Arc<str>,
}

/// What is said once for the whole timetable.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Settings {
    /// The heading.
    pub title: Arc<str>,
    /// Civil times are in this zone.
    pub zone: Zone,
    /// The file's own word for its resources.
    pub noun: Noun,
    /// Seconds to which moves snap, counted from the present start; whole minutes.
    pub grid: i64,
    /// Seconds kept free before, unless request or resource say otherwise.
    pub setup: i64,
    /// Seconds kept free after.
    pub turnaround: i64,
    /// Seconds either side that a request without `may_start` may start.
    pub leeway: i64,
    /// Minutes of annoyance per moved request.
    pub move_fee: u32,
    /// Pieces that began before it neither move nor relocate.
    pub settled_until: Option<Instant>,
    /// What comes first where fewest resources and fewest changes pull apart.
    pub prefer: Prefer,
}

/// Which of two aims comes first once as much as possible has its place.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Prefer {
    /// Fewest resources, then fewest changes.
    #[default]
    Count,
    /// Fewest changes, then fewest resources.
    Changes,
}

impl Prefer {
    /// Its name in the file.
    pub fn name(self) -> &'static str {
        match self {
            Prefer::Count => "count",
            Prefer::Changes => "changes",
        }
    }
}

impl Settings {
    /// The defaults of the format, with that title.
    pub fn titled(title: &str) -> Settings {
        Settings {
            title: title.into(),
            zone: Zone::UTC,
            noun: Noun {
                one: "resource".into(),
                several: "resources".into(),
            },
            grid: 300,
            setup: 0,
            turnaround: 0,
            leeway: 0,
            move_fee: 30,
            settled_until: None,
            prefer: Prefer::Count,
        }
    }
}

/// How many members a kind has of its own.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Count {
    /// So many, numbered from 1.
    Of(u32),
    /// As many as turn out to be needed.
    AsNeeded,
}

/// Resources alike, or grouped; `ID-1`, `ID-2` ... are its members.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Kind {
    /// Its id.
    pub id: Arc<str>,
    /// How many members.
    pub count: Count,
    /// What its members have in common.
    pub common: Common,
}

/// What kinds and resources say of themselves; a member stated once more (`big-2` of the kind
/// `big`) takes what it does not state from its kind.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Common {
    /// Shown instead of the id.
    pub title: Option<Arc<str>>,
    /// Most that fit; absent is no limit.
    pub seats: Option<u64>,
    /// What it has to offer.
    pub offers: Option<Vec<Arc<str>>>,
    /// Seconds kept free before.
    pub setup: Option<i64>,
    /// Seconds kept free after.
    pub turnaround: Option<i64>,
    /// Opening times; absent is always.
    pub open: Option<Vec<Opening>>,
    /// Times at which it is out.
    pub closed: Option<Vec<Closure>>,
}

/// A resource with a table of its own.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Named {
    /// Its id.
    pub id: Arc<str>,
    /// The kind it belongs to; need not have a table.
    pub kind: Option<Arc<str>>,
    /// What it states.
    pub common: Common,
}

/// One entry of the file order over kinds and named resources.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Listed {
    /// The kind at that place in `kinds`.
    Kind(usize),
    /// The resource at that place in `named`.
    Named(usize),
}

/// Whether a request states its end or its length.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum TimeStated {
    /// `end`.
    End,
    /// `length`.
    Length,
}

/// Somebody asks for time.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Request {
    /// Unique id.
    pub id: Arc<str>,
    /// Shown beside the id; empty when not stated.
    pub title: Arc<str>,
    /// When it starts.
    pub start: Instant,
    /// Elapsed seconds, at least 1.
    pub length: i64,
    /// How the file says the length.
    pub stated: TimeStated,
    /// How many seats it takes.
    pub size: Option<u64>,
    /// What a resource must offer.
    pub needs: Vec<Arc<str>>,
    /// Only these resources or kinds, when not empty.
    pub only: Vec<Arc<str>>,
    /// None of these resources or kinds.
    pub never: Vec<Arc<str>>,
    /// Who takes part.
    pub people: Vec<Arc<str>>,
    /// Windows in which it may start instead; both ends allowed when on the grid.
    pub may_start: Vec<Span>,
    /// How much it hurts to move or decline it; at least 1.
    pub weight: u32,
    /// Shortest part in seconds into which easing may split it.
    pub split: Option<i64>,
    /// The resource it stays on.
    pub pin: Option<Arc<str>>,
    /// Stays at its start.
    pub fastened: bool,
    /// Out of the plan, kept in the file.
    pub withdrawn: bool,
    /// Seconds kept free before, over what the resource says.
    pub setup: Option<i64>,
    /// Seconds kept free after.
    pub turnaround: Option<i64>,
    /// How it repeats, if it does.
    pub repeats: Option<Arc<Repeats>>,
    /// All its occurrences on one resource.
    pub together: bool,
}

impl Request {
    /// A request with nothing but its id and time.
    pub fn plain(id: &str, span: Span) -> Request {
        Request {
            id: id.into(),
            title: "".into(),
            start: span.start,
            length: span.seconds(),
            stated: TimeStated::End,
            size: None,
            needs: Vec::new(),
            only: Vec::new(),
            never: Vec::new(),
            people: Vec::new(),
            may_start: Vec::new(),
            weight: 1,
            split: None,
            pin: None,
            fastened: false,
            withdrawn: false,
            setup: None,
            turnaround: None,
            repeats: None,
            together: false,
        }
    }

    /// Its own time, without buffers; of one that repeats, the first as the rule gives it.
    pub fn span(&self) -> Span {
        Span::lasting(self.start, self.length)
    }

    /// Whether a piece of the request that now starts at `present` may start at that moment
    /// by its windows, or by the leeway when it has none; its present start is always
    /// allowed. Windows are meant for the first start; those of a date (`dated` is its start
    /// by the rule) lie as far from it on the clock.
    pub fn start_allowed(
        &self,
        at: Instant,
        present: Instant,
        dated: Option<Instant>,
        settings: &Settings,
    ) -> bool {
        if at == present {
            return true;
        }
        if self.may_start.is_empty() {
            return (at - present).abs() <= settings.leeway;
        }
        let zone = settings.zone;
        let shift = dated.map(|dated| zone.civil(dated) - zone.civil(self.start));
        self.may_start.iter().any(|window| {
            let here = |at: Instant| shift.map_or(at, |shift| zone.lenient(zone.civil(at) + shift));
            here(window.start) <= at && at <= here(window.end)
        })
    }
}
