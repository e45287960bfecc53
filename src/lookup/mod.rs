//! Maps for the many look-ups by id that every edit makes.
//!
//! Imports nothing from the crate.

use std::collections::{HashMap, HashSet};

/// A map for the many look-ups by id that every edit makes: a quicker hash than the standard
/// one, seeded at random like it.
pub type FastMap<K, V> = HashMap<K, V, foldhash::fast::RandomState>;

/// The set that goes with it.
pub type FastSet<T> = HashSet<T, foldhash::fast::RandomState>;
