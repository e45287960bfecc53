//! Fewest changes against exact answers that the program did not compute: brute force on
//! tiny cases, and an integer programme solved by the microlp library on small ones.

use crate::optimum::{Tiny, tiny, tiny_together};
use crate::tools::timetable;
use fewest::claim::Plan;
use fewest::desk::{Job, Settled};
use fewest::engine::{Budget, Never};
use fewest::timetable::Timetable;
use proptest::prelude::*;
use std::collections::HashMap;
use std::sync::Arc;

/// Solves with a plan that stood before.
fn solve_from(
    timetable: &Timetable,
    before: &Arc<Plan>,
    issued: Option<&Arc<Plan>>,
) -> Arc<Settled> {
    let job = Job {
        generation: 0,
        timetable: timetable.clone(),
        reference: Some(Arc::clone(before)),
        issued: issued.cloned(),
        floor: None,
        begun: Arc::default(),
    };
    let budget = Budget {
        steps: Some(20_000),
        ..Budget::default()
    };
    job.run(budget, &Never, &mut |_| {}).unwrap()
}

/// Per request, the room of each of its pieces before.
fn before_of(tiny: &Tiny, plan: &Plan) -> Vec<Vec<usize>> {
    let rooms: HashMap<&str, usize> = plan
        .placements
        .iter()
        .map(|p| (&*p.piece, p.resource[5..].parse().unwrap()))
        .collect();
    let mut pieces = tiny.pieces().into_iter();
    (0..tiny.requests.len())
        .map(|request| {
            let own = pieces.by_ref().take(tiny.starts(request).count());
            own.filter_map(|piece| rooms.get(&*piece).copied())
                .collect()
        })
        .collect()
}

/// Everything that can be done: weight left out, rooms in use, relocations.
fn all_plans(tiny: &Tiny, before: &[Vec<usize>], each: &mut dyn FnMut((u64, usize, usize))) {
    fn go(
        tiny: &Tiny,
        before: &[Vec<usize>],
        on: &mut Vec<Option<usize>>,
        each: &mut dyn FnMut((u64, usize, usize)),
    ) {
        let at = on.len();
        if at == tiny.requests.len() {
            let rooms: std::collections::BTreeSet<usize> = on.iter().flatten().copied().collect();
            let out = (0..at)
                .filter(|r| on[*r].is_none())
                .map(|r| tiny.weight(r))
                .sum();
            let moved = |r: usize| {
                let was = before[r].iter();
                was.filter(|was| on[r].is_some_and(|on| on != **was))
                    .count()
            };
            each((out, rooms.len(), (0..at).map(moved).sum()));
            return;
        }
        for room in 0..tiny.rooms.len() {
            let free =
                (0..at).all(|other| on[other] != Some(room) || !tiny.collide(other, at, room));
            if tiny.usable(at, room) && free {
                on.push(Some(room));
                go(tiny, before, on, each);
                on.pop();
            }
        }
        on.push(None);
        go(tiny, before, on, each);
        on.pop();
    }
    go(tiny, before, &mut Vec::new(), each);
}

/// What may happen to a timetable.
#[derive(Clone, Debug)]
enum Event {
    Moves(usize, i64),
    Pinned(usize, usize),
    Closed(usize, i64),
    Grows(usize),
}

fn after(tiny: &Tiny, event: &Event) -> Tiny {
    let mut tiny = tiny.clone();
    let count = tiny.requests.len().max(1);
    let rooms = tiny.rooms.len();
    match event {
        Event::Closed(room, from) => tiny.closed = Some((room % rooms, *from, from + 60)),
        _ if tiny.requests.is_empty() => {}
        Event::Moves(r, to) => {
            let r = r % count;
            tiny.requests[r].0 = *to;
            if let Some(again) = tiny.again.get_mut(r) {
                again.take_if(|again| *again <= *to);
            }
        }
        Event::Pinned(r, room) => tiny.requests[r % count].4 = Some(room % rooms),
        Event::Grows(r) => tiny.requests[r % count].2 += 1,
    }
    tiny
}

fn event() -> impl Strategy<Value = Event> {
    prop_oneof![
        (0usize..8, (0i64..24).prop_map(|x| x * 10)).prop_map(|(r, to)| Event::Moves(r, to)),
        (0usize..8, 0usize..4).prop_map(|(r, room)| Event::Pinned(r, room)),
        (0usize..4, (0i64..18).prop_map(|x| x * 10))
            .prop_map(|(room, from)| Event::Closed(room, from)),
        (0usize..8).prop_map(Event::Grows),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]
    /// Of the plans that leave out the least and use the fewest rooms, the one found changes
    /// the fewest placements, and nothing higher is ever proved; the same with the two aims
    /// the other way round.
    #[test]
    fn agrees_with_brute_force(
        tiny in prop_oneof![tiny(), tiny_together()],
        event in event(),
        first in any::<bool>(),
    ) {
        let before = crate::tools::solve(&timetable(&tiny.text()), 20_000);
        let before = Arc::new(before.answer().plan.clone());
        let mut now = after(&tiny, &event);
        now.changes_first = first;
        let was = before_of(&now, &before);
        let settled = solve_from(&timetable(&now.text()), &before, None);
        let receipt = settled.receipt();
        let changed = receipt.changes().unwrap();
        let mut best = (u64::MAX, usize::MAX, usize::MAX);
        let mut fewest = usize::MAX;
        let key = |(out, rooms, moved): (u64, usize, usize)| match first {
            true => (out, moved, rooms),
            false => (out, rooms, moved),
        };
        all_plans(&now, &was, &mut |plan| {
            best = best.min(key(plan));
            if plan.0 <= receipt.unplaced_weight() && (first || plan.1 <= receipt.in_use()) {
                fewest = fewest.min(plan.2);
            }
        });
        let found = (receipt.unplaced_weight(), receipt.in_use(), changed.relocated());
        prop_assert!(changed.floor() <= fewest, "{found:?} {fewest}");
        if best.0 == 0 {
            prop_assert_eq!(key(found), best);
        }
        // What the other choice comes to can be had.
        if let Some((rooms, moved)) = settled.answer().changes.as_ref().unwrap().other {
            let mut there = false;
            all_plans(&now, &was, &mut |plan| there |= plan == (receipt.unplaced_weight(), rooms, moved));
            prop_assert!(there);
        }
    }

    /// Against the plan handed out first, and only then against the one that stood before.
    #[test]
    fn the_plan_handed_out_counts_first(tiny in tiny(), one in event(), two in event()) {
        let issued = crate::tools::solve(&timetable(&tiny.text()), 20_000);
        let issued = Arc::new(issued.answer().plan.clone());
        let middle = after(&tiny, &one);
        let before = solve_from(&timetable(&middle.text()), &issued, Some(&issued));
        let before = Arc::new(before.answer().plan.clone());
        let now = after(&middle, &two);
        let settled = solve_from(&timetable(&now.text()), &before, Some(&issued));
        let receipt = settled.receipt();
        let changed = receipt.changes().unwrap();
        let was = before_of(&now, &issued);
        let mut fewest = usize::MAX;
        all_plans(&now, &was, &mut |(out, rooms, moved)| {
            if out <= receipt.unplaced_weight() && rooms <= receipt.in_use() {
                fewest = fewest.min(moved);
            }
        });
        prop_assert!(changed.floor() <= fewest);
        prop_assert!(changed.relocated() == fewest || receipt.unplaced() > 0);
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(100))]
    /// The fewest relocations by an integer programme in the microlp library, with up to 14
    /// requests on 5 rooms.
    #[test]
    fn agrees_with_an_integer_programme(tiny in crate::optimum::small(), event in event()) {
        use microlp::{ComparisonOp, OptimizationDirection, Problem};
        let before = crate::tools::solve(&timetable(&tiny.text()), 20_000);
        let before = Arc::new(before.answer().plan.clone());
        let now = after(&tiny, &event);
        let was = before_of(&now, &before);
        let settled = solve_from(&timetable(&now.text()), &before, None);
        let receipt = settled.receipt();
        let mut problem = Problem::new(OptimizationDirection::Minimize);
        let rooms: Vec<_> = now.rooms.iter().map(|_| problem.add_binary_var(0.0)).collect();
        let takes: Vec<Vec<_>> = (0..now.requests.len())
            .map(|r| {
                let cost = |room: usize| f64::from(u8::from(was[r].iter().any(|was| *was != room)));
                (0..rooms.len())
                    .map(|room| now.usable(r, room).then(|| problem.add_binary_var(cost(room))))
                    .collect()
            })
            .collect();
        // As much may be left out as the plan leaves out.
        let out: Vec<_> = takes.iter().map(|_| problem.add_binary_var(0.0)).collect();
        let weights = out.iter().enumerate().map(|(r, out)| (*out, now.weight(r) as f64));
        let weights: Vec<_> = weights.collect();
        if !weights.is_empty() {
            problem.add_constraint(weights, ComparisonOp::Le, receipt.unplaced_weight() as f64);
        }
        for (r, row) in takes.iter().enumerate() {
            let mut one: Vec<_> = row.iter().flatten().map(|v| (*v, 1.0)).collect();
            one.push((out[r], 1.0));
            problem.add_constraint(one, ComparisonOp::Eq, 1.0);
            for room in 0..rooms.len() {
                let Some(take) = row[room] else { continue };
                problem.add_constraint([(take, 1.0), (rooms[room], -1.0)], ComparisonOp::Le, 0.0);
                for (other, theirs) in takes[..r].iter().enumerate() {
                    if let Some(theirs) = theirs[room].filter(|_| now.collide(other, r, room)) {
                        problem.add_constraint([(take, 1.0), (theirs, 1.0)], ComparisonOp::Le, 1.0);
                    }
                }
            }
        }
        let used: Vec<_> = rooms.iter().map(|room| (*room, 1.0)).collect();
        problem.add_constraint(used, ComparisonOp::Le, receipt.in_use() as f64);
        let solution = problem.solve().unwrap().into_solution().unwrap();
        let changed = receipt.changes().unwrap();
        let fewest = solution.objective().round() as usize;
        prop_assert!(changed.floor() <= fewest && fewest <= changed.relocated());
        // With something left out, which pieces those are is not searched once more.
        prop_assert!(changed.relocated() == fewest || receipt.unplaced() > 0);
    }
}
