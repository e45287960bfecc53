//! Where everything was before, and what it costs to put it elsewhere.

use crate::claim::Plan;
use crate::engine::Problem;
use crate::lookup::FastMap;
use crate::timetable::Timetable;

/// What a relocation against the plan that counts first costs, in relocations against the
/// plan that counts second.
pub(crate) const FIRST: u64 = 1 << 20;

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
    pub(crate) fn of(
        problem: &Problem,
        timetable: &Timetable,
        first: Option<&Plan>,
        second: &Plan,
    ) -> Wishes {
        let resources = timetable.resources();
        /// Per piece the place of its resource, if there still is one.
        type Places = FastMap<Box<str>, Option<usize>>;
        let on = |plan: &Plan| -> Places {
            let placements = plan.placements.iter();
            placements
                .map(|p| (Box::from(&*p.piece), resources.position(&p.resource)))
                .collect()
        };
        let plans: Vec<(u64, Places)> = match first {
            Some(first) => vec![(FIRST, on(first)), (1, on(second))],
            None => vec![(1, on(second))],
        };
        let mut wishes = Wishes::default();
        for item in 0..problem.items.len() {
            let from = wishes.places.len();
            let mut elsewhere = 0;
            for piece in problem.pieces(item) {
                for (cost, plan) in &plans {
                    let Some(place) = plan.get(&*problem.ids[piece]) else {
                        continue;
                    };
                    elsewhere += cost;
                    // Where it was is no more, or not any more for it: elsewhere in any case.
                    if let Some(place) = place.filter(|place| problem.allows(item, *place)) {
                        let known = wishes.places[from..]
                            .iter_mut()
                            .find(|(r, _)| *r == place as u32);
                        match known {
                            Some((_, saves)) => *saves += cost,
                            None => wishes.places.push((place as u32, *cost)),
                        }
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
        let placed = on
            .iter()
            .enumerate()
            .filter(|(_, r)| **r != crate::engine::plans::NONE);
        placed.map(|(item, r)| self.cost(item, *r)).sum()
    }
}
