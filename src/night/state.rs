//! The night's state, and the one function that moves it.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use thiserror::Error;

use super::accounting::may_hand_out;
use super::{Fact, HoldSpan, Lease, NightBounds, NightLog, Phase};
use crate::catalogue::TargetId;
use crate::record::{
    HoldCause, LossCause, NightSummary, Outcome, PlanRevision, QueueEntry, Visit, VisitId,
};
use crate::time::Utc;

/// A fact that cannot follow the ones before it.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum FoldError {
    /// A fact before the night was opened.
    #[error("no night was opened before {fact}")]
    NoNight {
        /// What kind of fact.
        fact: &'static str,
    },
    /// A night opened within another.
    #[error("a night was opened before the one before it was closed")]
    NightWithinNight,
    /// A move that is not in the table.
    #[error("a night cannot go from {from} to {to}")]
    IllegalMove {
        /// From.
        from: Phase,
        /// To.
        to: Phase,
    },
    /// A hold for a cause that holds already.
    #[error("the cause {0:?} holds already")]
    HoldTwice(HoldCause),
    /// The end of a hold that is not on.
    #[error("the cause {0:?} does not hold")]
    NoHold(HoldCause),
    /// A visit handed out where none may be.
    #[error("visit {visit} was handed out while {phase}, or while something held or another ran")]
    NotAllowed {
        /// The visit.
        visit: VisitId,
        /// The phase.
        phase: Phase,
    },
    /// A fact about a visit that was never handed out, or no longer runs.
    #[error("visit {0} is not under way")]
    NoLease(VisitId),
}

/// The visit under way.
#[derive(Clone, Debug, PartialEq)]
struct Live {
    visit: VisitId,
    stopping: Option<LossCause>,
}

/// The queue in force and what of it was handed out.
#[derive(Clone, Debug, PartialEq)]
struct Queue {
    revision: Arc<PlanRevision>,
    taken: BTreeSet<usize>,
}

/// A target that a person stopped.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Pause {
    /// Who.
    pub by: String,
    /// Why.
    pub reason: String,
}

/// A target that a person wants soon.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Urgency {
    /// Until when.
    pub until: Utc,
    /// Who.
    pub by: String,
    /// Why.
    pub reason: String,
}

/// All that is so in a night. Made by folding its facts and by nothing else.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct State {
    phase: Phase,
    log: Option<NightLog>,
    closed: Option<NightSummary>,
    live: Option<Live>,
    queue: Option<Queue>,
    claims: BTreeMap<String, VisitId>,
    reports: BTreeMap<String, VisitId>,
    paused: BTreeMap<TargetId, Pause>,
    urgent: BTreeMap<TargetId, Urgency>,
    failed_starts: BTreeMap<TargetId, u32>,
}

impl State {
    /// The state after these facts of one night, in their order.
    ///
    /// # Errors
    /// [`FoldError`] at the first fact that cannot follow the ones before it.
    pub fn replay(facts: &[Fact]) -> Result<Self, FoldError> {
        let mut state = State::default();
        facts.iter().try_for_each(|fact| state.fold(fact))?;
        Ok(state)
    }

    /// Moves the state on by a fact: in living and in recovery alike.
    ///
    /// # Errors
    /// [`FoldError`] when the fact cannot follow the ones before it; the state is then unusable.
    pub fn fold(&mut self, fact: &Fact) -> Result<(), FoldError> {
        if let Fact::NightOpened {
            night,
            span,
            darkness,
            ours,
            mode,
        } = fact
        {
            return self.open(NightBounds {
                night: *night,
                span: *span,
                darkness: *darkness,
                ours: *ours,
                mode: *mode,
            });
        }
        self.check(fact)?;
        match &mut self.log {
            Some(log) => log.take(fact),
            None => return Err(FoldError::NoNight { fact: name(fact) }),
        }
        self.apply(fact)?;
        let next = self.phase_after(fact);
        self.enter(next)
    }

    /// Where the night stands.
    pub fn phase(&self) -> Phase {
        self.phase
    }

    /// The night's bounds; `None` before the first night.
    pub fn bounds(&self) -> Option<&NightBounds> {
        self.log.as_ref().map(|log| &log.bounds)
    }

    /// The night's record so far.
    pub fn log(&self) -> Option<&NightLog> {
        self.log.as_ref()
    }

    /// The account, once the night is closed.
    pub fn closed(&self) -> Option<&NightSummary> {
        self.closed.as_ref()
    }

    /// A night was opened and not closed.
    pub fn is_open(&self) -> bool {
        self.log.is_some() && self.closed.is_none()
    }

    /// The holds that are on, in the order in which they began.
    pub fn holds(&self) -> impl Iterator<Item = &HoldSpan> {
        let holds = self.log.as_ref().map_or(&[][..], |log| &log.holds);
        holds.iter().filter(|hold| hold.ended.is_none())
    }

    /// Whether this cause holds.
    pub fn is_held_by(&self, cause: HoldCause) -> bool {
        self.holds().any(|hold| hold.cause == cause)
    }

    /// The visit under way.
    pub fn lease(&self) -> Option<&Arc<Lease>> {
        let live = self.live.as_ref()?;
        let record = self.log.as_ref()?.leases.get(&live.visit)?;
        Some(&record.lease)
    }

    /// Why the visit under way must end, if it must.
    pub fn stopping(&self) -> Option<LossCause> {
        self.live.as_ref()?.stopping
    }

    /// The queue in force.
    pub fn queue(&self) -> Option<&Arc<PlanRevision>> {
        self.queue.as_ref().map(|queue| &queue.revision)
    }

    /// The entries of the queue in force that were not handed out and are not paused, in order.
    pub fn entries_left(&self) -> impl Iterator<Item = &QueueEntry> {
        self.queue.iter().flat_map(|queue| {
            let entries = queue.revision.entries.iter().enumerate();
            entries
                .filter(|(index, entry)| {
                    !queue.taken.contains(index) && !self.paused.contains_key(&entry.subject)
                })
                .map(|(_, entry)| entry)
        })
    }

    /// The visit that a claim's key got.
    pub fn claimed_as(&self, key: &str) -> Option<&VisitId> {
        self.claims.get(key)
    }

    /// The visit that a report's key told of.
    pub fn reported_as(&self, key: &str) -> Option<&VisitId> {
        self.reports.get(key)
    }

    /// A visit of this night that has ended, as it stands.
    pub fn ended(&self, visit: &VisitId) -> Option<&Arc<Visit>> {
        self.log.as_ref()?.leases.get(visit)?.visit.as_ref()
    }

    /// Targets that a person stopped.
    pub fn paused(&self) -> &BTreeMap<TargetId, Pause> {
        &self.paused
    }

    /// Targets that a person wants, some of them perhaps past their instant.
    pub fn urgent(&self) -> &BTreeMap<TargetId, Urgency> {
        &self.urgent
    }

    /// Subjects that were refused or not found tonight, with how often.
    pub fn failed_starts(&self) -> &BTreeMap<TargetId, u32> {
        &self.failed_starts
    }

    /// Name of the next visit to be handed out.
    pub fn next_visit(&self) -> Option<VisitId> {
        let log = self.log.as_ref()?;
        let number = u32::try_from(log.leases.len() + 1).ok()?;
        Some(VisitId::of(log.bounds.night, number))
    }

    /// Number of the next revision.
    pub fn next_revision(&self) -> u32 {
        self.queue.as_ref().map_or(1, |q| q.revision.number + 1)
    }

    fn open(&mut self, bounds: NightBounds) -> Result<(), FoldError> {
        if self.is_open() {
            return Err(FoldError::NightWithinNight);
        }
        *self = State {
            log: Some(NightLog::new(bounds)),
            ..State::default()
        };
        Ok(())
    }

    /// What must be so before the fact.
    fn check(&self, fact: &Fact) -> Result<(), FoldError> {
        match fact {
            Fact::HoldBegan { cause, .. } if self.is_held_by(*cause) => {
                Err(FoldError::HoldTwice(*cause))
            }
            Fact::HoldEnded { cause, .. } if !self.is_held_by(*cause) => {
                Err(FoldError::NoHold(*cause))
            }
            Fact::LeaseGranted(lease) => {
                let allowed = may_hand_out(self.phase, lease.entry.kind)
                    && self.live.is_none()
                    && self.holds().next().is_none();
                let refuse = || FoldError::NotAllowed {
                    visit: lease.visit.clone(),
                    phase: self.phase,
                };
                allowed.then_some(()).ok_or_else(refuse)
            }
            Fact::LeaseExtended { visit, .. } | Fact::VisitSkipped { visit, .. } => self
                .live
                .as_ref()
                .filter(|live| live.visit == *visit)
                .map(|_| ())
                .ok_or_else(|| FoldError::NoLease(visit.clone())),
            Fact::VisitEnded { visit, .. } => {
                let known = self
                    .log
                    .as_ref()
                    .is_some_and(|log| log.leases.contains_key(&visit.id));
                known
                    .then_some(())
                    .ok_or_else(|| FoldError::NoLease(visit.id.clone()))
            }
            Fact::NightClosed(_) => match &self.live {
                Some(live) => Err(FoldError::NoLease(live.visit.clone())),
                None => Ok(()),
            },
            _ => Ok(()),
        }
    }

    fn apply(&mut self, fact: &Fact) -> Result<(), FoldError> {
        match fact {
            Fact::HoldBegan { cause, .. } => self.stop_live(loss_by(*cause)),
            Fact::VisitSkipped { cause, .. } => self.stop_live(Some(*cause)),
            Fact::PlanPublished(_) => {
                let newest = self.log.as_ref().and_then(|log| log.revisions.last());
                self.queue = newest.map(|(_, revision)| Queue {
                    revision: Arc::clone(revision),
                    taken: BTreeSet::new(),
                });
            }
            Fact::LeaseGranted(lease) => self.grant(lease),
            Fact::VisitEnded {
                report_key, visit, ..
            } => self.end_visit(report_key, visit),
            Fact::TargetPaused {
                target, by, reason, ..
            } => {
                let pause = Pause {
                    by: by.clone(),
                    reason: reason.clone(),
                };
                self.paused.insert(target.clone(), pause);
            }
            Fact::TargetResumed { target, .. } => {
                self.paused.remove(target);
            }
            Fact::TargetUrgent {
                target,
                until,
                by,
                reason,
                ..
            } => {
                let urgency = Urgency {
                    until: *until,
                    by: by.clone(),
                    reason: reason.clone(),
                };
                self.urgent.insert(target.clone(), urgency);
            }
            Fact::NightClosed(summary) => self.closed = Some(summary.clone()),
            _ => {}
        }
        Ok(())
    }

    fn stop_live(&mut self, cause: Option<LossCause>) {
        if let Some(live) = &mut self.live {
            live.stopping = live.stopping.or(cause);
        }
    }

    fn grant(&mut self, lease: &Lease) {
        if let Some(queue) = &mut self.queue
            && queue.revision.number == lease.revision
        {
            let same =
                |e: &QueueEntry| e.start == lease.entry.start && e.subject == lease.entry.subject;
            queue
                .taken
                .extend(queue.revision.entries.iter().position(same));
        }
        self.claims
            .insert(lease.claim_key.clone(), lease.visit.clone());
        self.live = Some(Live {
            visit: lease.visit.clone(),
            stopping: None,
        });
    }

    fn end_visit(&mut self, report_key: &str, visit: &Visit) {
        self.reports.insert(report_key.to_owned(), visit.id.clone());
        if self
            .live
            .as_ref()
            .is_some_and(|live| live.visit == visit.id)
        {
            self.live = None;
        }
        match visit.outcome {
            Outcome::Done => {
                self.urgent.remove(&visit.subject);
            }
            Outcome::Refused | Outcome::Lost(LossCause::Acquisition) => {
                *self.failed_starts.entry(visit.subject.clone()).or_default() += 1;
            }
            _ => {}
        }
    }

    fn phase_after(&self, fact: &Fact) -> Phase {
        let held = self.holds().next().is_some();
        let dark = if held { Phase::Held } else { Phase::Observing };
        match (fact, self.phase) {
            (Fact::PlanPublished(_), Phase::Daylight) => Phase::Ready,
            (Fact::DarknessBegan { .. }, _) => dark,
            (Fact::DarknessEnded { .. }, _) => Phase::Closing,
            (Fact::HoldBegan { .. } | Fact::HoldEnded { .. }, Phase::Observing | Phase::Held) => {
                dark
            }
            (Fact::NightClosed(_), _) => Phase::Daylight,
            (_, phase) => phase,
        }
    }

    fn enter(&mut self, next: Phase) -> Result<(), FoldError> {
        if !self.phase.may_become(next) {
            return Err(FoldError::IllegalMove {
                from: self.phase,
                to: next,
            });
        }
        self.phase = next;
        Ok(())
    }
}

/// What a visit that such a hold stops is lost to. A ledger that cannot be written stops none:
/// nothing is unsafe, and the report is asked for again until it can be kept.
pub(super) fn loss_by(cause: HoldCause) -> Option<LossCause> {
    match cause {
        HoldCause::Weather | HoldCause::FeedLost => Some(LossCause::Weather),
        HoldCause::Instrument => Some(LossCause::Instrument),
        HoldCause::Operator => Some(LossCause::Operator),
        HoldCause::Ledger => None,
    }
}

/// The fact's kind, for messages.
fn name(fact: &Fact) -> &'static str {
    match fact {
        Fact::NightOpened { .. } => "the opening of a night",
        Fact::PlanPublished(_) => "a queue",
        Fact::HoldBegan { .. } | Fact::HoldEnded { .. } => "a hold",
        Fact::LeaseGranted(_) | Fact::LeaseExtended { .. } => "a lease",
        Fact::VisitEnded { .. } | Fact::VisitSkipped { .. } => "a visit",
        Fact::WeatherNoted(_) => "a weather sample",
        Fact::TargetPaused { .. } | Fact::TargetResumed { .. } | Fact::TargetUrgent { .. } => {
            "a word on a target"
        }
        Fact::Note { .. } => "a note",
        Fact::ClockStepped { .. } => "a step of the clock",
        Fact::DarknessBegan { .. } | Fact::DarknessEnded { .. } => "an edge of darkness",
        Fact::Resumed { .. } => "a restart",
        Fact::NightClosed(_) => "the close of a night",
    }
}
