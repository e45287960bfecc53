//! Moments and half-open stretches of time.

/// Seconds in a day without a change of clock.
pub const DAY: i64 = 86_400;

/// A moment: whole seconds since 1970-01-01T00:00:00 UTC.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Instant(pub i64);

impl std::ops::Add<i64> for Instant {
    type Output = Instant;
    fn add(self, seconds: i64) -> Instant {
        Instant(self.0 + seconds)
    }
}

impl std::ops::Sub<i64> for Instant {
    type Output = Instant;
    fn sub(self, seconds: i64) -> Instant {
        Instant(self.0 - seconds)
    }
}

impl std::ops::Sub<Instant> for Instant {
    type Output = i64;
    fn sub(self, other: Instant) -> i64 {
        self.0 - other.0
    }
}

/// A half-open stretch `[start, end)`: back to back is no overlap
/// (common practice, no source).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Span {
    /// The first moment inside.
    pub start: Instant,
    /// The first moment after it.
    pub end: Instant,
}

impl Span {
    /// The span from `start`, `seconds` long.
    pub fn lasting(start: Instant, seconds: i64) -> Span {
        Span {
            start,
            end: start + seconds,
        }
    }

    /// Its length in seconds.
    pub fn seconds(self) -> i64 {
        self.end - self.start
    }

    /// Whether the two share a moment.
    pub fn overlaps(self, other: Span) -> bool {
        self.start < other.end && other.start < self.end
    }

    /// Whether every moment of `other` is inside.
    pub fn covers(self, other: Span) -> bool {
        self.start <= other.start && other.end <= self.end
    }

    /// Whether the moment is inside.
    pub fn contains(self, at: Instant) -> bool {
        self.start <= at && at < self.end
    }

    /// The span widened by `before` and `after` seconds.
    pub fn widened(self, before: i64, after: i64) -> Span {
        Span {
            start: self.start - before,
            end: self.end + after,
        }
    }
}

/// Sorts spans and joins those that overlap or touch.
pub fn merge(mut spans: Vec<Span>) -> Vec<Span> {
    spans.sort_unstable();
    let mut merged: Vec<Span> = Vec::with_capacity(spans.len());
    for span in spans {
        match merged.last_mut() {
            Some(last) if span.start <= last.end => last.end = last.end.max(span.end),
            _ => merged.push(span),
        }
    }
    merged
}

#[cfg(test)]
mod tests {
    use super::*;

    fn span(start: i64, end: i64) -> Span {
        Span {
            start: Instant(start),
            end: Instant(end),
        }
    }

    #[test]
    fn back_to_back_is_no_overlap_and_the_same_time_is() {
        assert!(!span(0, 10).overlaps(span(10, 20)));
        assert!(span(0, 10).overlaps(span(9, 20)));
        assert!(span(0, 10).overlaps(span(0, 10)));
    }

    #[test]
    fn touching_spans_join() {
        assert_eq!(
            merge(vec![span(5, 7), span(0, 3), span(3, 4)]),
            vec![span(0, 4), span(5, 7)]
        );
    }
}
