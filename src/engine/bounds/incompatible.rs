//! The largest incompatibility clique: pieces of which no two can share a resource, because
//! they overlap wherever both could go or because there is no such place. At least one
//! resource per piece, then.
//!
//! Two ways to one. Where the pieces fall into groups whose choices have nothing in common,
//! the cliques of the groups add up. Else a local search over the incompatibility graph in
//! the manner of dynamic local search (Pullan, Hoos 2006): add, swap, penalties.

use crate::engine::random::Random;
use crate::engine::{Problem, Stopper};
use crate::overlap::load;
use std::collections::BTreeMap;

/// Whether two items can share no resource.
pub(crate) fn incompatible(problem: &Problem, a: usize, b: usize) -> bool {
    let (mut one, mut two) = (
        problem.choices(a).iter().peekable(),
        problem.choices(b).iter().peekable(),
    );
    while let (Some(x), Some(y)) = (one.peek(), two.peek()) {
        match x.cmp(y) {
            std::cmp::Ordering::Less => _ = one.next(),
            std::cmp::Ordering::Greater => _ = two.next(),
            std::cmp::Ordering::Equal => {
                if !problem.conflict(a, b, **x) {
                    return false;
                }
                one.next();
                two.next();
            }
        }
    }
    true
}

/// The groups of items whose choices are connected, when there are at least two of them.
fn groups(problem: &Problem) -> Vec<Vec<usize>> {
    // Union by walking: each class points at a class of its group.
    let mut leader: Vec<u32> = (0..problem.classes.len() as u32).collect();
    fn find(leader: &mut [u32], mut class: u32) -> u32 {
        while leader[class as usize] != class {
            leader[class as usize] = leader[leader[class as usize] as usize];
            class = leader[class as usize];
        }
        class
    }
    for item in 0..problem.items.len() {
        let choices = problem.choices(item);
        for pair in choices.windows(2) {
            let (a, b) = (find(&mut leader, pair[0]), find(&mut leader, pair[1]));
            leader[a as usize] = b;
        }
    }
    let mut groups: BTreeMap<u32, Vec<usize>> = BTreeMap::new();
    for item in 0..problem.items.len() {
        if let Some(class) = problem.choices(item).first() {
            groups
                .entry(find(&mut leader, *class))
                .or_default()
                .push(item);
        }
    }
    groups.into_values().collect()
}

/// The cliques of the groups together; empty when there is but one group.
pub(crate) fn by_groups(problem: &Problem) -> Vec<usize> {
    let groups = groups(problem);
    if groups.len() < 2 {
        return Vec::new();
    }
    let mut clique = Vec::new();
    for group in groups {
        let units = group.iter().flat_map(|item| problem.units(*item));
        let spans: Vec<_> = units.map(|unit| unit.core).collect();
        if let Some(peak) = load(&spans).peaks().first() {
            let at = peak.span.start;
            let runs = |item: &usize| problem.units(*item).iter().any(|u| u.core.contains(at));
            clique.extend(group.into_iter().filter(runs));
        }
    }
    clique
}

/// The incompatibility graph as rows of bits, and a clique that is being improved.
pub(crate) struct Search {
    n: usize,
    words: usize,
    rows: Vec<u64>,
    random: Random,
    /// Per vertex, how many members of the clique it is compatible with.
    missing: Vec<u32>,
    inside: Vec<bool>,
    clique: Vec<usize>,
    penalty: Vec<u32>,
    /// Vertices with any edge at all.
    usable: Vec<bool>,
    climbs: u32,
    /// The best so far.
    pub(crate) best: Vec<usize>,
}

/// Larger problems are left to the other bounds: the graph alone would take too long.
const MOST_ITEMS: usize = 2_500;

impl Search {
    /// Builds the graph, starting from a clique; `None` when it is too large or stopped.
    pub(crate) fn new(
        problem: &Problem,
        start: &[usize],
        seed: u64,
        stop: &dyn Stopper,
    ) -> Option<Search> {
        let n = problem.items.len();
        if n > MOST_ITEMS {
            return None;
        }
        let words = n.div_ceil(64);
        let mut rows = vec![0u64; n * words];
        for a in 0..n {
            if a % 64 == 0 && stop.stop() {
                return None;
            }
            // Something without any choice fits nowhere; counting it would prove nothing of use.
            if problem.choices(a).is_empty() {
                continue;
            }
            for b in 0..a {
                if !problem.choices(b).is_empty() && incompatible(problem, a, b) {
                    rows[a * words + b / 64] |= 1 << (b % 64);
                    rows[b * words + a / 64] |= 1 << (a % 64);
                }
            }
        }
        let mut search = Search {
            n,
            words,
            rows,
            random: Random::seeded(seed),
            missing: vec![0; n],
            inside: vec![false; n],
            clique: Vec::new(),
            penalty: vec![0; n],
            usable: Vec::new(),
            climbs: 0,
            best: start.to_vec(),
        };
        let edges = |v: usize| search.rows[v * words..][..words].iter().any(|w| *w != 0);
        search.usable = (0..n).map(edges).collect();
        for item in start {
            search.add(*item);
        }
        Some(search)
    }

    fn adjacent(&self, a: usize, b: usize) -> bool {
        self.rows[a * self.words + b / 64] & (1 << (b % 64)) != 0
    }

    fn shift(&mut self, vertex: usize, step: u32) {
        for other in 0..self.n {
            if other != vertex && !self.adjacent(vertex, other) {
                self.missing[other] = self.missing[other].wrapping_add(step);
            }
        }
    }

    fn add(&mut self, vertex: usize) {
        self.inside[vertex] = true;
        self.clique.push(vertex);
        self.shift(vertex, 1);
    }

    fn remove(&mut self, vertex: usize) {
        self.inside[vertex] = false;
        self.clique.retain(|other| *other != vertex);
        self.shift(vertex, u32::MAX);
    }

    /// A vertex of least penalty among those outside that miss exactly `missing`, ties at
    /// random.
    fn pick(&mut self, missing: u32, allowed: &[bool]) -> Option<usize> {
        let (mut best, mut ties) = (None, 0);
        for (vertex, allowed) in allowed.iter().enumerate() {
            if self.inside[vertex] || self.missing[vertex] != missing || !allowed {
                continue;
            }
            match best.map(|b: usize| self.penalty[vertex].cmp(&self.penalty[b])) {
                None | Some(std::cmp::Ordering::Less) => (best, ties) = (Some(vertex), 1),
                Some(std::cmp::Ordering::Equal) => {
                    ties += 1;
                    if self.random.below(ties) == 0 {
                        best = Some(vertex);
                    }
                }
                Some(std::cmp::Ordering::Greater) => {}
            }
        }
        best
    }

    /// One climb: add what fits, swap where one stands in the way, until neither helps; then
    /// penalise what is inside and go elsewhere: with a vertex from outside, or, when nothing
    /// has come of that for a while, from a single one. Returns the vertices looked at.
    pub(crate) fn climb(&mut self) -> usize {
        let mut looked = 0;
        let mut allowed = self.usable.clone();
        for _ in 0..4 * self.n.max(16) {
            looked += 3 * self.n;
            if let Some(vertex) = self.pick(0, &allowed) {
                self.add(vertex);
                allowed[vertex] = false;
                if self.clique.len() > self.best.len() {
                    self.best.clone_from(&self.clique);
                }
            } else if let Some(vertex) = self.pick(1, &allowed) {
                let blocker = self
                    .clique
                    .iter()
                    .copied()
                    .find(|other| !self.adjacent(vertex, *other));
                if let Some(blocker) = blocker {
                    self.remove(blocker);
                }
                self.add(vertex);
                allowed[vertex] = false;
            } else {
                break;
            }
        }
        for vertex in &self.clique {
            self.penalty[*vertex] += 1;
        }
        self.climbs += 1;
        if self.climbs.is_multiple_of(FORGET_EVERY) {
            for penalty in &mut self.penalty {
                *penalty = penalty.saturating_sub(1);
            }
        }
        self.leave();
        looked
    }

    /// Away from where the climb ended.
    fn leave(&mut self) {
        let outside: Vec<usize> = (0..self.n)
            .filter(|v| self.usable[*v] && !self.inside[*v])
            .collect();
        if outside.is_empty() {
            return;
        }
        let vertex = outside[self.random.below(outside.len())];
        let alone = self.climbs.is_multiple_of(AFRESH_EVERY);
        for other in self.clique.clone() {
            if alone || !self.adjacent(vertex, other) {
                self.remove(other);
            }
        }
        self.add(vertex);
    }
}

/// Climbs after which every penalty is one less.
const FORGET_EVERY: u32 = 2;

/// Climbs after which the search begins from a single vertex.
const AFRESH_EVERY: u32 = 50;
