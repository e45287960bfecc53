//! The largest clique of the overlap graph: spans on a line pairwise overlap exactly when
//! they share a moment (Helly's theorem on the line), so a sweep finds it.

use crate::claim::FloorProof;
use crate::engine::Problem;
use crate::overlap::load;
use std::sync::Arc;

/// A largest clique, at the beginning of the first peak.
pub(crate) fn largest(problem: &Problem) -> FloorProof {
    let load = load(&problem.cores());
    let Some(peak) = load.peaks().first().copied() else {
        return FloorProof::Clique {
            at: crate::clock::Instant(0),
            pieces: Vec::new(),
        };
    };
    let at = peak.span.start;
    let pieces = problem
        .running(at)
        .map(|item| Arc::clone(&problem.ids[item]))
        .collect();
    FloorProof::Clique { at, pieces }
}
