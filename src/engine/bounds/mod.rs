//! Lower bounds, each with the certificate that `audit` rechecks.

pub(super) mod chains;
pub(super) mod clique;
pub(super) mod hall;
pub(super) mod incompatible;
pub(super) mod ladder;
pub(super) mod prices;
