//! The engine against exact answers that it did not compute: brute force on tiny cases, and
//! a small integer programme solved by the microlp library.

use crate::tools::{solve, timetable};
use fewest::audit::{self, Knowledge};
use fewest::claim::{Case, FloorProof};
use fewest::clock::Instant;
use proptest::prelude::*;
use std::fmt::Write;
use std::ops::Range;
use std::sync::Arc;

/// Start, length, size, needs the projector, pin, weight, never.
pub(crate) type Wanted = (i64, i64, u32, bool, Option<usize>, u64, Option<usize>);

/// A tiny timetable, as plain numbers: the oracle reads these, the program reads the text.
#[derive(Clone, Debug)]
pub(crate) struct Tiny {
    /// Per room: seats, has a projector, minutes kept free after.
    pub(crate) rooms: Vec<(u32, bool, i64)>,
    pub(crate) requests: Vec<Wanted>,
    /// Per request the minute of a second start, for one that stays together with the first.
    pub(crate) again: Vec<Option<i64>>,
    /// One room closed from..to.
    pub(crate) closed: Option<(usize, i64, i64)>,
    /// Fewest changes before fewest rooms.
    pub(crate) changes_first: bool,
}

impl Tiny {
    pub(crate) fn text(&self) -> String {
        let at = |minute: i64| format!("2027-01-11T{:02}:{:02}:00", 8 + minute / 60, minute % 60);
        let mut text = "[timetable]\ntitle = \"tiny\"\nnoun = [\"room\", \"rooms\"]\n".to_string();
        if self.changes_first {
            text.push_str("prefer = \"changes\"\n");
        }
        for (room, (seats, projector, after)) in self.rooms.iter().enumerate() {
            let offers = if *projector { "\"projector\"" } else { "" };
            let _ = writeln!(
                text,
                "[[resource]]\nid = \"room-{room}\"\nseats = {seats}\noffers = [{offers}]\nturnaround = \"{after}m\""
            );
            if let Some((_, from, to)) = self.closed.filter(|(closed, _, _)| *closed == room) {
                let _ = writeln!(
                    text,
                    "closed = [{{ from = {}, to = {} }}]",
                    at(from),
                    at(to)
                );
            }
        }
        for (id, (start, length, size, needs, pin, weight, never)) in
            self.requests.iter().enumerate()
        {
            let _ = writeln!(
                text,
                "[[request]]\nid = \"r{id}\"\nstart = {}\nlength = \"{length}m\"\nsize = {size}\nweight = {weight}",
                at(*start)
            );
            if *needs {
                text.push_str("needs = [\"projector\"]\n");
            }
            if let Some(pin) = pin {
                let _ = writeln!(text, "pin = \"room-{pin}\"");
            }
            if let Some(never) = never {
                let _ = writeln!(text, "never = [\"room-{never}\"]");
            }
            if let Some(again) = self.again(id) {
                let _ = writeln!(text, "also = [{}]\ntogether = true", at(again));
            }
        }
        text
    }

    fn again(&self, request: usize) -> Option<i64> {
        self.again.get(request).copied().flatten()
    }

    /// The starts of a request.
    pub(crate) fn starts(&self, request: usize) -> impl Iterator<Item = i64> + '_ {
        std::iter::once(self.requests[request].0).chain(self.again(request))
    }

    /// What it costs to leave a request out: its dates together.
    pub(crate) fn weight(&self, request: usize) -> u64 {
        self.requests[request].5 * self.starts(request).count() as u64
    }

    pub(crate) fn usable(&self, request: usize, room: usize) -> bool {
        let (_, length, size, needs, pin, _, never) = self.requests[request];
        let (seats, projector, after) = self.rooms[room];
        let closed = self.closed.is_some_and(|(closed, from, to)| {
            let in_it = |start: i64| start < to && from < start + length + after;
            closed == room && self.starts(request).any(in_it)
        });
        if let Some(again) = self.again(request)
            && (again - self.requests[request].0).abs() < length + after
        {
            return false;
        }
        size <= seats
            && (projector || !needs)
            && pin.is_none_or(|pin| pin == room)
            && never != Some(room)
            && !closed
    }

    pub(crate) fn collide(&self, a: usize, b: usize, room: usize) -> bool {
        let after = self.rooms[room].2;
        let (la, lb) = (self.requests[a].1, self.requests[b].1);
        self.starts(a).any(|a| {
            let meets = |b: i64| a < b + lb + after && b < a + la + after;
            self.starts(b).any(meets)
        })
    }

    /// The ids of the pieces.
    pub(crate) fn pieces(&self) -> Vec<Arc<str>> {
        let name = |(request, start): (usize, i64)| {
            let (hour, minute) = (8 + start / 60, start % 60);
            match self.again(request) {
                None => format!("r{request}").into(),
                Some(_) => format!("r{request}@2027-01-11T{hour:02}{minute:02}").into(),
            }
        };
        let all = (0..self.requests.len())
            .flat_map(|request| self.starts(request).map(move |start| (request, start)));
        all.map(name).collect()
    }

    /// Least weight unplaced, then fewest rooms, by trying everything.
    pub(crate) fn best(&self) -> (u64, usize) {
        fn go(
            tiny: &Tiny,
            at: usize,
            on: &mut Vec<Option<usize>>,
            left: u64,
            best: &mut (u64, usize),
        ) {
            let used: std::collections::BTreeSet<usize> = on.iter().flatten().copied().collect();
            if (left, used.len()) >= *best {
                return;
            }
            if at == tiny.requests.len() {
                *best = (left, used.len());
                return;
            }
            for room in 0..tiny.rooms.len() {
                let free =
                    (0..at).all(|other| on[other] != Some(room) || !tiny.collide(other, at, room));
                if tiny.usable(at, room) && free {
                    on.push(Some(room));
                    go(tiny, at + 1, on, left, best);
                    on.pop();
                }
            }
            on.push(None);
            go(tiny, at + 1, on, left + tiny.weight(at), best);
            on.pop();
        }
        let mut best = (u64::MAX, usize::MAX);
        go(self, 0, &mut Vec::new(), 0, &mut best);
        best
    }
}

pub(crate) fn tiny() -> impl Strategy<Value = Tiny> {
    sized(1..4, 0..8, (1..4, 0.5))
}

/// Too many to try everything.
pub(crate) fn small() -> impl Strategy<Value = Tiny> {
    sized(4..6, 8..15, (2..5, 0.8))
}

/// So many rooms and requests, with so many seats and such a chance of a projector.
fn sized(
    rooms: Range<usize>,
    requests: Range<usize>,
    (seats, projector): (Range<u32>, f64),
) -> impl Strategy<Value = Tiny> {
    let rooms = prop::collection::vec(
        (
            seats,
            prop::bool::weighted(projector),
            prop::sample::select(vec![0i64, 0, 10]),
        ),
        rooms,
    );
    rooms.prop_flat_map(move |rooms| {
        let count = rooms.len();
        let request = (
            (0i64..24).prop_map(|x| x * 10),
            (1i64..9).prop_map(|x| x * 10),
            0u32..4,
            prop::bool::weighted(0.2),
            prop::option::weighted(0.2, 0..count),
            1u64..4,
            prop::option::weighted(0.1, 0..count),
        );
        let closed = prop::option::weighted(
            0.2,
            (0..count, 0i64..120).prop_map(|(room, from)| (room, from, from + 45)),
        );
        let requests = prop::collection::vec(request, requests.clone());
        (Just(rooms), requests, closed).prop_map(|(rooms, requests, closed)| Tiny {
            rooms,
            requests,
            again: Vec::new(),
            closed,
            changes_first: false,
        })
    })
}

/// The same where some requests have two dates that stay together.
pub(crate) fn tiny_together() -> impl Strategy<Value = Tiny> {
    let again = prop::option::weighted(0.6, (0i64..24).prop_map(|x| x * 10));
    (tiny(), prop::collection::vec(again, 8)).prop_map(|(mut tiny, mut again)| {
        for (request, again) in tiny.requests.iter().zip(&mut again) {
            // The very same start would be one date.
            again.take_if(|again| *again <= request.0);
        }
        tiny.again = again;
        tiny
    })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]
    /// Whatever is called proved is the truth, floors are never too high, and on cases this
    /// small the search leaves out the least and, with everything placed, uses the fewest,
    /// even where it cannot prove it.
    #[test]
    fn agrees_with_brute_force(tiny in prop_oneof![tiny(), tiny_together()]) {
        let settled = solve(&timetable(&tiny.text()), 20_000);
        let receipt = settled.receipt();
        let (left, used) = tiny.best();
        prop_assert_eq!(receipt.unplaced_weight(), left);
        // With something left out, the count of the rest is best effort.
        prop_assert!(receipt.in_use() == used || left > 0);
        prop_assert!(receipt.unplaced_floor() <= left);
        match receipt.knowledge() {
            Knowledge::Proved(proved) => prop_assert_eq!((0, proved.count()), (left, used)),
            // On cases this small the proof is always found.
            Knowledge::Between { .. } => prop_assert!(false, "{:?}", receipt),
            Knowledge::Impossible { least, .. } => {
                prop_assert!(left > 0);
                prop_assert!(!least || receipt.unplaced_weight() == left);
                // Prices prove nearly always how much stays out; with weights and pins a
                // fraction may be missing.
                prop_assert!(receipt.unplaced_floor() > 0 || receipt.floor() > tiny.rooms.len());
            }
        }
    }

    /// The same seed and steps give the same answer on one thread.
    #[test]
    fn the_same_seed_gives_the_same_answer(tiny in tiny()) {
        let timetable = timetable(&tiny.text());
        let (one, other) = (solve(&timetable, 3_000), solve(&timetable, 3_000));
        prop_assert_eq!(&one.answer().plan, &other.answer().plan);
        prop_assert_eq!(&one.answer().floor, &other.answer().floor);
    }

    #[test]
    fn agrees_with_an_integer_programme(tiny in tiny().prop_filter("all can be placed", |t| t.best().0 == 0)) {
        let settled = solve(&timetable(&tiny.text()), 20_000);
        prop_assert_eq!(Some(settled.receipt().in_use()), fewest_rooms(&tiny));
        prop_assert_eq!(settled.receipt().unplaced(), 0);
    }
}

/// The fewest rooms by an integer programme in the microlp library: one variable per request
/// and room, one per room, one row per room and maximal clique. `None` when not all can be
/// placed. For requests of one date.
pub(crate) fn fewest_rooms(tiny: &Tiny) -> Option<usize> {
    use microlp::{ComparisonOp, OptimizationDirection, Problem};
    let mut problem = Problem::new(OptimizationDirection::Minimize);
    let rooms: Vec<_> = tiny
        .rooms
        .iter()
        .map(|_| problem.add_binary_var(1.0))
        .collect();
    let mut takes: Vec<Vec<Option<_>>> = Vec::new();
    for request in 0..tiny.requests.len() {
        let mut take = |room: usize| {
            tiny.usable(request, room)
                .then(|| problem.add_binary_var(0.0))
        };
        takes.push((0..rooms.len()).map(&mut take).collect());
    }
    for row in &takes {
        let row: Vec<_> = row.iter().flatten().map(|v| (*v, 1.0)).collect();
        if row.is_empty() {
            return None;
        }
        problem.add_constraint(row, ComparisonOp::Eq, 1.0);
    }
    for (room, works) in rooms.iter().enumerate() {
        // Pieces that collide there run together at the start of one of them.
        for request in &tiny.requests {
            let running = (0..tiny.requests.len()).filter(|other| {
                let (start, length) = (
                    tiny.requests[*other].0,
                    tiny.requests[*other].1 + tiny.rooms[room].2,
                );
                (start..start + length).contains(&request.0)
            });
            let mut row: Vec<_> = running
                .filter_map(|other| takes[other][room])
                .map(|v| (v, 1.0))
                .collect();
            row.push((*works, -1.0));
            problem.add_constraint(row, ComparisonOp::Le, 0.0);
        }
    }
    let solution = problem.solve().ok()?.into_solution().ok()?;
    Some(solution.objective().round() as usize)
}

/// Instances with a known answer: `k` rooms are each filled without a gap over a day, so at
/// every moment exactly `k` pieces run and no plan can do with fewer; sizes follow the rooms.
#[test]
fn generated_with_a_known_answer() {
    let mut state: u64 = 7;
    let mut random = |below: u64| {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (state >> 33) % below
    };
    for k in [3, 8, 20] {
        let mut tiny = Tiny {
            rooms: Vec::new(),
            requests: Vec::new(),
            again: Vec::new(),
            closed: None,
            changes_first: false,
        };
        for room in 0..k {
            tiny.rooms.push((10 * (room as u32 + 1), true, 0));
            let mut at = 0;
            while at < 600 {
                let length = (20 + 10 * random(9) as i64).min(600 - at);
                let size = 10 * (room as u32 + 1) - random(9) as u32;
                tiny.requests.push((at, length, size, false, None, 1, None));
                at += length;
            }
        }
        let settled = solve(&timetable(&tiny.text()), 2_000_000);
        assert!(
            matches!(settled.receipt().knowledge(), Knowledge::Proved(p) if p.count() == k),
            "{k}: {:?}",
            settled.receipt()
        );
    }
}

/// Small members of the family that users have: the answer known by construction is found
/// and proved, and every kind of proof comes up.
#[test]
fn the_family_is_proved() {
    let mut above = 0;
    let mut by = std::collections::BTreeSet::new();
    for seed in 1..=12 {
        let made = crate::family::make(200, seed);
        let settled = solve(&timetable(&made.text), 2_000_000);
        let proved = matches!(
            settled.receipt().knowledge(),
            Knowledge::Proved(proved) if proved.count() == made.answer
        );
        assert!(proved, "{} {seed}: {:?}", made.kind, settled.receipt());
        above += usize::from(made.answer > settled.survey().load.most);
        by.insert(settled.answer().floor.name());
    }
    assert!(above >= 6, "{above}");
    assert!(
        ["clique", "incompatible", "prices"]
            .iter()
            .all(|name| by.contains(name)),
        "{by:?}"
    );
}

/// A random case: audit must see through it.
fn case(tiny: &Tiny) -> impl Strategy<Value = Case> + use<> {
    let mut names = tiny.pieces();
    if names.is_empty() {
        names.push("r0".into());
    }
    let (pieces, rooms) = (names.len(), tiny.rooms.len());
    let piece = move || prop::sample::select(names.clone());
    let named = piece.clone();
    let some = move || prop::collection::btree_set(named(), 1..pieces.max(2));
    let none = piece().prop_map(|piece| Case::NoPlace { piece });
    let moment = (0i64..33).prop_map(|ten| Instant(MONDAY_AT_EIGHT + ten * 600));
    let short = (moment, some()).prop_map(|(at, pieces)| Case::Short {
        at,
        pieces: pieces.into_iter().collect(),
    });
    let prices = (
        1i64..4,
        some(),
        prop::collection::vec(1i64..5, pieces.max(1)),
    )
        .prop_map(|(unit, pieces, prices)| Case::Prices {
            unit,
            prices: pieces.into_iter().zip(prices).collect(),
        });
    let leaf = prop_oneof![none, short, prices];
    leaf.prop_recursive(3, 20, rooms as u32, move |inner| {
        let cases = prop::collection::vec(inner, rooms);
        (piece(), cases).prop_map(|(piece, cases)| {
            let rooms = (0..).map(|room| Arc::<str>::from(format!("room-{room}")));
            Case::Place {
                piece,
                on: rooms.zip(cases).collect(),
            }
        })
    })
}

/// 2027-01-11T08:00:00Z, where the tiny timetables begin.
const MONDAY_AT_EIGHT: i64 = 1_799_654_400;

fn tiny_with_case() -> impl Strategy<Value = (Tiny, Case)> {
    placeable().prop_flat_map(|tiny| {
        let case = case(&tiny);
        (Just(tiny), case)
    })
}

fn placeable() -> impl Strategy<Value = Tiny> {
    let tiny = prop_oneof![tiny(), tiny_together()];
    tiny.prop_filter("all can be placed", |t| t.best().0 == 0)
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(3_000))]
    /// Whatever prices somebody writes down: a floor that audit lets through is true.
    #[test]
    fn no_false_prices_pass_audit(
        tiny in placeable(),
        unit in 1i64..5,
        prices in prop::collection::vec(0i64..5, 16),
    ) {
        let (_, used) = tiny.best();
        let timetable = timetable(&tiny.text());
        let prices: Vec<(Arc<str>, i64)> = tiny
            .pieces()
            .into_iter()
            .zip(prices)
            .filter(|(_, price)| *price > 0)
            .collect();
        let value = used + 1;
        let proof = FloorProof::Prices { unit, prices, value };
        prop_assert!(audit::check_floor(&timetable, &proof).is_err());
    }

    /// Nor do cases prove anything false, whether made up or the engine's own with a larger
    /// claim; and the engine's own pass.
    #[test]
    fn no_false_cases_pass_audit((tiny, tree) in tiny_with_case()) {
        let (_, used) = tiny.best();
        let timetable = timetable(&tiny.text());
        let claims = |value, tree: &Case| {
            let tree = tree.clone();
            audit::check_floor(&timetable, &FloorProof::Cases { value, tree })
        };
        prop_assert!(claims(used + 1, &tree).is_err(), "{tree:?}");
        if let FloorProof::Cases { value, tree } = &solve(&timetable, 1_000).answer().floor {
            prop_assert_eq!(claims(*value, tree).ok(), Some(*value));
            prop_assert!(claims(used + 1, tree).is_err(), "{tree:?}");
        }
    }
}
