//! What is answered, as data only: a plan, the bounds that go with it, and why something
//! has no place. Anyone may write a claim down; only `audit` says whether it holds.
//!
//! Imports `clock`.

use crate::clock::{Instant, Span};
use std::sync::Arc;

/// One piece on one resource, at its own time (without buffers).
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Placement {
    /// The piece.
    pub piece: Arc<str>,
    /// The resource.
    pub resource: Arc<str>,
    /// The piece's own time.
    pub span: Span,
}

/// Why a piece has no place.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Reason {
    /// No resource may take it.
    NoResource,
    /// Its pin cannot serve it.
    PinCannotServe(Arc<str>),
    /// Another piece overlaps it on the resource both are pinned on.
    PinTaken {
        /// The resource.
        pin: Arc<str>,
        /// The piece that has it.
        by: Arc<str>,
    },
    /// Every resource that may take it is taken at that time.
    AllTaken,
    /// As read from a plan file.
    Said(Arc<str>),
}

/// A piece without a place.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Unplaced {
    /// The piece.
    pub piece: Arc<str>,
    /// Why.
    pub because: Reason,
}

/// Where everything goes.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Plan {
    /// What has a place.
    pub placements: Vec<Placement>,
    /// What has none.
    pub unplaced: Vec<Unplaced>,
}

/// Why no plan that places everything can do with fewer resources.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum FloorProof {
    /// These pieces pairwise overlap: all of them run at that moment (with their least
    /// buffers), so each needs a resource of its own.
    Clique {
        /// The moment.
        at: Instant,
        /// The pieces.
        pieces: Vec<Arc<str>>,
    },
    /// These pieces can pairwise not share a resource: they overlap there, or no resource
    /// may take both.
    Incompatible {
        /// The pieces.
        pieces: Vec<Arc<str>>,
    },
    /// A whole price for each of these pieces, in units of which one resource costs `unit`.
    /// No resource can take pieces at once worth more than its dearest chain; the prices
    /// together, less what each resource could take beyond `unit`, divided by `unit` and
    /// rounded up, is a lower bound (Lagrangian relaxation; Geoffrion 1974).
    Prices {
        /// The price of one resource, at least 1.
        unit: i64,
        /// The pieces and their prices, all above 0.
        prices: Vec<(Arc<str>, i64)>,
        /// The number of resources they are claimed to prove.
        value: usize,
    },
}

impl FloorProof {
    /// The number of resources it proves, or claims to prove, to be needed.
    pub fn value(&self) -> usize {
        match self {
            FloorProof::Clique { pieces, .. } | FloorProof::Incompatible { pieces } => pieces.len(),
            FloorProof::Prices { value, .. } => *value,
        }
    }

    /// The pieces it speaks of.
    pub fn pieces(&self) -> Vec<Arc<str>> {
        match self {
            FloorProof::Clique { pieces, .. } | FloorProof::Incompatible { pieces } => {
                pieces.clone()
            }
            FloorProof::Prices { prices, .. } => {
                prices.iter().map(|(piece, _)| Arc::clone(piece)).collect()
            }
        }
    }

    /// Its name in the contract.
    pub fn name(&self) -> &'static str {
        match self {
            FloorProof::Clique { .. } => "clique",
            FloorProof::Incompatible { .. } => "incompatible",
            FloorProof::Prices { .. } => "prices",
        }
    }
}

/// A Hall violation at a moment (Hall 1935): the pieces all run then, each may use only
/// these resources, and the resources are fewer. At least the excess stays unplaced.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct HallViolation {
    /// The moment.
    pub at: Instant,
    /// The pieces.
    pub pieces: Vec<Arc<str>>,
    /// Every resource that any of them may use.
    pub resources: Vec<Arc<str>>,
}

/// What the engine claims of a timetable.
#[derive(Clone, Debug)]
pub struct Answer {
    /// Where everything goes.
    pub plan: Plan,
    /// Why not fewer.
    pub floor: FloorProof,
    /// Why not everything; no two of them share a piece.
    pub violations: Vec<HallViolation>,
    /// Seconds of search so far.
    pub seconds: f64,
}
