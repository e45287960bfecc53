//! Where everything was before, and what it costs to put it elsewhere.

use crate::claim::{Placement, Plan};
use crate::clock::Span;
use crate::engine::Problem;
use crate::engine::plans::NONE;
use crate::lookup::FastMap;
use crate::timetable::Timetable;

/// What a relocation against the plan that counts first costs, in relocations against the
/// plan that counts second.
pub(crate) const FIRST: u64 = 1 << 20;

/// Per piece of a problem where a plan has it (or [`NONE`] when that is no resource any more)
/// and when; `None` where the plan does not have it.
pub(crate) struct Places(pub(crate) Vec<Option<(u32, Span)>>);

impl Places {
    /// Where a plan has the pieces of a problem.
    pub(crate) fn of(problem: &Problem, timetable: &Timetable, plan: &Plan) -> Places {
        let resources = timetable.resources();
        let place = |placement: &Placement| {
            let resource = resources.position(&placement.resource);
            (
                resource.map_or(NONE, |resource| resource as u32),
                placement.span,
            )
        };
        // Placements are listed in the order of the pieces, as a rule; the map is for the rest.
        let in_order = plan.placements.len() == problem.ids.len();
        let mut pairs = problem.ids.iter().zip(&plan.placements);
        if in_order && pairs.all(|(id, placement)| *id == placement.piece) {
            return Places(plan.placements.iter().map(|p| Some(place(p))).collect());
        }
        let placements = plan.placements.iter();
        let known: FastMap<&str, &Placement> = placements.map(|p| (&*p.piece, p)).collect();
        let ids = problem.ids.iter();
        Places(ids.map(|id| known.get(&**id).map(|p| place(p))).collect())
    }
}

/// Per item where its pieces were, and so what each resource costs.
#[derive(Clone, Debug, Default)]
pub(crate) struct Wishes {
    /// Resource and what it saves, item after item.
    places: Vec<(u32, u64)>,
    of: Vec<(u32, u32)>,
    /// Per item what a resource costs on which none of its pieces was.
    elsewhere: Vec<u64>,
}

impl Wishes {
    /// The wishes that follow from one plan, or from one that counts first and one that
    /// counts second. A piece that a plan does not have has no wish by that plan.
    pub(crate) fn of(problem: &Problem, first: Option<&Places>, second: &Places) -> Wishes {
        let plans: Vec<(u64, &Places)> = match first {
            Some(first) => vec![(FIRST, first), (1, second)],
            None => vec![(1, second)],
        };
        let mut wishes = Wishes::default();
        for item in 0..problem.items.len() {
            let from = wishes.places.len();
            let mut elsewhere = 0;
            for piece in problem.pieces(item) {
                for (cost, plan) in &plans {
                    let Some((place, _)) = plan.0[piece] else {
                        continue;
                    };
                    elsewhere += cost;
                    // Where it was is no more, or not any more for it: elsewhere in any case.
                    if place == NONE || !problem.allows(item, place as usize) {
                        continue;
                    }
                    let known = wishes.places[from..].iter_mut().find(|(r, _)| *r == place);
                    match known {
                        Some((_, saves)) => *saves += cost,
                        None => wishes.places.push((place, *cost)),
                    }
                }
            }
            wishes.of.push((from as u32, wishes.places.len() as u32));
            wishes.elsewhere.push(elsewhere);
        }
        wishes
    }

    /// The resources on which pieces of the item were and may be, with what each saves.
    pub(crate) fn places(&self, item: usize) -> &[(u32, u64)] {
        let (from, to) = self.of[item];
        &self.places[from as usize..to as usize]
    }

    /// What the item costs on a resource.
    pub(crate) fn cost(&self, item: usize, resource: u32) -> u64 {
        let places = self.places(item);
        let saves = places.iter().find(|(r, _)| *r == resource);
        self.elsewhere[item] - saves.map_or(0, |(_, saves)| *saves)
    }

    /// What the item costs where none of its pieces was.
    pub(crate) fn elsewhere(&self, item: usize) -> u64 {
        self.elsewhere[item]
    }

    /// Where the item costs least, if it has any wish that can be met.
    pub(crate) fn home(&self, item: usize) -> Option<u32> {
        let places = self.places(item).iter();
        places
            .max_by_key(|(r, saves)| (*saves, std::cmp::Reverse(*r)))
            .map(|(r, _)| *r)
    }

    /// The least the item can cost.
    pub(crate) fn least(&self, item: usize) -> u64 {
        let most = self.places(item).iter().map(|(_, saves)| *saves).max();
        self.elsewhere[item] - most.unwrap_or(0)
    }

    /// What a plan costs; what has no place costs nothing.
    pub(crate) fn total(&self, on: &[u32]) -> u64 {
        let placed = on.iter().enumerate().filter(|(_, r)| **r != NONE);
        placed.map(|(item, r)| self.cost(item, *r)).sum()
    }
}
