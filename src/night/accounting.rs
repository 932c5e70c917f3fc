//! Where the darkness went: the whole of it, with no gap and no overlap.

use super::{NightLog, Phase};
use crate::record::{
    DarknessSplit, EntryKind, HoldCause, IdleCause, NightSummary, Outcome, QueueEntry, VisitCounts,
};
use crate::time::{Span, SpanSet, Utc};

/// What a moment of darkness counts as.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Use {
    Exposing,
    Calibration,
    Overhead,
    Held(HoldCause),
    Idle(IdleCause),
}

/// A lease's time and its visit's exposing time.
struct Occupied {
    whole: Span,
    exposing: Span,
    science: bool,
    gave_something: bool,
}

/// An entry on offer: from when it could be claimed, and when it was.
struct Offered {
    opens: Utc,
    taken: Option<Utc>,
}

/// A revision's offers over the time in which it was in force.
struct InForce {
    span: Span,
    offers: Vec<Offered>,
}

/// Splits the whole of darkness. Every millisecond counts once, for the first of these that is so:
///
/// 1. a shutter was open: *exposing* for a target, *calibration* for a standard or a lamp. A visit
///    that was credited nothing (lost, refused, unreported) is overhead from end to end;
/// 2. the night or this span of it is not ours: *idle, not ours*;
/// 3. a hold was on: *held*, for the first cause in the order of [`HoldCause::ALL`];
/// 4. a lease ran: *calibration* for a standard or a lamp, *overhead* for a target;
/// 5. an entry of the queue in force could have been claimed: *idle, unclaimed*;
/// 6. an entry is still to come, or there is no queue yet: *idle, waiting*;
/// 7. the queue in force has nothing left: *idle, nothing to observe*.
///
/// A hold or lease that is still open counts to the end of darkness. All causes are in the maps,
/// at zero where nothing was lost to them.
pub fn split(log: &NightLog, blocked: &SpanSet) -> DarknessSplit {
    let mut split = DarknessSplit {
        held_ms: HoldCause::ALL.iter().map(|cause| (*cause, 0)).collect(),
        idle_ms: IdleCause::ALL.iter().map(|cause| (*cause, 0)).collect(),
        ..DarknessSplit::default()
    };
    let Some(darkness) = log.bounds.darkness else {
        return split;
    };
    let ledger = Sources::of(log, darkness, blocked);
    let edges = ledger.edges(darkness);
    for pair in edges.windows(2) {
        let length = pair[1] - pair[0];
        *match ledger.use_at(pair[0]) {
            Use::Exposing => &mut split.exposing_ms,
            Use::Calibration => &mut split.calibration_ms,
            Use::Overhead => &mut split.overhead_ms,
            Use::Held(cause) => split.held_ms.entry(cause).or_default(),
            Use::Idle(cause) => split.idle_ms.entry(cause).or_default(),
        } += length;
    }
    split
}

/// Counts visits to targets and standards by outcome.
pub fn count(log: &NightLog) -> VisitCounts {
    let mut counts = VisitCounts::default();
    for visit in log.visits().filter(|v| v.kind != EntryKind::Calibration) {
        *match visit.outcome {
            Outcome::Done => &mut counts.done,
            Outcome::Short => &mut counts.short,
            Outcome::Lost(_) => &mut counts.lost,
            Outcome::Refused => &mut counts.refused,
            Outcome::Unreported => &mut counts.unreported,
        } += 1;
    }
    counts
}

/// The night's account as it stands.
pub fn summary(log: &NightLog, blocked: &SpanSet) -> NightSummary {
    NightSummary {
        night: log.bounds.night,
        darkness: log.bounds.darkness,
        split: split(log, blocked),
        visits: count(log),
    }
}

/// When an entry may be claimed: its setup may begin then.
pub fn opens(entry: &QueueEntry) -> Utc {
    entry.start.plus_ms(-seconds_ms(entry.setup_s))
}

/// Whole milliseconds of so many seconds.
pub(super) fn seconds_ms(seconds: f64) -> i64 {
    (seconds * 1000.0).round() as i64
}

/// Whether an entry of this kind may be handed out in that phase while nothing holds: lamps need
/// no darkness.
pub(super) fn may_hand_out(phase: Phase, kind: EntryKind) -> bool {
    match phase {
        Phase::Observing => true,
        Phase::Ready | Phase::Closing => kind == EntryKind::Calibration,
        Phase::Daylight | Phase::Held => false,
    }
}

/// All that a moment is judged by.
struct Sources {
    ours: bool,
    blocked: SpanSet,
    occupied: Vec<Occupied>,
    holds: Vec<(HoldCause, Span)>,
    queues: Vec<InForce>,
}

impl Sources {
    fn of(log: &NightLog, darkness: Span, blocked: &SpanSet) -> Self {
        Sources {
            ours: log.bounds.ours,
            blocked: blocked.intersect(&SpanSet::from(darkness)),
            occupied: occupied(log, darkness.end),
            holds: log
                .holds
                .iter()
                .map(|h| (h.cause, Span::new(h.began, h.ended.unwrap_or(darkness.end))))
                .collect(),
            queues: queues(log, darkness.end),
        }
    }

    /// Every instant at which the use may change, with both ends of darkness.
    fn edges(&self, darkness: Span) -> Vec<Utc> {
        let blocked = self.blocked.spans().iter();
        let holds = self.holds.iter().map(|(_, span)| span);
        let busy = self.occupied.iter().flat_map(|b| [&b.whole, &b.exposing]);
        let queues = self.queues.iter().map(|queue| &queue.span);
        let mut edges: Vec<Utc> = [&darkness]
            .into_iter()
            .chain(blocked)
            .chain(holds)
            .chain(busy)
            .chain(queues)
            .flat_map(|span| [span.start, span.end])
            .collect();
        for queue in &self.queues {
            let inside = queue.offers.iter().flat_map(|o| [Some(o.opens), o.taken]);
            edges.extend(inside.flatten().filter(|at| queue.span.contains(*at)));
        }
        edges.retain(|at| darkness.start <= *at && *at <= darkness.end);
        edges.sort_unstable();
        edges.dedup();
        edges
    }

    fn use_at(&self, at: Utc) -> Use {
        let exposing = self
            .occupied
            .iter()
            .find(|busy| busy.gave_something && busy.exposing.contains(at));
        if let Some(busy) = exposing {
            return if busy.science {
                Use::Exposing
            } else {
                Use::Calibration
            };
        }
        if !self.ours || self.blocked.contains(at) {
            return Use::Idle(IdleCause::NotOurs);
        }
        let holds = |cause: &&HoldCause| {
            self.holds
                .iter()
                .any(|(c, span)| c == *cause && span.contains(at))
        };
        if let Some(cause) = HoldCause::ALL.iter().find(holds) {
            return Use::Held(*cause);
        }
        match self.occupied.iter().find(|busy| busy.whole.contains(at)) {
            Some(busy) if busy.science || !busy.gave_something => Use::Overhead,
            Some(_) => Use::Calibration,
            None => Use::Idle(self.idle_at(at)),
        }
    }

    fn idle_at(&self, at: Utc) -> IdleCause {
        let Some(queue) = self.queues.iter().rev().find(|q| q.span.contains(at)) else {
            return IdleCause::Waiting;
        };
        let mut left = queue
            .offers
            .iter()
            .filter(|o| o.taken.is_none_or(|taken| at < taken))
            .peekable();
        if left.peek().is_none() {
            IdleCause::NothingToObserve
        } else if left.any(|offer| offer.opens <= at) {
            IdleCause::Unclaimed
        } else {
            IdleCause::Waiting
        }
    }
}

fn occupied(log: &NightLog, until: Utc) -> Vec<Occupied> {
    log.leases
        .values()
        .map(|record| {
            let whole = Span::new(record.lease.granted, record.ended.unwrap_or(until));
            let visit = record.visit.as_deref();
            Occupied {
                whole,
                exposing: visit.map_or(Span::new(whole.start, whole.start), |v| v.exposing),
                science: record.lease.entry.kind == EntryKind::Science,
                gave_something: visit.is_some_and(|v| v.credit > 0.0),
            }
        })
        .collect()
}

fn queues(log: &NightLog, until: Utc) -> Vec<InForce> {
    let ends = log.revisions.iter().skip(1).map(|(since, _)| *since);
    log.revisions
        .iter()
        .zip(ends.chain([until]))
        .map(|((since, revision), end)| InForce {
            span: Span::new(*since, end),
            offers: revision
                .entries
                .iter()
                .map(|entry| Offered {
                    opens: opens(entry),
                    taken: log
                        .leases
                        .values()
                        .find(|r| {
                            r.lease.revision == revision.number
                                && r.lease.entry.start == entry.start
                                && r.lease.entry.subject == entry.subject
                        })
                        .map(|r| r.lease.granted),
                })
                .collect(),
        })
        .collect()
}

#[cfg(test)]
mod tests;
