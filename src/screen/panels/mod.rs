//! The parts of the screen. Each draws one area from the state and changes nothing.

pub(super) mod board;
pub(super) mod detail;
pub(super) mod find;
pub(super) mod footer;
pub(super) mod header;
pub(super) mod help;
pub(super) mod load;
