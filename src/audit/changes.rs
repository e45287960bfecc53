//! Counts what relocates against an earlier plan, and recounts a bound on it.

use super::check::{Facts, named};
use super::receipt::Changed;
use super::{MOST_PRICE, Refusal};
use crate::claim::{Changes, ChangesProof, Plan};
use crate::clock::Span;
use crate::lookup::{FastMap, FastSet};
use crate::timetable::Piece;
use std::cell::OnceCell;
use std::sync::Arc;

/// Checks the claim; `plan` uses so many resources and leaves out so much weight.
pub(super) fn check(
    facts: &Facts<'_>,
    plan: &Plan,
    claimed: &Changes,
    (in_use, left_out): (usize, u64),
    refusals: &mut Vec<Refusal>,
) -> Changed {
    let since = &claimed.since.placements;
    let before = OnceCell::<FastMap<&str, &str>>::new();
    let elsewhere = |piece: &str, resource: &str| {
        let before =
            before.get_or_init(|| since.iter().map(|p| (&*p.piece, &*p.resource)).collect());
        before.get(piece).is_some_and(|r| *r != resource)
    };
    // As a rule both list the same pieces in the same order.
    let pairs = || plan.placements.iter().zip(since);
    let alike = plan.placements.len() == since.len() && pairs().all(|(p, q)| p.piece == q.piece);
    let relocated = match alike {
        true => pairs().filter(|(p, q)| p.resource != q.resource).count(),
        false => {
            let placed = plan.placements.iter();
            placed.filter(|p| elsewhere(&p.piece, &p.resource)).count()
        }
    };
    let mut floor = 0;
    if let Some(proof) = &claimed.proof {
        if proof.limit < in_use {
            refusals.push(Refusal::OtherLimit {
                in_use,
                limit: proof.limit,
            });
        }
        let proved = proved(facts, proof, &elsewhere, left_out, refusals);
        if proved < proof.value {
            refusals.push(Refusal::OtherChanges {
                claimed: proof.value,
                proved,
            });
        }
        floor = proof.value;
    }
    Changed { relocated, floor }
}

/// How many relocations the prices prove.
fn proved(
    facts: &Facts<'_>,
    proof: &ChangesProof,
    elsewhere: &dyn Fn(&str, &str) -> bool,
    left_out: u64,
    refusals: &mut Vec<Refusal>,
) -> usize {
    let ids: Vec<Arc<str>> = proof.prices.iter().map(|(id, _)| Arc::clone(id)).collect();
    let pieces = named(facts, &ids, refusals);
    let fits = |price: &i64| (1..=MOST_PRICE).contains(price);
    let whole = fits(&proof.unit) && proof.prices.iter().all(|(_, price)| fits(price));
    if !whole || pieces.len() != ids.len() {
        refusals.push(Refusal::BadPrices);
        return 0;
    }
    let all = &facts.timetable.resources().all;
    let mut chains: Vec<Vec<(Span, i128)>> = vec![Vec::new(); all.len()];
    // All relocations of what stays together are paid with the first of its priced pieces.
    let mut paid: FastSet<usize> = FastSet::default();
    let mut by_item: FastMap<usize, i128> = FastMap::default();
    for (piece, (_, price)) in pieces.iter().zip(&proof.prices) {
        let item = facts.item(piece);
        let first = paid.insert(item);
        *by_item.entry(item).or_default() += i128::from(*price);
        for at in facts.usable(piece) {
            let resource = &all[at];
            let cost = match first {
                true => facts
                    .of_item(item)
                    .filter(|p: &&Piece| elsewhere(&p.id, &resource.id))
                    .count(),
                false => 0,
            };
            let worth = i128::from(*price) - i128::from(proof.unit) * cost as i128;
            chains[at].push((Facts::occupied(piece, resource), worth));
        }
    }
    let together: i128 = proof
        .prices
        .iter()
        .map(|(_, price)| i128::from(*price))
        .sum();
    let mut worths: Vec<i128> = chains.iter_mut().map(|chain| dearest(chain)).collect();
    worths.sort_unstable_by_key(|worth| std::cmp::Reverse(*worth));
    let taken: i128 = worths.iter().take(proof.limit).sum();
    let items = by_item.into_iter();
    let saved = most_saved(
        items.map(|(item, price)| (price, facts.weight(item))),
        left_out,
    );
    let unit = i128::from(proof.unit);
    let value = (together - taken - saved).max(0);
    usize::try_from((value + unit - 1) / unit).unwrap_or(usize::MAX)
}

/// The most that spans which do not overlap are worth together, leaving out what is worth
/// less than nothing.
fn dearest(chain: &mut [(Span, i128)]) -> i128 {
    chain.sort_unstable_by_key(|(span, _)| span.end);
    let mut best = vec![0i128];
    for (at, (span, worth)) in chain.iter().enumerate() {
        let before = chain[..at].partition_point(|(other, _)| other.end <= span.start);
        best.push(best[at].max(best[before] + worth));
    }
    best[chain.len()]
}

/// At most what leaving out so much weight saves: the dearest for their weight, the last one
/// in part (Dantzig 1957), rounded up.
fn most_saved(items: impl Iterator<Item = (i128, u64)>, left_out: u64) -> i128 {
    let mut items: Vec<(i128, i128)> = items
        .map(|(price, weight)| (price, i128::from(weight.max(1))))
        .collect();
    items.sort_by(|a, b| (b.0 * a.1).cmp(&(a.0 * b.1)));
    let (mut left, mut saved) = (i128::from(left_out), 0);
    for (price, weight) in items {
        if weight > left {
            return saved + (price * left + weight - 1) / weight;
        }
        saved += price;
        left -= weight;
    }
    saved
}
