//! The only door through which an answer becomes showable.

use crate::audit::{self, Knowledge, Receipt, Refusal};
use crate::claim::Answer;
use crate::clock::Span;
use crate::document::State;
use crate::engine::Problem;
use crate::lookup::FastSet;
use crate::overlap::{Clash, Load, clashes, load};
use crate::timetable::{Piece, Timetable};
use std::sync::Arc;

/// What holds of a timetable whatever the plan: load, peaks, clashes.
#[derive(Clone, Debug)]
pub struct Survey {
    /// The timetable.
    pub timetable: Timetable,
    /// All its pieces, withdrawn ones too.
    pub pieces: Vec<Piece>,
    /// Pieces that are not withdrawn: place in `pieces`, and time with least buffers.
    pub cores: Vec<(usize, Span)>,
    /// The load over time.
    pub load: Load,
    /// One person in two places.
    pub clashes: Vec<Clash>,
    /// The pieces in any clash.
    pub clashing: FastSet<Arc<str>>,
}

impl Survey {
    /// Looks at a timetable; `problem` must be made of the same one.
    pub fn of(timetable: Timetable, pieces: Vec<Piece>, problem: &Problem) -> Survey {
        let present = pieces
            .iter()
            .enumerate()
            .filter(|(_, piece)| !piece.withdrawn)
            .map(|(at, _)| at);
        let cores: Vec<(usize, Span)> = present.zip(problem.cores()).collect();
        let spans: Vec<Span> = cores.iter().map(|(_, span)| *span).collect();
        let clashes = clashes(&pieces);
        let both = clashes
            .iter()
            .flat_map(|clash| [&clash.first, &clash.second]);
        Survey {
            load: load(&spans),
            clashing: both.cloned().collect(),
            clashes,
            cores,
            timetable,
            pieces,
        }
    }
}

/// An answer that audit has let through. There is no other way to make one than [`settle`].
#[derive(Clone, Debug)]
pub struct Settled {
    pub(super) generation: u64,
    pub(super) answer: Answer,
    receipt: Receipt,
    survey: Arc<Survey>,
    counted: FastSet<Arc<str>>,
}

/// Has audit check an answer.
///
/// # Errors
/// Audit's refusals; the answer must then not be shown.
pub fn settle(
    survey: &Arc<Survey>,
    answer: Answer,
    generation: u64,
) -> Result<Settled, Vec<Refusal>> {
    let receipt = audit::check(&survey.timetable, &answer)?;
    Ok(Settled {
        counted: answer.floor.pieces().into_iter().collect(),
        generation,
        answer,
        receipt,
        survey: Arc::clone(survey),
    })
}

impl Settled {
    /// Which state of the desk it belongs to.
    pub fn generation(&self) -> u64 {
        self.generation
    }

    /// The answer itself.
    pub fn answer(&self) -> &Answer {
        &self.answer
    }

    /// What audit found.
    pub fn receipt(&self) -> &Receipt {
        &self.receipt
    }

    /// Whether the floor counts a piece.
    pub fn counts(&self, piece: &str) -> bool {
        self.counted.contains(piece)
    }

    /// The size of the largest clique that was found: the largest load, or more where pieces
    /// stay together and meet one another at different moments.
    pub fn clique(&self) -> usize {
        self.survey.load.most.max(self.receipt.clique())
    }

    /// What holds whatever the plan.
    pub fn survey(&self) -> &Survey {
        &self.survey
    }

    /// The state of knowledge as plan files write it.
    pub fn state(&self) -> State {
        match self.receipt.knowledge() {
            Knowledge::Proved(_) => State::Proved,
            Knowledge::Between { .. } => State::Between,
            Knowledge::Impossible { .. } => State::Impossible,
        }
    }
}
