//! Floor 2: which visits, in which order, and how good that is.

pub mod solve;
