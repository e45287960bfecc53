//! Clashes: one person in two overlapping pieces.

use crate::lookup::FastMap;
use crate::timetable::Piece;
use std::sync::Arc;

/// One person, two pieces at the same time.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Clash {
    /// Who.
    pub person: Arc<str>,
    /// The earlier starting piece.
    pub first: Arc<str>,
    /// The other one.
    pub second: Arc<str>,
}

/// Every clash among pieces that are not withdrawn, in pairs, by their own times without
/// buffers; sorted by person. Pieces of one request never clash with each other.
pub fn clashes(pieces: &[Piece]) -> Vec<Clash> {
    let mut taking_part: FastMap<&Arc<str>, Vec<&Piece>> = FastMap::default();
    for piece in pieces.iter().filter(|piece| !piece.withdrawn) {
        for person in &piece.request.people {
            taking_part.entry(person).or_default().push(piece);
        }
    }
    let mut found = Vec::new();
    for (person, mut theirs) in taking_part {
        if theirs.len() < 2 {
            continue;
        }
        theirs.sort_by_key(|piece| piece.span);
        for (at, piece) in theirs.iter().enumerate() {
            for other in theirs[at + 1..]
                .iter()
                .take_while(|other| other.span.start < piece.span.end)
            {
                if piece.request.id != other.request.id {
                    found.push(Clash {
                        person: Arc::clone(person),
                        first: Arc::clone(&piece.id),
                        second: Arc::clone(&other.id),
                    });
                }
            }
        }
    }
    found.sort_by(|a: &Clash, b: &Clash| a.person.cmp(&b.person));
    found
}
