//! What is answered, as data only: a plan, the bounds that go with it, and why something
//! has no place. Anyone may write a claim down; only `audit` says whether it holds.
//!
//! Imports `clock`.

use crate::clock::{Instant, Span};
use std::collections::HashMap;
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
    /// These pieces pairwise overlap, with their least buffers, so each needs a resource of
    /// its own: all of them run at one moment, or, where pieces stay together with others,
    /// any two of them meet somewhere.
    Clique {
        /// The moment, if it is one.
        at: Option<Instant>,
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
    /// Every way to do with fewer is refuted, case by case.
    Cases {
        /// The number of resources that is claimed to be needed.
        value: usize,
        /// The case in which nothing has been put anywhere yet.
        tree: Case,
    },
}

/// One case of a proof that fewer than so many resources cannot do. Some pieces have been
/// put on resources by the cases around it; the others have those resources left that they
/// may use, that hold nothing in their way, and, once one resource less than the wanted
/// number holds something, that hold something.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Case {
    /// The piece goes on one of these; each is refuted. Of alike resources that hold
    /// nothing, one stands for all.
    Place {
        /// The piece.
        piece: Arc<str>,
        /// Every resource left for it, and the case in which it is there.
        on: Vec<(Arc<str>, Case)>,
    },
    /// No resource is left for the piece.
    NoPlace {
        /// The piece.
        piece: Arc<str>,
    },
    /// These pieces have no place yet, all run at that moment, and too few resources are
    /// left for them (Hall 1935).
    Short {
        /// The moment.
        at: Instant,
        /// The pieces.
        pieces: Vec<Arc<str>>,
    },
    /// Prices, as in [`FloorProof::Prices`], with what is left; a resource that holds
    /// something costs `unit` in any case.
    Prices {
        /// The price of one resource, at least 1.
        unit: i64,
        /// The pieces and their prices, all above 0.
        prices: Vec<(Arc<str>, i64)>,
    },
}

impl Case {
    /// Adds the pieces it speaks of.
    fn collect(&self, pieces: &mut Vec<Arc<str>>) {
        match self {
            Case::Place { piece, on } => {
                pieces.push(Arc::clone(piece));
                on.iter().for_each(|(_, case)| case.collect(pieces));
            }
            Case::NoPlace { piece } => pieces.push(Arc::clone(piece)),
            Case::Short { pieces: some, .. } => pieces.extend(some.iter().cloned()),
            Case::Prices { prices, .. } => {
                pieces.extend(prices.iter().map(|(piece, _)| Arc::clone(piece)));
            }
        }
    }

    /// How many cases there are, itself included.
    pub fn count(&self) -> usize {
        match self {
            Case::Place { on, .. } => 1 + on.iter().map(|(_, case)| case.count()).sum::<usize>(),
            _ => 1,
        }
    }
}

impl FloorProof {
    /// The number of resources it proves, or claims to prove, to be needed.
    pub fn value(&self) -> usize {
        match self {
            FloorProof::Clique { pieces, .. } | FloorProof::Incompatible { pieces } => pieces.len(),
            FloorProof::Prices { value, .. } | FloorProof::Cases { value, .. } => *value,
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
            FloorProof::Cases { tree, .. } => {
                let mut pieces = Vec::new();
                tree.collect(&mut pieces);
                pieces.sort_unstable();
                pieces.dedup();
                pieces
            }
        }
    }

    /// Its name in the contract.
    pub fn name(&self) -> &'static str {
        match self {
            FloorProof::Clique { .. } => "clique",
            FloorProof::Incompatible { .. } => "incompatible",
            FloorProof::Prices { .. } => "prices",
            FloorProof::Cases { .. } => "cases",
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

/// Whole prices that prove how much weight stays unplaced: no piece costs more than `unit`
/// for each unit of its weight, and what the pieces cost together beyond the dearest chain
/// of every resource, divided by `unit` and rounded up, has no place (Lagrangian
/// relaxation; Geoffrion 1974).
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct OutPrices {
    /// What one unit of weight costs, at least 1.
    pub unit: i64,
    /// The pieces and their prices, all above 0.
    pub prices: Vec<(Arc<str>, i64)>,
    /// The weight that is claimed to stay out.
    pub weight: u64,
}

/// What the engine claims of a timetable.
#[derive(Clone, Debug)]
pub struct Answer {
    /// Where everything goes.
    pub plan: Plan,
    /// Why not fewer.
    pub floor: FloorProof,
    /// Pieces that pairwise overlap, if more of them were found than run at any moment:
    /// there are such where pieces stay together.
    pub clique: Vec<Arc<str>>,
    /// Why not everything; no two of them share a piece.
    pub violations: Vec<HallViolation>,
    /// Why not everything, by prices: where they prove more.
    pub out: Option<OutPrices>,
    /// What changes against an earlier plan, where there is one.
    pub changes: Option<Changes>,
    /// Pieces that have begun, and the resources on which they stay; all of the above takes
    /// that as given.
    pub stays: Arc<HashMap<Arc<str>, Arc<str>>>,
    /// Seconds of search so far.
    pub seconds: f64,
}

/// What changes against an earlier plan: a piece that is in both on different resources
/// relocates.
#[derive(Clone, Debug)]
pub struct Changes {
    /// The earlier plan: the one handed out, else the one that stood before.
    pub since: Arc<Plan>,
    /// Why no fewer relocations will do.
    pub proof: Option<ChangesProof>,
    /// A plan that was found for the other choice, where fewest resources and fewest changes
    /// pull apart: resources in use, and relocations.
    pub other: Option<(usize, usize)>,
}

/// Whole prices that prove how many pieces relocate in any plan that uses no more resources
/// than `limit` and leaves out no more weight: a resource takes pieces at their prices, less
/// `unit` for each that was elsewhere; what the pieces cost together beyond the dearest
/// chains of so many resources, and beyond the dearest of what may be left out, is paid in
/// relocations (Lagrangian relaxation; Geoffrion 1974).
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ChangesProof {
    /// What one relocation costs, at least 1.
    pub unit: i64,
    /// The pieces and their prices, all above 0.
    pub prices: Vec<(Arc<str>, i64)>,
    /// Resources that may be in use.
    pub limit: usize,
    /// Relocations that are claimed to be needed.
    pub value: usize,
}

/// Something stated that a bound rests on.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Ground {
    /// A piece is pinned on a resource.
    Pin {
        /// The piece.
        piece: Arc<str>,
        /// The resource.
        on: Arc<str>,
    },
    /// A piece has begun on a resource and stays there.
    Begun {
        /// The piece.
        piece: Arc<str>,
        /// The resource.
        on: Arc<str>,
    },
    /// All dates of a request stay on one resource.
    Together {
        /// The request.
        request: Arc<str>,
    },
    /// A request may only use some resources or kinds.
    Only {
        /// The request.
        request: Arc<str>,
    },
    /// A request never uses a resource or kind.
    Never {
        /// The request.
        request: Arc<str>,
        /// The resource or kind.
        name: Arc<str>,
    },
    /// A request needs something that not every resource offers.
    Need {
        /// The request.
        request: Arc<str>,
        /// What it needs.
        need: Arc<str>,
    },
    /// A request takes so many seats.
    Size {
        /// The request.
        request: Arc<str>,
        /// Seats.
        size: u64,
    },
    /// A resource is closed for a while.
    Closure {
        /// The resource.
        resource: Arc<str>,
        /// Half-open.
        span: Span,
    },
    /// A resource is only open at times.
    Opening {
        /// The resource.
        resource: Arc<str>,
    },
}

/// What one pin costs.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct PinPrice {
    /// The pinned piece.
    pub pin: Arc<str>,
    /// Resources that are saved without it.
    pub saves: usize,
    /// Whether that is all it can save; else it is what was found.
    pub proved: bool,
}

/// Why something has no place.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct NoPlace {
    /// The piece, with what it stays together with.
    pub pieces: Vec<Arc<str>>,
    /// Pieces that cannot all be placed, itself included; none when no reason was found in
    /// the time there was.
    pub set: Vec<Arc<str>>,
    /// The moment at which all of them run, when it takes but one.
    pub at: Option<Instant>,
    /// All that any of them may use, when it takes but a moment.
    pub resources: Vec<Arc<str>>,
    /// The cases, when it takes more than a moment.
    pub cases: Option<Case>,
    /// What it rests on: without any one of them the reason does not hold.
    pub grounds: Vec<Ground>,
}

/// Why not fewer resources, or why not everything.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Why {
    /// Resources in use.
    pub count: usize,
    /// Proved lower bound for placing everything.
    pub floor: usize,
    /// The largest clique.
    pub clique: usize,
    /// The name of the proof of the floor.
    pub by: &'static str,
    /// The pieces that it speaks of.
    pub pieces: Vec<Arc<str>>,
    /// What it rests on: without any one of them that proof does not hold.
    pub grounds: Vec<Ground>,
    /// What each pin among them costs.
    pub prices: Vec<PinPrice>,
    /// What they save together, when there are several: resources, and whether that is proved.
    pub together: Option<(usize, bool)>,
    /// Why some pieces have no place.
    pub unplaced: Vec<NoPlace>,
}
