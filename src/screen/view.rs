//! Which stretch of time is on the screen, and which column a moment is in.

use crate::clock::{Instant, Span};

/// Minutes to a column, from near to far.
const STEPS: [i64; 12] = [1, 2, 5, 10, 15, 20, 30, 60, 120, 240, 480, 1440];

/// The visible stretch of time.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct View {
    /// The moment at the left edge.
    pub left: Instant,
    zoom: usize,
}

impl View {
    /// The nearest view from `span.start` in which the whole span fits into `columns`.
    pub fn showing(span: Span, columns: u16) -> View {
        let fits = |minutes: &i64| span.seconds() <= minutes * 60 * i64::from(columns.max(1));
        let zoom = STEPS.iter().position(fits).unwrap_or(STEPS.len() - 1);
        View {
            left: span.start,
            zoom,
        }
    }

    /// Seconds to a column.
    pub fn step(self) -> i64 {
        STEPS[self.zoom] * 60
    }

    /// Nearer or farther by one, keeping a moment where it is.
    pub fn zoomed(self, closer: bool, keep: Instant) -> View {
        let zoom = if closer {
            self.zoom.saturating_sub(1)
        } else {
            (self.zoom + 1).min(STEPS.len() - 1)
        };
        let column = (keep - self.left).div_euclid(self.step());
        let left = keep - column * STEPS[zoom] * 60;
        View { left, zoom }.aligned()
    }

    /// The left edge on a whole step, so that columns begin at round times.
    fn aligned(self) -> View {
        View {
            left: Instant(self.left.0.div_euclid(self.step()) * self.step()),
            ..self
        }
    }

    /// The column of a moment; may lie outside.
    pub fn column(self, at: Instant) -> i64 {
        (at - self.left).div_euclid(self.step())
    }

    /// The span of a column.
    pub fn span_of(self, column: u16) -> Span {
        Span::lasting(self.left + i64::from(column) * self.step(), self.step())
    }

    /// All that is visible in so many columns.
    pub fn span(self, columns: u16) -> Span {
        Span::lasting(self.left, self.step() * i64::from(columns))
    }

    /// Columns of a span, `from..to`, at least one wide; may lie outside.
    pub fn columns(self, span: Span) -> (i64, i64) {
        let from = self.column(span.start);
        (from, self.column(span.end).max(from + 1))
    }

    /// Moved so that a moment is inside, a third from the edge it came over.
    pub fn following(self, at: Instant, columns: u16) -> View {
        let visible = self.span(columns);
        let third = visible.seconds() / 3;
        let left = if at < visible.start {
            at - 2 * third
        } else if at >= visible.end {
            at - third
        } else {
            return self;
        };
        View { left, ..self }.aligned()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_day_fits_and_columns_begin_at_round_times() {
        let day = Span::lasting(Instant(8 * 3600), 12 * 3600);
        let view = View::showing(day, 66);
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
        let view = View::showing(Span::lasting(Instant(0), 3600), 60);
        for at in [-5, 3600, 1_000_000] {
            let moved = view.following(Instant(at), 60);
            assert!((0..60).contains(&moved.column(Instant(at))), "{at}");
        }
        assert_eq!(view.following(Instant(1800), 60), view);
    }
}
