//! Floor 3: the night as a pure state machine, and the accounting of its darkness.

mod fact;

pub use fact::{Fact, Lease, RunMode, Stamp};
