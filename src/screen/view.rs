//! Which stretch of time is on the screen, and which column a moment is in. Stretches in
//! which everything is closed are folded away.

use crate::clock::{Instant, Span};
use std::sync::Arc;

/// Minutes to a column, from near to far.
const STEPS: [i64; 12] = [1, 2, 5, 10, 15, 20, 30, 60, 120, 240, 480, 1440];

/// The visible stretch of time.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct View {
    /// The moment at the left edge.
    pub left: Instant,
    zoom: usize,
    /// Folded away: sorted, apart from each other.
    folds: Arc<[Span]>,
}

impl View {
    /// The nearest view from `span.start` in which the whole span fits into `columns`.
    pub fn showing(span: Span, columns: u16, folds: Arc<[Span]>) -> View {
        let mut view = View {
            left: span.start,
            zoom: 0,
            folds,
        };
        let seconds = view.folded(span.end) - view.folded(span.start);
        let fits = |minutes: &i64| seconds <= minutes * 60 * i64::from(columns.max(1));
        view.zoom = STEPS.iter().position(fits).unwrap_or(STEPS.len() - 1);
        view
    }

    /// The same with other folds.
    pub fn with_folds(self, folds: Arc<[Span]>) -> View {
        View { folds, ..self }
    }

    /// Seconds to a column.
    pub fn step(&self) -> i64 {
        STEPS[self.zoom] * 60
    }

    /// Seconds since 1970 without those that are folded away.
    fn folded(&self, at: Instant) -> i64 {
        let before = self.folds.iter().take_while(|fold| fold.start < at);
        at.0 - before
            .map(|fold| fold.end.min(at) - fold.start)
            .sum::<i64>()
    }

    /// The (latest) moment of a count without folds.
    fn unfolded(&self, seconds: i64) -> Instant {
        let mut at = Instant(seconds);
        for fold in self.folds.iter() {
            if fold.start > at {
                break;
            }
            at = at + fold.seconds();
        }
        at
    }

    /// Nearer or farther by one, keeping a moment where it is.
    pub fn zoomed(&self, closer: bool, keep: Instant) -> View {
        let zoom = if closer {
            self.zoom.saturating_sub(1)
        } else {
            (self.zoom + 1).min(STEPS.len() - 1)
        };
        let column = self.column(keep);
        let left = self.unfolded(self.folded(keep) - column * STEPS[zoom] * 60);
        View {
            left,
            zoom,
            folds: Arc::clone(&self.folds),
        }
        .aligned()
    }

    /// The left edge on a whole step, so that columns begin at round times.
    fn aligned(self) -> View {
        let left = Instant(self.left.0.div_euclid(self.step()) * self.step());
        View { left, ..self }
    }

    /// The column of a moment; may lie outside.
    pub fn column(&self, at: Instant) -> i64 {
        (self.folded(at) - self.folded(self.left)).div_euclid(self.step())
    }

    /// The span of a column, folds in it included.
    pub fn span_of(&self, column: u16) -> Span {
        let from = self.folded(self.left) + i64::from(column) * self.step();
        // The end belongs before a fold that begins there.
        let last = self.unfolded(from + self.step() - 1) + 1;
        Span {
            start: self.unfolded(from),
            end: last,
        }
    }

    /// All that is visible in so many columns.
    pub fn span(&self, columns: u16) -> Span {
        let last = self.folded(self.left) + self.step() * i64::from(columns) - 1;
        Span {
            start: self.left,
            end: self.unfolded(last) + 1,
        }
    }

    /// Columns of a span, `from..to`, at least one wide; may lie outside.
    pub fn columns(&self, span: Span) -> (i64, i64) {
        let from = self.column(span.start);
        (from, self.column(span.end).max(from + 1))
    }

    /// Moved so that a moment is inside, a third from the edge it came over.
    pub fn following(&self, at: Instant, columns: u16) -> View {
        let visible = self.span(columns);
        if visible.contains(at) {
            return self.clone();
        }
        let third = self.step() * i64::from(columns) / 3;
        let shift = if at < visible.start { 2 * third } else { third };
        let left = self.unfolded(self.folded(at) - shift);
        View {
            left,
            ..self.clone()
        }
        .aligned()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn none() -> Arc<[Span]> {
        Arc::from([])
    }

    #[test]
    fn a_day_fits_and_columns_begin_at_round_times() {
        let day = Span::lasting(Instant(8 * 3600), 12 * 3600);
        let view = View::showing(day, 66, none());
        assert_eq!(view.step(), 15 * 60);
        assert_eq!(view.columns(Span::lasting(Instant(9 * 3600), 3600)), (4, 8));
        assert_eq!(
            view.columns(Span::lasting(Instant(9 * 3600), 60)),
            (4, 5),
            "never invisible"
        );
        let closer = view.zoomed(true, Instant(9 * 3600));
        assert_eq!(closer.column(Instant(9 * 3600)), 4);
    }

    #[test]
    fn the_view_follows_a_moment_that_leaves_it() {
        let view = View::showing(Span::lasting(Instant(0), 3600), 60, none());
        for at in [-5, 3600, 1_000_000] {
            let moved = view.following(Instant(at), 60);
            assert!((0..60).contains(&moved.column(Instant(at))), "{at}");
        }
        assert_eq!(view.following(Instant(1800), 60), view);
    }

    #[test]
    fn folded_nights_take_no_columns() {
        let hour = 3600;
        let night = |day: i64| Span {
            start: Instant((day * 24 + 20) * hour),
            end: Instant((day * 24 + 32) * hour),
        };
        let folds: Arc<[Span]> = Arc::from([night(0), night(1)]);
        let days = Span {
            start: Instant(8 * hour),
            end: Instant(68 * hour),
        };
        let view = View::showing(days, 72, folds);
        assert_eq!(view.step(), 30 * 60, "36 open hours in 72 columns");
        assert_eq!(view.column(Instant(20 * hour - 1)), 23);
        assert_eq!(
            view.column(Instant(26 * hour)),
            24,
            "inside the fold: where it ends"
        );
        assert_eq!(view.column(Instant(32 * hour)), 24);
        assert_eq!(
            view.span_of(23),
            Span {
                start: Instant(19 * hour + 1800),
                end: Instant(20 * hour)
            }
        );
        assert_eq!(view.span_of(24).start, Instant(32 * hour));
        assert_eq!(view.span(72).end, Instant(68 * hour));
    }
}
