//! What of a night's facts its account and its report rest on.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::{Fact, Lease, RunMode};
use crate::record::{Hold, HoldCause, PlanRevision, Visit, VisitId};
use crate::time::{NightDate, Span, Utc};

/// A hold as it is known so far.
#[derive(Clone, Debug, PartialEq)]
pub struct HoldSpan {
    /// Why.
    pub cause: HoldCause,
    /// From when.
    pub began: Utc,
    /// Until when; `None`: it still holds.
    pub ended: Option<Utc>,
    /// In words, with the values that decided.
    pub detail: Arc<str>,
}

/// A lease and what became of it.
#[derive(Clone, Debug, PartialEq)]
pub struct LeaseRecord {
    /// As it was granted.
    pub lease: Arc<Lease>,
    /// When it ended (first word of its end, be it a report or the expiry).
    pub ended: Option<Utc>,
    /// Its visit as it stands now.
    pub visit: Option<Arc<Visit>>,
}

/// The night's bounds as they were computed when it began.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NightBounds {
    /// The night.
    pub night: NightDate,
    /// Noon to noon.
    pub span: Span,
    /// `None`: no darkness.
    pub darkness: Option<Span>,
    /// The night is ours.
    pub ours: bool,
    /// Real or not.
    pub mode: RunMode,
}

/// The night's record in memory, gathered fact by fact.
///
/// Wall-clock instants taken before a step of the wall clock are moved by it when the step becomes
/// known, since the clock is believed to be right after the step (a time service has set it); so
/// every span keeps its true length. Times that the observatory gave are its own and stay.
#[derive(Clone, Debug, PartialEq)]
pub struct NightLog {
    /// The night's bounds.
    pub bounds: NightBounds,
    /// Holds in the order in which they began.
    pub holds: Vec<HoldSpan>,
    /// Leases by visit, which is the order in which they were granted.
    pub leases: BTreeMap<VisitId, LeaseRecord>,
    /// Revisions in order, each with the instant from which it was in force.
    pub revisions: Vec<(Utc, Arc<PlanRevision>)>,
}

impl NightLog {
    /// The log of a night that has just begun.
    pub fn new(bounds: NightBounds) -> Self {
        NightLog {
            bounds,
            holds: Vec::new(),
            leases: BTreeMap::new(),
            revisions: Vec::new(),
        }
    }

    /// The log of a whole night; `None` when the facts do not begin with its opening.
    pub fn gather(facts: &[Fact]) -> Option<Self> {
        let mut facts = facts.iter();
        let mut log = match facts.next()? {
            Fact::NightOpened {
                night,
                span,
                darkness,
                ours,
                mode,
            } => NightLog::new(NightBounds {
                night: *night,
                span: *span,
                darkness: *darkness,
                ours: *ours,
                mode: *mode,
            }),
            _ => return None,
        };
        facts.for_each(|fact| log.take(fact));
        Some(log)
    }

    /// Takes note of a fact; those that the account does not rest on change nothing.
    pub fn take(&mut self, fact: &Fact) {
        match fact {
            Fact::HoldBegan { at, cause, detail } => self.holds.push(HoldSpan {
                cause: *cause,
                began: *at,
                ended: None,
                detail: Arc::from(detail.as_str()),
            }),
            Fact::HoldEnded { at, cause } => {
                if let Some(hold) = self.open_hold_mut(*cause) {
                    hold.ended = Some(*at);
                }
            }
            Fact::LeaseGranted(lease) => {
                self.leases.insert(
                    lease.visit.clone(),
                    LeaseRecord {
                        lease: Arc::new(lease.clone()),
                        ended: None,
                        visit: None,
                    },
                );
            }
            Fact::LeaseExtended { visit, expires, .. } => {
                if let Some(record) = self.leases.get_mut(visit) {
                    Arc::make_mut(&mut record.lease).expires = *expires;
                }
            }
            Fact::VisitEnded { at, visit, .. } => {
                if let Some(record) = self.leases.get_mut(&visit.id) {
                    record.ended.get_or_insert(*at);
                    record.visit = Some(Arc::new(visit.clone()));
                }
            }
            Fact::PlanPublished(revision) => self
                .revisions
                .push((revision.made_at, Arc::new(revision.clone()))),
            Fact::ClockStepped { by_ms, .. } => self.move_by(*by_ms),
            _ => {}
        }
    }

    /// The holds as values, those still open ending at `until`.
    pub fn holds_until(&self, until: Utc) -> Vec<Hold> {
        self.holds
            .iter()
            .map(|hold| Hold {
                cause: hold.cause,
                span: Span::new(hold.began, hold.ended.unwrap_or(until)),
                detail: hold.detail.to_string(),
            })
            .collect()
    }

    /// The visits that have ended, in the order of their leases.
    pub fn visits(&self) -> impl Iterator<Item = &Arc<Visit>> {
        self.leases.values().filter_map(|r| r.visit.as_ref())
    }

    fn open_hold_mut(&mut self, cause: HoldCause) -> Option<&mut HoldSpan> {
        self.holds
            .iter_mut()
            .rev()
            .find(|hold| hold.cause == cause && hold.ended.is_none())
    }

    fn move_by(&mut self, by_ms: i64) {
        for hold in &mut self.holds {
            hold.began = hold.began.plus_ms(by_ms);
            hold.ended = hold.ended.map(|at| at.plus_ms(by_ms));
        }
        for record in self.leases.values_mut() {
            let lease = Arc::make_mut(&mut record.lease);
            lease.granted = lease.granted.plus_ms(by_ms);
            lease.expires = lease.expires.plus_ms(by_ms);
            record.ended = record.ended.map(|at| at.plus_ms(by_ms));
        }
        for (since, _) in &mut self.revisions {
            *since = since.plus_ms(by_ms);
        }
    }
}
