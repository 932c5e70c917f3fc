//! Floor 3: the night as a pure state machine, and the accounting of its darkness.
//!
//! [`Machine`] is turned by an [`Event`] and the clock's [`Stamp`]; it answers with [`Fact`]s to
//! keep and, once they are kept, with [`Action`]s and a [`Reply`]. [`State`] is what the facts
//! fold to, in living and in recovery alike. [`split`] says where the darkness went.

mod accounting;
mod acts;
mod answer;
mod draft;
mod event;
mod fact;
mod gate;
mod handout;
mod log;
mod machine;
mod outdated;
mod phase;
mod report;
mod rules;
mod state;
mod timers;

pub use accounting::{count, opens, split, summary};
pub use answer::{ask_of, revision_of};
pub use event::{Action, Event, Notice, PlanRequest, Refusal, Reply, VisitReport};
pub use fact::{Fact, Lease, RunMode, Stamp};
pub use gate::{FeedFault, Gate, Verdict};
pub use log::{HoldSpan, LeaseRecord, NightBounds, NightLog};
pub use machine::{Machine, Performed, Step};
pub use phase::{CLOSE, MOVES, Phase};
pub use report::{NightReport, Remark, RevisionNote};
pub use rules::{
    CLOCK_STEP_MS, CLOSING_LIMIT_S, EXTENSION_LIMIT_S, FAILED_STARTS_LIMIT, FUTURE_TOLERANCE_S,
    HandOut, LEASE_MARGIN_S, LEDGER_RETRY_S, NightRules, PLAN_RETRY_S, REPLAN_AFTER_S,
    SEEING_REPLAN_RATIO, SLIP_TOLERANCE_S, WEATHER_NOTE_EVERY_S, WEATHER_REPLAN_EVERY_S,
};
pub use state::{FoldError, Pause, State, Urgency};
pub use timers::{Timer, Timers};

#[cfg(test)]
mod tests;
