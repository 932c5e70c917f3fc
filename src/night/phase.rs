//! The states of a night and the moves between them.

use std::fmt;

/// Where the night stands.
///
/// ```text
///              first queue              darkness begins, nothing holds
///  ┌──────────┐──────────►┌───────┐────────────────────────►┌───────────┐
///  │ Daylight │           │ Ready │                         │ Observing │
///  └──────────┘──┐        └───────┘──┐ darkness begins,     └───────────┘
///    ▲  │  │     │ darkness begins   │ something holds        │ ▲      │
///    │  │  │     │ before a queue    │            a hold began│ │the   │
///    │  │  │     ▼                   ▼                        ▼ │last  │
///    │  │  │  Observing or Held      └───────────────────►┌──────┐hold │ darkness
///    │  │  │                                              │ Held │ended│ ends
///    │  │  │                                              └──────┘     │
///    │  │  │ darkness ends, night not ours     darkness ends│          ▼
///    │  │  └────────────────────────────────────────────────┴──►┌─────────┐
///    │  └── closed with no darkness at all (stays Daylight)     │ Closing │
///    └──────────────────────────── accounted for ──────────────└─────────┘
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub enum Phase {
    /// No queue stands: before the first of the night, in a night that is not ours or has no
    /// darkness, and after the close. Allowed: every act of the operator, late reports. Left when
    /// the first queue is published, or when darkness begins before there is one.
    #[default]
    Daylight,
    /// The queue is published and waits for dusk. Allowed: re-plans, and lamp calibrations whose
    /// time has come while nothing holds. Left when darkness begins.
    Ready,
    /// Dark, and nothing holds. Allowed: everything. Left when a hold begins or darkness ends.
    Observing,
    /// Dark, and at least one cause holds. Allowed: reports and the operator's acts; nothing is
    /// handed out and no lease is extended. Left when the last cause ends or darkness does.
    Held,
    /// Darkness is over. Allowed: the last lease may be reported within a limit, and lamp
    /// calibrations of the queue may still be handed out while nothing holds. Left when the night
    /// is accounted for.
    Closing,
}

/// Every legal move between two different phases.
pub const MOVES: [(Phase, Phase); 10] = [
    (Phase::Daylight, Phase::Ready),
    (Phase::Daylight, Phase::Observing),
    (Phase::Daylight, Phase::Held),
    (Phase::Daylight, Phase::Closing),
    (Phase::Ready, Phase::Observing),
    (Phase::Ready, Phase::Held),
    (Phase::Observing, Phase::Held),
    (Phase::Held, Phase::Observing),
    (Phase::Observing, Phase::Closing),
    (Phase::Held, Phase::Closing),
];

/// The move that ends a night; apart, since it is also the one that starts over.
pub const CLOSE: (Phase, Phase) = (Phase::Closing, Phase::Daylight);

impl Phase {
    /// Whether the table allows the move (staying is always allowed).
    pub fn may_become(self, next: Phase) -> bool {
        self == next || (self, next) == CLOSE || MOVES.contains(&(self, next))
    }

    /// The label in status, files and reports.
    pub const fn label(self) -> &'static str {
        match self {
            Phase::Daylight => "daylight",
            Phase::Ready => "ready",
            Phase::Observing => "observing",
            Phase::Held => "held",
            Phase::Closing => "closing",
        }
    }
}

impl fmt::Display for Phase {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.label())
    }
}
