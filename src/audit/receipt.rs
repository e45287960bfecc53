//! What is known once a claim has been checked.

/// What audit found to hold. There is no way to make one but [`super::check`].
#[derive(Clone, Debug)]
pub struct Receipt {
    pub(super) in_use: usize,
    pub(super) floor: usize,
    pub(super) clique: usize,
    pub(super) unplaced: usize,
    pub(super) unplaced_weight: u64,
    pub(super) unplaced_floor: u64,
    pub(super) available: usize,
    pub(super) changes: Option<Changed>,
}

/// What audit found of the changes against an earlier plan.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Changed {
    pub(super) relocated: usize,
    pub(super) floor: usize,
}

impl Changed {
    /// Pieces that are in both plans, on different resources.
    pub fn relocated(self) -> usize {
        self.relocated
    }

    /// Proved lower bound on that for plans that use no more resources and leave out no more
    /// weight.
    pub fn floor(self) -> usize {
        self.floor
    }

    /// Whether no fewer will do.
    pub fn fewest(self) -> bool {
        self.relocated == self.floor
    }
}

/// A proof that was checked: the fields cannot be set outside audit.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Proved {
    count: usize,
}

impl Proved {
    /// The count that is proved to be the fewest.
    pub fn count(self) -> usize {
        self.count
    }
}

/// What is known of an answer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Knowledge {
    /// Everything is placed and fewer resources cannot do it.
    Proved(Proved),
    /// The fewest is somewhere between the two (or not everything has a place yet).
    Between {
        /// Proved lower bound for placing everything.
        floor: usize,
        /// Distinct resources in the plan.
        in_use: usize,
    },
    /// Not everything can be placed, proved.
    Impossible {
        /// Proved least weight that stays unplaced; at least 1.
        unplaced_floor: u64,
        /// Whether the plan leaves out no more than that.
        least: bool,
    },
}

impl Receipt {
    /// Distinct resources in the plan.
    pub fn in_use(&self) -> usize {
        self.in_use
    }

    /// Proved lower bound on the resources needed to place everything.
    pub fn floor(&self) -> usize {
        self.floor
    }

    /// The size of the clique that shares no moment, 0 when none was claimed.
    pub fn clique(&self) -> usize {
        self.clique
    }

    /// Pieces without a place.
    pub fn unplaced(&self) -> usize {
        self.unplaced
    }

    /// Their weight together.
    pub fn unplaced_weight(&self) -> u64 {
        self.unplaced_weight
    }

    /// Proved lower bound on that weight.
    pub fn unplaced_floor(&self) -> u64 {
        self.unplaced_floor
    }

    /// What changes against an earlier plan, where the answer names one.
    pub fn changes(&self) -> Option<Changed> {
        self.changes
    }

    /// The state of knowledge.
    pub fn knowledge(&self) -> Knowledge {
        if self.unplaced_floor > 0 || self.floor > self.available {
            Knowledge::Impossible {
                unplaced_floor: self.unplaced_floor.max(1),
                least: self.unplaced_weight == self.unplaced_floor.max(1),
            }
        } else if self.unplaced == 0 && self.in_use == self.floor {
            Knowledge::Proved(Proved { count: self.in_use })
        } else {
            Knowledge::Between {
                floor: self.floor,
                in_use: self.in_use,
            }
        }
    }
}
