//! What a plan is asked for: the part of a night that is left, and what is different tonight.

use std::collections::BTreeSet;

use crate::catalogue::TargetId;
use crate::record::{EntryKind, Outcome, Visit};
use crate::time::Utc;

use super::limits::Wind;

/// A target that must be observed before an instant.
#[derive(Clone, Debug, PartialEq)]
pub struct Urgent {
    /// Which.
    pub target: TargetId,
    /// Until when.
    pub until: Utc,
}

/// What is asked of the planner.
#[derive(Clone, Debug, PartialEq)]
pub struct Ask {
    /// The telescope is free from here on.
    pub from: Utc,
    /// The star that it points at then, if any.
    pub pointing_at: Option<TargetId>,
    /// Visits of this night so far, ended ones alone, in order of time. They count for separations,
    /// calibrations and attempts; what they are worth is already in the standings.
    pub tonight: Vec<Visit>,
    /// Targets that a person paused, besides those that the configuration pauses.
    pub paused: BTreeSet<TargetId>,
    /// Targets that a person made urgent.
    pub urgent: Vec<Urgent>,
    /// The wind now, taken to stay.
    pub wind: Option<Wind>,
    /// The zenith seeing now, arcseconds, taken to stay; `None`: the typical one.
    pub zenith_seeing_arcsec: Option<f64>,
    /// Order that was published and is kept unless change gains enough; empty: none.
    pub published: Vec<Published>,
}

/// An entry of the queue that was published before.
#[derive(Clone, Debug, PartialEq)]
pub struct Published {
    /// The target, or the calibration's name.
    pub subject: TargetId,
    /// When its first exposure was to start.
    pub start: Utc,
}

impl Ask {
    /// A whole night, with nothing out of the ordinary.
    pub fn whole_night(from: Utc) -> Self {
        Ask {
            from,
            pointing_at: None,
            tonight: Vec::new(),
            paused: BTreeSet::new(),
            urgent: Vec::new(),
            wind: None,
            zenith_seeing_arcsec: None,
            published: Vec::new(),
        }
    }

    /// Visits to this subject in the night so far.
    pub(super) fn visits_to<'a>(&'a self, subject: &'a str) -> impl Iterator<Item = &'a Visit> {
        self.tonight
            .iter()
            .filter(move |visit| visit.subject.as_str() == subject)
    }

    /// Science visits to this target that counted at least half.
    pub(super) fn credited_visits(&self, subject: &str) -> u32 {
        let counted = self
            .visits_to(subject)
            .filter(|visit| visit.kind == EntryKind::Science && visit.credit >= 0.5);
        counted.count() as u32
    }

    /// Attempts at this target that came to nothing.
    pub(super) fn failed_attempts(&self, subject: &str) -> u32 {
        let failed = self.visits_to(subject).filter(|visit| {
            matches!(
                visit.outcome,
                Outcome::Refused | Outcome::Unreported | Outcome::Lost(_)
            )
        });
        failed.count() as u32
    }
}
