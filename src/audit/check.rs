//! The checks themselves. Who may use what is worked out here once more, plainly, rather
//! than taken from the code that the engine uses.

use super::{Receipt, Refusal, cases, changes};
use crate::claim::{Answer, FloorProof, HallViolation, OutPrices, Plan};
use crate::clock::{Instant, Span};
use crate::lookup::{FastMap, FastSet};
use crate::timetable::{Piece, Resource, Timetable};
use std::collections::HashMap;
use std::sync::Arc;

/// Checks a whole answer: the plan, the floor, the violations.
///
/// # Errors
/// Every reason to refuse it.
pub fn check(timetable: &Timetable, answer: &Answer) -> Result<Receipt, Vec<Refusal>> {
    let facts = Facts::of(timetable, &answer.stays);
    let mut refusals = Vec::new();
    let in_use = plan(&facts, &answer.plan, &mut refusals);
    let floor = floor(&facts, &answer.floor, &mut refusals);
    let before = refusals.len();
    pairwise(&facts, &answer.clique, &mut refusals);
    let clique = match refusals.len() > before {
        true => 0,
        false => answer.clique.len(),
    };
    let by_halls = violations(&facts, &answer.violations, &mut refusals);
    let by_prices = answer
        .out
        .as_ref()
        .map_or(0, |claimed| out(&facts, claimed, &mut refusals));
    let mut unplaced_floor = by_halls.max(by_prices);
    if floor > timetable.resources().all.len() {
        // Not everything fits, so something stays out: at least the lightest.
        let counted = facts.all.iter().filter(|piece| !piece.withdrawn);
        let lightest = counted.map(|piece| facts.weight(facts.item(piece))).min();
        unplaced_floor = unplaced_floor.max(lightest.unwrap_or(0));
    }
    if !refusals.is_empty() {
        return Err(refusals);
    }
    let weights = answer
        .plan
        .unplaced
        .iter()
        .filter_map(|unplaced| facts.piece(&unplaced.piece));
    let unplaced_weight = weights.map(|piece| u64::from(piece.request.weight)).sum();
    let changes = answer.changes.as_ref().map(|claimed| {
        changes::check(
            &facts,
            &answer.plan,
            claimed,
            (in_use, unplaced_weight),
            &mut refusals,
        )
    });
    if !refusals.is_empty() {
        return Err(refusals);
    }
    Ok(Receipt {
        in_use,
        floor,
        clique,
        unplaced: answer.plan.unplaced.len(),
        unplaced_weight,
        changes,
        unplaced_floor,
        available: timetable.resources().all.len(),
    })
}

/// Checks a plan alone and counts the distinct resources in it.
///
/// # Errors
/// Every reason to refuse it.
pub fn check_plan(timetable: &Timetable, claimed: &Plan) -> Result<usize, Vec<Refusal>> {
    let mut refusals = Vec::new();
    let in_use = plan(
        &Facts::of(timetable, &HashMap::new()),
        claimed,
        &mut refusals,
    );
    if refusals.is_empty() {
        Ok(in_use)
    } else {
        Err(refusals)
    }
}

/// Checks a lower bound alone and gives its value.
///
/// # Errors
/// Every reason to refuse it.
pub fn check_floor(timetable: &Timetable, claimed: &FloorProof) -> Result<usize, Vec<Refusal>> {
    let mut refusals = Vec::new();
    let value = floor(
        &Facts::of(timetable, &HashMap::new()),
        claimed,
        &mut refusals,
    );
    if refusals.is_empty() {
        Ok(value)
    } else {
        Err(refusals)
    }
}

/// Checks Hall violations alone and gives the least weight they leave unplaced.
///
/// # Errors
/// Every reason to refuse one.
pub fn check_violations(
    timetable: &Timetable,
    claimed: &[HallViolation],
) -> Result<u64, Vec<Refusal>> {
    let mut refusals = Vec::new();
    let least = violations(
        &Facts::of(timetable, &HashMap::new()),
        claimed,
        &mut refusals,
    );
    if refusals.is_empty() {
        Ok(least)
    } else {
        Err(refusals)
    }
}

/// The timetable, laid out for looking things up.
pub(super) struct Facts<'a> {
    pub(super) timetable: &'a Timetable,
    all: Vec<Piece>,
    places: FastMap<Arc<str>, usize>,
    /// The pieces that stay together, request by request, and which request is where.
    together: Vec<Vec<usize>>,
    joined: FastMap<Arc<str>, usize>,
    /// The resources each item of several pieces may use, once anybody has asked.
    shared: Vec<std::cell::OnceCell<Vec<usize>>>,
    /// Resources by their own names and by those of their kinds, for looking up `only`.
    meant: FastMap<&'a str, Vec<usize>>,
    /// Seconds kept free before and after, when that is the same everywhere.
    uniform: Option<(i64, i64)>,
}

impl<'a> Facts<'a> {
    /// What has begun stays where `stays` says, as if it were pinned there.
    fn of(timetable: &'a Timetable, stays: &HashMap<Arc<str>, Arc<str>>) -> Facts<'a> {
        let mut all = timetable.pieces();
        if !stays.is_empty() {
            let begun = all
                .iter_mut()
                .filter(|piece| piece.begun(&timetable.settings));
            for piece in begun.filter(|piece| piece.pin.is_none()) {
                piece.pin = stays.get(&piece.id).cloned();
            }
        }
        let places = all
            .iter()
            .enumerate()
            .map(|(at, piece)| (Arc::clone(&piece.id), at))
            .collect();
        // Most pieces are alone: only what stays together is listed.
        let mut together: Vec<Vec<usize>> = Vec::new();
        let mut joined: FastMap<Arc<str>, usize> = FastMap::default();
        for (at, piece) in all.iter().enumerate() {
            let request = &piece.request;
            if request.together && request.repeats.is_some() && !piece.withdrawn {
                let group = *joined.entry(Arc::clone(&request.id)).or_insert_with(|| {
                    together.push(Vec::new());
                    together.len() - 1
                });
                together[group].push(at);
            }
        }
        let resources = &timetable.resources().all;
        let mut meant: FastMap<&str, Vec<usize>> = FastMap::default();
        for (at, resource) in resources.iter().enumerate() {
            for name in resource.kind.iter().chain([&resource.id]) {
                meant.entry(name).or_default().push(at);
            }
        }
        let own = (timetable.settings.setup, timetable.settings.turnaround);
        let uniform = resources.iter().all(|r| (r.setup, r.turnaround) == own);
        Facts {
            timetable,
            shared: vec![std::cell::OnceCell::new(); together.len()],
            together,
            joined,
            all,
            places,
            meant,
            uniform: uniform.then_some(own),
        }
    }

    fn piece(&self, id: &str) -> Option<&Piece> {
        self.places.get(id).map(|at| &self.all[*at])
    }

    /// The item of a piece: a number that only what stays together shares.
    pub(super) fn item(&self, piece: &Piece) -> usize {
        let group = match piece.request.together && !piece.withdrawn {
            true => self.joined.get(&piece.request.id),
            false => None,
        };
        match group {
            Some(group) => self.all.len() + group,
            None => self.places.get(&piece.id).copied().unwrap_or(usize::MAX),
        }
    }

    /// The pieces of an item.
    pub(super) fn of_item(&self, item: usize) -> impl Iterator<Item = &Piece> {
        let (one, several) = match item.checked_sub(self.all.len()) {
            None => (self.all.get(item), None),
            Some(group) => (None, self.together.get(group)),
        };
        let several = several.into_iter().flatten().map(|at| &self.all[*at]);
        one.into_iter().chain(several)
    }

    /// How much it hurts to leave an item out.
    pub(super) fn weight(&self, item: usize) -> u64 {
        self.of_item(item)
            .map(|piece| u64::from(piece.request.weight))
            .sum()
    }

    fn counted(&self, id: &Arc<str>) -> Result<&Piece, Refusal> {
        self.piece(id)
            .filter(|piece| !piece.withdrawn)
            .ok_or_else(|| Refusal::BoundCounts(Arc::clone(id)))
    }

    /// Seconds before and after that the piece keeps free on the resource.
    fn buffers(piece: &Piece, resource: &Resource) -> (i64, i64) {
        let request = &piece.request;
        (
            request.setup.map_or(resource.setup, |own| own),
            request.turnaround.map_or(resource.turnaround, |own| own),
        )
    }

    pub(super) fn occupied(piece: &Piece, resource: &Resource) -> Span {
        let (before, after) = Facts::buffers(piece, resource);
        Span {
            start: piece.span.start - before,
            end: piece.span.end + after,
        }
    }

    /// Why the resource may not take the piece, if it may not.
    fn against(piece: &Piece, resource: &Resource) -> Option<&'static str> {
        let request = &piece.request;
        let here = |name: &Arc<str>| *name == resource.id || Some(name) == resource.kind.as_ref();
        if piece.pin.as_ref().is_some_and(|pin| *pin != resource.id) {
            return Some("it is pinned elsewhere");
        }
        let listed = request.only.is_empty() || request.only.iter().any(here);
        let unlisted = || (!listed).then_some("it is not among those allowed");
        Facts::against_meant(piece, resource).or_else(unlisted)
    }

    /// The same for a resource that is meant by what the piece may only use.
    fn against_meant(piece: &Piece, resource: &Resource) -> Option<&'static str> {
        let request = &piece.request;
        let here = |name: &Arc<str>| *name == resource.id || Some(name) == resource.kind.as_ref();
        if resource
            .seats
            .is_some_and(|seats| piece.size.unwrap_or(0) > seats)
        {
            return Some("it is too small");
        }
        if request
            .needs
            .iter()
            .any(|need| !resource.offers.contains(need))
        {
            return Some("it lacks something needed");
        }
        if request.never.iter().any(here) {
            return Some("it is ruled out");
        }
        let span = Facts::occupied(piece, resource);
        if resource
            .hours
            .closed()
            .iter()
            .any(|closure| closure.span.overlaps(span))
        {
            return Some("it is closed then");
        }
        if !resource.hours.open_through(span) {
            return Some("it is not open then");
        }
        None
    }

    /// The piece's span with its least buffers.
    fn core(&self, piece: &Piece) -> Span {
        match self.uniform {
            // Then it does not matter which resources the piece may use.
            Some((before, after)) => piece.span.widened(
                piece.request.setup.unwrap_or(before),
                piece.request.turnaround.unwrap_or(after),
            ),
            None => self.least(piece).0,
        }
    }

    /// The resources that everything the piece stays together with may use, at all of its
    /// times, by their places in the list.
    pub(super) fn usable(&self, piece: &Piece) -> Vec<usize> {
        let item = self.item(piece);
        let group = item.checked_sub(self.all.len());
        let Some(group) =
            group.filter(|group| self.together.get(*group).is_some_and(|p| p.len() > 1))
        else {
            return self.usable_alone(piece);
        };
        let work_out = || {
            let resources = &self.timetable.resources().all;
            let mut pieces = self.of_item(item);
            let mut usable = pieces
                .next()
                .map_or_else(Vec::new, |first| self.usable_alone(first));
            for piece in pieces {
                usable.retain(|at| Facts::against(piece, &resources[*at]).is_none());
            }
            usable.retain(|at| {
                let spans = self
                    .of_item(item)
                    .map(|p| Facts::occupied(p, &resources[*at]));
                let mut spans: Vec<Span> = spans.collect();
                spans.sort_unstable();
                spans.windows(2).all(|pair| pair[0].end <= pair[1].start)
            });
            usable
        };
        self.shared[group].get_or_init(work_out).clone()
    }

    fn usable_alone(&self, piece: &Piece) -> Vec<usize> {
        let resources = &self.timetable.resources().all;
        let usable: Vec<usize> = match &piece.pin {
            Some(pin) => self
                .timetable
                .resources()
                .position(pin)
                .into_iter()
                .collect(),
            None if piece.request.only.is_empty() => (0..resources.len()).collect(),
            None => {
                let names = piece.request.only.iter();
                let mut meant: Vec<usize> = names
                    .filter_map(|name| self.meant.get(&**name))
                    .flatten()
                    .copied()
                    .collect();
                meant.sort_unstable();
                meant.dedup();
                meant
            }
        };
        usable
            .into_iter()
            .filter(|at| match piece.pin {
                Some(_) => Facts::against(piece, &resources[*at]).is_none(),
                None => Facts::against_meant(piece, &resources[*at]).is_none(),
            })
            .collect()
    }

    /// The piece's span with its least buffers over the resources it may use, and those
    /// resources' places in the list.
    pub(super) fn least(&self, piece: &Piece) -> (Span, Vec<usize>) {
        let resources = &self.timetable.resources().all;
        let usable = self.usable(piece);
        let settings = &self.timetable.settings;
        let buffers = usable
            .iter()
            .map(|at| Facts::buffers(piece, &resources[*at]));
        let least = buffers
            .reduce(|a, b| (a.0.min(b.0), a.1.min(b.1)))
            .unwrap_or((
                piece.request.setup.unwrap_or(settings.setup),
                piece.request.turnaround.unwrap_or(settings.turnaround),
            ));
        (piece.span.widened(least.0, least.1), usable)
    }
}

fn plan(facts: &Facts<'_>, plan: &Plan, refusals: &mut Vec<Refusal>) -> usize {
    let resources = facts.timetable.resources();
    let mut seen: FastSet<&str> = FastSet::default();
    seen.reserve(facts.all.len());
    let mut rows: Vec<Vec<(Span, &Arc<str>)>> = vec![Vec::new(); resources.all.len()];
    let named = plan.placements.iter().map(|placement| &placement.piece);
    for id in named.chain(plan.unplaced.iter().map(|unplaced| &unplaced.piece)) {
        match facts.piece(id) {
            None => refusals.push(Refusal::UnknownPiece(Arc::clone(id))),
            Some(piece) if piece.withdrawn => refusals.push(Refusal::Withdrawn(Arc::clone(id))),
            Some(_) => {}
        }
        if !seen.insert(id) {
            refusals.push(Refusal::Twice(Arc::clone(id)));
        }
    }
    for placement in &plan.placements {
        let Some(piece) = facts.piece(&placement.piece) else {
            continue;
        };
        let Some(at) = resources.position(&placement.resource) else {
            refusals.push(Refusal::UnknownResource {
                piece: Arc::clone(&piece.id),
                resource: Arc::clone(&placement.resource),
            });
            continue;
        };
        if placement.span != piece.span {
            refusals.push(Refusal::OtherTime(Arc::clone(&piece.id)));
        }
        if let Some(because) = Facts::against(piece, &resources.all[at]) {
            refusals.push(Refusal::Unfit {
                piece: Arc::clone(&piece.id),
                resource: Arc::clone(&placement.resource),
                because,
            });
        }
        rows[at].push((Facts::occupied(piece, &resources.all[at]), &placement.piece));
    }
    let mut in_use = 0;
    for (row, resource) in rows.iter_mut().zip(&resources.all) {
        in_use += usize::from(!row.is_empty());
        row.sort_unstable();
        // The span that reaches furthest so far: a long one can overlap more than the next.
        let mut furthest: Option<(Span, &Arc<str>)> = None;
        for (span, piece) in row.iter() {
            if let Some((_, first)) = furthest.filter(|(before, _)| before.end > span.start) {
                refusals.push(Refusal::DoubleBooked {
                    resource: Arc::clone(&resource.id),
                    first: Arc::clone(first),
                    second: Arc::clone(piece),
                });
            }
            if furthest.is_none_or(|(before, _)| before.end < span.end) {
                furthest = Some((*span, piece));
            }
        }
    }
    for piece in facts.all.iter().filter(|piece| !piece.withdrawn) {
        if !seen.contains(&*piece.id) {
            refusals.push(Refusal::Forgotten(Arc::clone(&piece.id)));
        }
    }
    together(facts, plan, refusals);
    in_use
}

/// What stays together is on one resource, or has no place as a whole.
fn together(facts: &Facts<'_>, plan: &Plan, refusals: &mut Vec<Refusal>) {
    if facts.together.is_empty() {
        return;
    }
    let placed = plan.placements.iter();
    let on: FastMap<&str, &Arc<str>> = placed.map(|p| (&*p.piece, &p.resource)).collect();
    for pieces in &facts.together {
        let first = &facts.all[pieces[0]].id;
        for other in &pieces[1..] {
            let other = &facts.all[*other].id;
            if on.get(&**first) != on.get(&**other) {
                refusals.push(Refusal::Apart {
                    first: Arc::clone(first),
                    second: Arc::clone(other),
                });
            }
        }
    }
}

/// The pieces a bound names, once each, none unknown or withdrawn.
pub(super) fn named<'a>(
    facts: &'a Facts<'_>,
    ids: &[Arc<str>],
    refusals: &mut Vec<Refusal>,
) -> Vec<&'a Piece> {
    let mut seen = FastSet::default();
    let mut pieces = Vec::with_capacity(ids.len());
    for id in ids {
        if !seen.insert(id) {
            refusals.push(Refusal::BoundTwice(Arc::clone(id)));
        }
        match facts.counted(id) {
            Ok(piece) => pieces.push(piece),
            Err(refusal) => refusals.push(refusal),
        }
    }
    pieces
}

fn floor(facts: &Facts<'_>, floor: &FloorProof, refusals: &mut Vec<Refusal>) -> usize {
    let before = refusals.len();
    match floor {
        FloorProof::Prices {
            unit,
            prices: priced,
            value,
        } => prices(facts, *unit, priced, *value, refusals),
        FloorProof::Cases { value, tree } => {
            let spoken = named(facts, &floor.pieces(), refusals);
            if refusals.len() == before {
                cases::replay(facts, *value, &spoken, tree, refusals);
            }
        }
        FloorProof::Clique { at: None, pieces } => pairwise(facts, pieces, refusals),
        FloorProof::Clique {
            at: Some(at),
            pieces,
        } => {
            for piece in named(facts, pieces, refusals) {
                if !facts.core(piece).contains(*at) {
                    refusals.push(Refusal::NotRunning(Arc::clone(&piece.id)));
                }
            }
        }
        FloorProof::Incompatible { pieces } => {
            let members: Vec<(&Piece, Vec<usize>)> = named(facts, pieces, refusals)
                .into_iter()
                .map(|piece| (piece, facts.usable(piece)))
                .collect();
            once_each(facts, &members, refusals);
            for (at, (first, one)) in members.iter().enumerate() {
                for (second, two) in &members[..at] {
                    apart(facts, (first, one), (second, two), refusals);
                }
            }
        }
    }
    if refusals.len() > before {
        return 0;
    }
    floor.value()
}

/// Says that a piece counts twice, once.
fn twice(piece: &Piece, refusals: &mut Vec<Refusal>) {
    let refusal = Refusal::BoundTwice(Arc::clone(&piece.id));
    if !refusals.contains(&refusal) {
        refusals.push(refusal);
    }
}

/// Refuses where two pieces stay together: they count as one.
fn once_each<T>(facts: &Facts<'_>, members: &[(&Piece, T)], refusals: &mut Vec<Refusal>) {
    let mut seen = FastSet::default();
    for (piece, _) in members {
        if !seen.insert(facts.item(piece)) {
            twice(piece, refusals);
        }
    }
}

/// Checks that of these pieces, and what they stay together with, any two overlap.
fn pairwise(facts: &Facts<'_>, ids: &[Arc<str>], refusals: &mut Vec<Refusal>) {
    let members: Vec<(&Piece, Vec<Span>)> = named(facts, ids, refusals)
        .into_iter()
        .map(|piece| {
            let item = facts.of_item(facts.item(piece));
            (piece, item.map(|piece| facts.core(piece)).collect())
        })
        .collect();
    once_each(facts, &members, refusals);
    for (at, (first, one)) in members.iter().enumerate() {
        for (second, two) in &members[..at] {
            let meet = |span: &Span| two.iter().any(|other| other.overlaps(*span));
            if !one.iter().any(meet) {
                refusals.push(Refusal::NeverMeet {
                    first: Arc::clone(&first.id),
                    second: Arc::clone(&second.id),
                });
            }
        }
    }
}

/// Recounts a floor by prices with whole numbers: the dearest chain of each resource by a
/// sweep over ends.
fn prices(
    facts: &Facts<'_>,
    unit: i64,
    priced: &[(Arc<str>, i64)],
    claimed: usize,
    refusals: &mut Vec<Refusal>,
) {
    let ids: Vec<Arc<str>> = priced.iter().map(|(id, _)| Arc::clone(id)).collect();
    let pieces = named(facts, &ids, refusals);
    let fits = |price: &i64| (1..=MOST_PRICE).contains(price);
    if !fits(&unit) || !priced.iter().all(|(_, price)| fits(price)) || ids.len() != pieces.len() {
        refusals.push(Refusal::BadPrices);
        return;
    }
    let value = beyond(facts, &pieces, priced, unit);
    let unit = i128::from(unit);
    let proved = usize::try_from((value.max(0) + unit - 1) / unit).unwrap_or(usize::MAX);
    if proved < claimed {
        refusals.push(Refusal::OtherFloor { claimed, proved });
    }
}

/// What pieces cost together, less what each resource could take at best beyond its own
/// `cost`.
fn beyond(facts: &Facts<'_>, pieces: &[&Piece], priced: &[(Arc<str>, i64)], cost: i64) -> i128 {
    let all = &facts.timetable.resources().all;
    let mut chains: Vec<Vec<(Span, i64)>> = vec![Vec::new(); all.len()];
    for (piece, (_, price)) in pieces.iter().zip(priced) {
        for at in facts.usable(piece) {
            chains[at].push((Facts::occupied(piece, &all[at]), *price));
        }
    }
    let together: i128 = priced.iter().map(|(_, price)| i128::from(*price)).sum();
    let taken = chains.iter_mut().map(|chain| dearest(chain) - cost);
    together - taken.map(|taken| i128::from(taken.max(0))).sum::<i128>()
}

/// Recounts prices that say how much stays out.
fn out(facts: &Facts<'_>, claimed: &OutPrices, refusals: &mut Vec<Refusal>) -> u64 {
    let ids: Vec<Arc<str>> = claimed
        .prices
        .iter()
        .map(|(id, _)| Arc::clone(id))
        .collect();
    let pieces = named(facts, &ids, refusals);
    let fits = |price: &i64| (1..=MOST_PRICE).contains(price);
    // What stays together may share its price out among its pieces.
    let mut by_item: FastMap<usize, i128> = FastMap::default();
    for (piece, (_, price)) in pieces.iter().zip(&claimed.prices) {
        *by_item.entry(facts.item(piece)).or_default() += i128::from(*price);
    }
    let dear = by_item
        .iter()
        .any(|(item, price)| *price > i128::from(claimed.unit) * i128::from(facts.weight(*item)));
    let whole = fits(&claimed.unit) && claimed.prices.iter().all(|(_, price)| fits(price));
    if !whole || dear || ids.len() != pieces.len() {
        refusals.push(Refusal::BadPrices);
        return 0;
    }
    let value = beyond(facts, &pieces, &claimed.prices, 0);
    let unit = i128::from(claimed.unit);
    let proved = u64::try_from((value.max(0) + unit - 1) / unit).unwrap_or(u64::MAX);
    if proved < claimed.weight {
        refusals.push(Refusal::OtherWeight {
            claimed: claimed.weight,
            proved,
        });
    }
    claimed.weight
}

/// No single price may be above this, so that sums stay far from overflow.
pub(super) const MOST_PRICE: i64 = 1 << 40;

/// The most that spans which do not overlap are worth together.
pub(super) fn dearest(chain: &mut [(Span, i64)]) -> i64 {
    chain.sort_unstable_by_key(|(span, _)| span.end);
    let mut best = vec![0i64];
    for (at, (span, price)) in chain.iter().enumerate() {
        let before = chain[..at].partition_point(|(other, _)| other.end <= span.start);
        best.push(best[at].max(best[before] + price));
    }
    best[chain.len()]
}

/// Refuses when some resource could take both pieces.
fn apart(
    facts: &Facts<'_>,
    (first, one): (&Piece, &[usize]),
    (second, two): (&Piece, &[usize]),
    refusals: &mut Vec<Refusal>,
) {
    let all = &facts.timetable.resources().all;
    let both = one
        .iter()
        .filter(|at| two.binary_search(at).is_ok())
        .find(|at| {
            let resource = &all[**at];
            let clear = |piece: &Piece| {
                let span = Facts::occupied(piece, resource);
                let mut others = facts.of_item(facts.item(second));
                others.all(|other| !Facts::occupied(other, resource).overlaps(span))
            };
            facts.of_item(facts.item(first)).all(clear)
        });
    if let Some(at) = both {
        refusals.push(Refusal::CanShare {
            first: Arc::clone(&first.id),
            second: Arc::clone(&second.id),
            resource: Arc::clone(&all[*at].id),
        });
    }
}

fn running(
    facts: &Facts<'_>,
    piece: &Piece,
    at: Instant,
    refusals: &mut Vec<Refusal>,
) -> Vec<usize> {
    let (span, usable) = facts.least(piece);
    if !span.contains(at) {
        refusals.push(Refusal::NotRunning(Arc::clone(&piece.id)));
    }
    usable
}

fn violations(facts: &Facts<'_>, claimed: &[HallViolation], refusals: &mut Vec<Refusal>) -> u64 {
    let resources = facts.timetable.resources();
    let mut seen: FastSet<usize> = FastSet::default();
    let mut least = 0;
    for violation in claimed {
        let stated: FastSet<&str> = violation.resources.iter().map(|id| &**id).collect();
        let mut weights = Vec::new();
        for piece in named(facts, &violation.pieces, refusals) {
            let item = facts.item(piece);
            if !seen.insert(item) {
                twice(piece, refusals);
            }
            weights.push(facts.weight(item));
            for at in running(facts, piece, violation.at, refusals) {
                if !stated.contains(&*resources.all[at].id) {
                    refusals.push(Refusal::LeftOut {
                        piece: Arc::clone(&piece.id),
                        resource: Arc::clone(&resources.all[at].id),
                    });
                }
            }
        }
        if weights.len() <= stated.len() {
            refusals.push(Refusal::NoShortage);
            continue;
        }
        weights.sort_unstable();
        least += weights[..weights.len() - stated.len()].iter().sum::<u64>();
    }
    least
}
