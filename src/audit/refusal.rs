//! Why a claim was refused.

use std::sync::Arc;
use thiserror::Error;

/// One reason to refuse a claim. The texts carry ids, which are plain by the format.
#[derive(Clone, Debug, Error, PartialEq, Eq)]
pub enum Refusal {
    /// A name that the timetable does not know.
    #[error("the plan speaks of piece {0}, which the timetable does not have")]
    UnknownPiece(Arc<str>),
    /// A resource that the timetable does not know.
    #[error("{piece} is placed on {resource}, which the timetable does not have")]
    UnknownResource {
        /// The piece.
        piece: Arc<str>,
        /// The unknown resource.
        resource: Arc<str>,
    },
    /// Withdrawn, yet in the plan.
    #[error("{0} is withdrawn, yet the plan has it")]
    Withdrawn(Arc<str>),
    /// Said twice.
    #[error("the plan has {0} twice")]
    Twice(Arc<str>),
    /// Neither placed nor listed as unplaced.
    #[error("the plan forgets {0}")]
    Forgotten(Arc<str>),
    /// At another time than the timetable says.
    #[error("{0} is planned at another time than the timetable says")]
    OtherTime(Arc<str>),
    /// On a resource that may not take it.
    #[error("{resource} may not take {piece}: {because}")]
    Unfit {
        /// The piece.
        piece: Arc<str>,
        /// The resource.
        resource: Arc<str>,
        /// In a few words.
        because: &'static str,
    },
    /// Two pieces at once on one resource, buffers included.
    #[error("{resource} has {first} and {second} at the same time (time kept free included)")]
    DoubleBooked {
        /// The resource.
        resource: Arc<str>,
        /// The earlier starting piece.
        first: Arc<str>,
        /// The other.
        second: Arc<str>,
    },
    /// What must stay together does not.
    #[error("{first} and {second} must stay together")]
    Apart {
        /// One date of a request.
        first: Arc<str>,
        /// Another.
        second: Arc<str>,
    },
    /// Members of a clique that do not overlap anywhere.
    #[error("the clique counts {first} and {second}, which never overlap")]
    NeverMeet {
        /// One piece.
        first: Arc<str>,
        /// The other.
        second: Arc<str>,
    },
    /// A bound speaks of a piece that does not count.
    #[error("the bound counts {0}, which is unknown or withdrawn")]
    BoundCounts(Arc<str>),
    /// A bound says the same piece twice.
    #[error("the bound counts {0} twice")]
    BoundTwice(Arc<str>),
    /// A clique whose member does not run at the moment.
    #[error("the clique counts {0}, which does not run at its moment")]
    NotRunning(Arc<str>),
    /// Two pieces that some resource could take both.
    #[error(
        "the bound says {first} and {second} cannot share a resource, but {resource} can take both"
    )]
    CanShare {
        /// One piece.
        first: Arc<str>,
        /// The other.
        second: Arc<str>,
        /// The resource that can take both.
        resource: Arc<str>,
    },
    /// A Hall violation that leaves out a resource.
    #[error("the shortage leaves out {resource}, which may take {piece}")]
    LeftOut {
        /// The piece.
        piece: Arc<str>,
        /// The resource left out.
        resource: Arc<str>,
    },
    /// A Hall violation without excess.
    #[error("a claimed shortage has enough resources")]
    NoShortage,
    /// Prices that are not whole numbers above 0, or far too large.
    #[error(
        "the prices of the bound must be whole numbers above 0 (and below 2^40, and of what stays out no more than its weight)"
    )]
    BadPrices,
    /// Less stays out than claimed.
    #[error("the plan file claims that a weight of {claimed} stays out, its prices give {proved}")]
    OtherWeight {
        /// As claimed.
        claimed: u64,
        /// As proved.
        proved: u64,
    },
    /// A case of a proof by cases does not hold.
    #[error("the proof by cases does not hold: {0}")]
    BadCase(Arc<str>),
    /// The plan file says a floor that its proof does not give.
    #[error("the plan file claims at least {claimed}, its proof gives {proved}")]
    OtherFloor {
        /// As claimed.
        claimed: usize,
        /// As proved.
        proved: usize,
    },
    /// Fewer relocations are proved to be needed than claimed.
    #[error("it claims that at least {claimed} relocate, its prices give {proved}")]
    OtherChanges {
        /// As claimed.
        claimed: usize,
        /// As proved.
        proved: usize,
    },
    /// The bound on changes is for fewer resources than the plan uses.
    #[error("the bound on changes is for at most {limit} resources, the plan uses {in_use}")]
    OtherLimit {
        /// Resources in use.
        in_use: usize,
        /// Resources that the bound allows.
        limit: usize,
    },
    /// The plan file claims a state that does not follow.
    #[error("the plan file says \"{claimed}\", but what it shows is \"{shown}\"")]
    OtherState {
        /// As claimed.
        claimed: Arc<str>,
        /// As follows from plan and proof.
        shown: &'static str,
    },
}
