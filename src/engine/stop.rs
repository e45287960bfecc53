//! Who says when to stop: a polled trait, and the usual ways to say so.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Instant;

/// Asked now and then during a search.
pub trait Stopper {
    /// Whether the search should end now with what it has.
    fn stop(&self) -> bool;
}

/// Runs until it is done.
#[derive(Clone, Copy, Debug)]
pub struct Never;

impl Stopper for Never {
    fn stop(&self) -> bool {
        false
    }
}

/// Until a moment.
#[derive(Clone, Copy, Debug)]
pub struct Until(pub Instant);

impl Stopper for Until {
    fn stop(&self) -> bool {
        Instant::now() >= self.0
    }
}

/// Until somebody raises the flag.
#[derive(Clone, Debug, Default)]
pub struct Flag(Arc<AtomicBool>);

impl Flag {
    /// Raises it, for everyone who holds a clone.
    pub fn raise(&self) {
        self.0.store(true, Ordering::Relaxed);
    }
}

impl Stopper for Flag {
    fn stop(&self) -> bool {
        self.0.load(Ordering::Relaxed)
    }
}

/// Until one of two says so.
#[derive(Clone, Debug)]
pub struct Either<A, B>(pub A, pub B);

impl<A: Stopper, B: Stopper> Stopper for Either<A, B> {
    fn stop(&self) -> bool {
        self.0.stop() || self.1.stop()
    }
}
