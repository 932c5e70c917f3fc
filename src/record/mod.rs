//! Floor 1: what was planned, done and lost, as plain values. The ledger keeps them; score and
//! audit read them; the night makes them.

mod queue;
mod visit;

pub use queue::{EntryKind, LeftOut, PlanCause, PlanRevision, QueueEntry, ValueParts};
pub use visit::{
    DarknessSplit, Exposures, Hold, HoldCause, IdleCause, LossCause, NightSummary, Outcome, Visit,
    VisitCounts, VisitId,
};
