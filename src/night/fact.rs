//! What the night does is told in facts. The ledger keeps them in order; folding them gives the
//! state back, in living and in recovery alike.

use crate::catalogue::TargetId;
use crate::record::{HoldCause, LossCause, NightSummary, PlanRevision, QueueEntry, Visit, VisitId};
use crate::time::{MonotonicMs, NightDate, Span, Utc};
use crate::weather::WeatherSample;

/// Both readings of the clock, taken together. Deadlines rest on `mono`, records on `utc`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Stamp {
    /// Wall clock.
    pub utc: Utc,
    /// The clock that never steps.
    pub mono: MonotonicMs,
}

/// Whether the nights are real.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RunMode {
    /// A real sky.
    Real,
    /// A simulated observatory.
    Rehearsal,
    /// Real sockets in invented time.
    InventedClock,
}

/// A visit handed out and not yet ended.
#[derive(Clone, Debug, PartialEq)]
pub struct Lease {
    /// The visit's name.
    pub visit: VisitId,
    /// The entry of the queue that was handed out.
    pub entry: QueueEntry,
    /// Revision that the entry came from.
    pub revision: u32,
    /// Key of the claim: the same key gets the same lease again.
    pub claim_key: String,
    /// Who holds it, for people.
    pub holder: String,
    /// When it was granted.
    pub granted: Utc,
    /// When it runs out unless extended or reported.
    pub expires: Utc,
}

/// Something that is so from now on. Never edited, only followed by others.
#[derive(Clone, Debug, PartialEq)]
pub enum Fact {
    /// The night began: its bounds and darkness as they were computed then.
    NightOpened {
        /// The night.
        night: NightDate,
        /// Noon to noon.
        span: Span,
        /// `None`: no darkness.
        darkness: Option<Span>,
        /// The night is ours.
        ours: bool,
        /// Real or not.
        mode: RunMode,
    },
    /// A queue was published.
    PlanPublished(PlanRevision),
    /// Nothing may be observed from here.
    HoldBegan {
        /// When.
        at: Utc,
        /// Why.
        cause: HoldCause,
        /// In words, with the values that decided.
        detail: String,
    },
    /// This cause no longer holds the night.
    HoldEnded {
        /// When.
        at: Utc,
        /// Which.
        cause: HoldCause,
    },
    /// A visit was handed out.
    LeaseGranted(Lease),
    /// A lease got more time.
    LeaseExtended {
        /// Which visit.
        visit: VisitId,
        /// When.
        at: Utc,
        /// Its new end.
        expires: Utc,
    },
    /// A visit ended, however it did. A second one for the same visit supersedes the first (an
    /// unreported lease that was settled later).
    VisitEnded {
        /// When it was learnt.
        at: Utc,
        /// Key of the report: the same key again changes nothing.
        report_key: String,
        /// What happened.
        visit: Visit,
    },
    /// A weather sample worth keeping (thinned).
    WeatherNoted(WeatherSample),
    /// A person stopped a target.
    TargetPaused {
        /// When.
        at: Utc,
        /// Which.
        target: TargetId,
        /// Who.
        by: String,
        /// Why.
        reason: String,
    },
    /// A person let it go on.
    TargetResumed {
        /// When.
        at: Utc,
        /// Which.
        target: TargetId,
        /// Who.
        by: String,
    },
    /// A person made it urgent until an instant.
    TargetUrgent {
        /// When.
        at: Utc,
        /// Which.
        target: TargetId,
        /// Until when it must be observed.
        until: Utc,
        /// Who.
        by: String,
        /// Why.
        reason: String,
    },
    /// A person told the observatory to end this visit.
    VisitSkipped {
        /// When.
        at: Utc,
        /// Which.
        visit: VisitId,
        /// Counted as.
        cause: LossCause,
        /// Who.
        by: String,
    },
    /// A person's remark.
    Note {
        /// When.
        at: Utc,
        /// Who.
        by: String,
        /// What.
        text: String,
    },
    /// The wall clock and the monotonic clock disagreed.
    ClockStepped {
        /// Wall clock after the step.
        at: Utc,
        /// By how much it stepped, milliseconds.
        by_ms: i64,
    },
    /// The daemon started again within the night.
    Resumed {
        /// When.
        at: Utc,
    },
    /// Darkness began: from here on visits may be handed out unless something holds the night.
    DarknessBegan {
        /// When.
        at: Utc,
    },
    /// Darkness ended: no visit to a star begins any more.
    DarknessEnded {
        /// When.
        at: Utc,
    },
    /// The night is over and accounted for. A second one supersedes the first (a late report has
    /// changed the account).
    NightClosed(NightSummary),
}

impl Fact {
    /// When it became so, where the fact itself says it: the opening and the close of a night are
    /// told by the night's own bounds.
    pub fn at(&self) -> Option<Utc> {
        match self {
            Fact::NightOpened { .. } | Fact::NightClosed(_) => None,
            Fact::PlanPublished(revision) => Some(revision.made_at),
            Fact::LeaseGranted(lease) => Some(lease.granted),
            Fact::WeatherNoted(sample) => Some(sample.at),
            Fact::HoldBegan { at, .. }
            | Fact::HoldEnded { at, .. }
            | Fact::LeaseExtended { at, .. }
            | Fact::VisitEnded { at, .. }
            | Fact::TargetPaused { at, .. }
            | Fact::TargetResumed { at, .. }
            | Fact::TargetUrgent { at, .. }
            | Fact::VisitSkipped { at, .. }
            | Fact::Note { at, .. }
            | Fact::ClockStepped { at, .. }
            | Fact::DarknessBegan { at }
            | Fact::DarknessEnded { at }
            | Fact::Resumed { at } => Some(*at),
        }
    }
}
