//! Load over time by a sweep over starts and ends.

use crate::clock::{Instant, Span};

/// How many spans run at each moment, as a step function.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Load {
    /// The load from each moment on, until the next one's; the last is 0.
    pub steps: Vec<(Instant, usize)>,
    /// The largest load: the size of a largest clique.
    pub most: usize,
}

/// A longest stretch of time with the largest load throughout.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Peak {
    /// The stretch.
    pub span: Span,
}

/// The largest load alone, in O(n log n): two sorted lists and one sweep.
pub fn largest_load(spans: &[Span]) -> usize {
    let mut starts: Vec<i64> = spans.iter().map(|span| span.start.0).collect();
    let mut ends: Vec<i64> = spans.iter().map(|span| span.end.0).collect();
    starts.sort_unstable();
    ends.sort_unstable();
    let (mut ended, mut most) = (0, 0);
    for (started, start) in starts.iter().enumerate() {
        // Half-open: what ends now has left. Only the largest load matters, and it is
        // reached at a start.
        while ends[ended] <= *start {
            ended += 1;
        }
        most = most.max(started + 1 - ended);
    }
    most
}

/// The load of the spans over time.
pub fn load(spans: &[Span]) -> Load {
    let mut starts: Vec<Instant> = spans.iter().map(|span| span.start).collect();
    let mut ends: Vec<Instant> = spans.iter().map(|span| span.end).collect();
    starts.sort_unstable();
    ends.sort_unstable();
    let mut load = Load::default();
    let (mut started, mut ended) = (0, 0);
    while ended < ends.len() {
        let at = match starts.get(started) {
            Some(start) => (*start).min(ends[ended]),
            None => ends[ended],
        };
        while ends.get(ended) == Some(&at) {
            ended += 1;
        }
        while starts.get(started) == Some(&at) {
            started += 1;
        }
        let now = started - ended;
        if load.steps.last().is_none_or(|(_, before)| *before != now) {
            load.steps.push((at, now));
        }
        load.most = load.most.max(now);
    }
    load
}

impl Load {
    /// The load at a moment.
    pub fn at(&self, at: Instant) -> usize {
        let next = self.steps.partition_point(|(from, _)| *from <= at);
        if next == 0 { 0 } else { self.steps[next - 1].1 }
    }

    /// The largest load within a span (half-open).
    pub fn most_within(&self, span: Span) -> usize {
        let first = self.steps.partition_point(|(from, _)| *from <= span.start);
        let inside = self.steps[first..]
            .iter()
            .take_while(|(from, _)| *from < span.end)
            .map(|(_, load)| *load);
        inside.fold(self.at(span.start), usize::max)
    }

    /// Every peak, in order of time; none when nothing runs.
    pub fn peaks(&self) -> Vec<Peak> {
        let ends = self.steps.iter().skip(1).map(|(from, _)| *from);
        self.steps
            .iter()
            .zip(ends)
            .filter(|((_, load), _)| *load == self.most && self.most > 0)
            .map(|((start, _), end)| Peak {
                span: Span { start: *start, end },
            })
            .collect()
    }
}

/// The connected components of the overlap graph, each as places in `spans`, in order of
/// time.
pub fn components(spans: &[Span]) -> Vec<Vec<usize>> {
    let mut order: Vec<usize> = (0..spans.len()).collect();
    order.sort_unstable_by_key(|at| spans[*at]);
    let mut components: Vec<Vec<usize>> = Vec::new();
    let mut reach = Instant(i64::MIN);
    for at in order {
        match components.last_mut() {
            Some(component) if spans[at].start < reach => component.push(at),
            _ => components.push(vec![at]),
        }
        reach = reach.max(spans[at].end);
    }
    components
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn span(start: i64, length: i64) -> Span {
        Span::lasting(Instant(start), length)
    }

    #[test]
    fn two_requests_for_the_very_same_time_are_two() {
        let load = load(&[span(0, 10), span(0, 10)]);
        assert_eq!(load.most, 2);
        assert_eq!(load.peaks(), [Peak { span: span(0, 10) }]);
    }

    #[test]
    fn back_to_back_is_no_overlap() {
        assert_eq!(load(&[span(0, 10), span(10, 10)]).most, 1);
        assert_eq!(
            load(&[span(0, 10), span(10, 10)]).peaks(),
            [Peak { span: span(0, 20) }]
        );
        assert_eq!(components(&[span(0, 10), span(10, 10)]).len(), 2);
    }

    #[test]
    fn nothing_has_no_peak() {
        assert_eq!(load(&[]), Load::default());
        assert!(load(&[]).peaks().is_empty());
        assert_eq!(largest_load(&[]), 0);
    }

    proptest! {
        #[test]
        fn agrees_with_counting_moment_by_moment(raw in prop::collection::vec((0i64..30, 1i64..12), 0..25)) {
            let spans: Vec<Span> = raw.iter().map(|(start, length)| span(*start, *length)).collect();
            let load = load(&spans);
            let count = |at: i64| spans.iter().filter(|s| s.contains(Instant(at))).count();
            let most = (0..45).map(count).max().unwrap_or(0);
            prop_assert_eq!(load.most, most);
            prop_assert_eq!(largest_load(&spans), most);
            for at in -1..45 {
                prop_assert_eq!(load.at(Instant(at)), count(at));
                let peaks = load.peaks().iter().any(|p| p.span.contains(Instant(at)));
                prop_assert_eq!(peaks, most > 0 && count(at) == most);
                for length in [1, 5] {
                    let within = (at..at + length).map(count).max().unwrap_or(0);
                    prop_assert_eq!(load.most_within(span(at, length)), within);
                }
            }
        }
    }
}
