//! A night told from its facts.

use std::sync::Arc;

use super::accounting::summary;
use super::{Fact, NightBounds, NightLog};
use crate::catalogue::TargetId;
use crate::record::{Hold, NightSummary, PlanCause, Visit, VisitId};
use crate::time::{SpanSet, Utc};
use crate::weather::WeatherSample;

/// A revision in short.
#[derive(Clone, Debug, PartialEq)]
pub struct RevisionNote {
    /// Its number.
    pub number: u32,
    /// When it was made.
    pub made_at: Utc,
    /// Why.
    pub cause: PlanCause,
    /// How many entries it had.
    pub entries: usize,
    /// Its value.
    pub value: f64,
    /// What no plan could have beaten, where proven.
    pub bound: Option<f64>,
}

/// A person's act or the night keeper's own remark.
#[derive(Clone, Debug, PartialEq)]
pub struct Remark {
    /// When.
    pub at: Utc,
    /// Who; `None`: the night keeper itself.
    pub by: Option<String>,
    /// What.
    pub text: String,
}

/// Everything that a night's report tells, for any rendering.
#[derive(Clone, Debug, PartialEq)]
pub struct NightReport {
    /// Bounds and mode.
    pub bounds: NightBounds,
    /// The account: as it was closed, or as it stands when the night is still open.
    pub summary: NightSummary,
    /// The night is closed.
    pub closed: bool,
    /// Holds in the order in which they began; one still on ends with darkness.
    pub holds: Vec<Hold>,
    /// Visits that ended, in order, as they stand.
    pub visits: Vec<Arc<Visit>>,
    /// A visit that has not ended.
    pub under_way: Option<(VisitId, TargetId)>,
    /// Revisions in order.
    pub revisions: Vec<RevisionNote>,
    /// Acts and remarks in order.
    pub remarks: Vec<Remark>,
    /// Weather kept, in order.
    pub weather: Vec<WeatherSample>,
}

impl NightReport {
    /// The report of these facts of one night; `None` when they do not begin with its opening.
    /// `blocked` are the spans that were not ours, for a night that is still open.
    pub fn from_facts(facts: &[Fact], blocked: &SpanSet) -> Option<Self> {
        let log = NightLog::gather(facts)?;
        let closed = facts.iter().rev().find_map(|fact| match fact {
            Fact::NightClosed(summary) => Some(summary.clone()),
            _ => None,
        });
        let bounds = log.bounds;
        let end = bounds.darkness.map_or(bounds.span.end, |d| d.end);
        let running = log.leases.values().find(|record| record.visit.is_none());
        Some(NightReport {
            bounds,
            closed: closed.is_some(),
            summary: closed.unwrap_or_else(|| summary(&log, blocked)),
            holds: log.holds_until(end),
            visits: log.visits().map(Arc::clone).collect(),
            under_way: running.map(|r| (r.lease.visit.clone(), r.lease.entry.subject.clone())),
            revisions: facts.iter().filter_map(revision_note).collect(),
            remarks: facts.iter().filter_map(remark).collect(),
            weather: facts.iter().filter_map(weather).collect(),
        })
    }
}

fn weather(fact: &Fact) -> Option<WeatherSample> {
    match fact {
        Fact::WeatherNoted(sample) => Some(sample.clone()),
        _ => None,
    }
}

fn revision_note(fact: &Fact) -> Option<RevisionNote> {
    match fact {
        Fact::PlanPublished(revision) => Some(RevisionNote {
            number: revision.number,
            made_at: revision.made_at,
            cause: revision.cause.clone(),
            entries: revision.entries.len(),
            value: revision.value,
            bound: revision.bound,
        }),
        _ => None,
    }
}

fn remark(fact: &Fact) -> Option<Remark> {
    let (at, by, text) = match fact {
        Fact::Note { at, by, text } => (at, Some(by), text.clone()),
        Fact::TargetPaused {
            at,
            target,
            by,
            reason,
        } => (at, Some(by), format!("paused {target}: {reason}")),
        Fact::TargetResumed { at, target, by } => (at, Some(by), format!("resumed {target}")),
        Fact::TargetUrgent {
            at,
            target,
            until,
            by,
            reason,
        } => (
            at,
            Some(by),
            format!("wants {target} before {until}: {reason}"),
        ),
        Fact::VisitSkipped { at, visit, by, .. } => (at, Some(by), format!("ended visit {visit}")),
        Fact::ClockStepped { at, by_ms } => (
            at,
            None,
            format!("the wall clock stepped by {:.3} s", *by_ms as f64 / 1000.0),
        ),
        Fact::Resumed { at } => (at, None, "came back after a restart".to_owned()),
        _ => return None,
    };
    Some(Remark {
        at: *at,
        by: by.cloned(),
        text,
    })
}
