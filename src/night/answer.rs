//! From the night's request for a plan to what the planner is asked, and back to a revision.

use std::sync::Arc;

use super::{Lease, PlanRequest};
use crate::plan::{Ask, Planned, Published, Urgent, Wind};
use crate::record::{Outcome, PlanRevision, Visit};
use crate::time::{NightDate, Span};
use crate::weather::Quantity;

/// What the planner is asked for by a request.
pub fn ask_of(request: &PlanRequest) -> Ask {
    let weather = request.weather.as_ref();
    let value = |quantity| weather.and_then(|sample| sample.values.get(&quantity).copied());
    let wind = value(Quantity::WindMS)
        .zip(weather.and_then(|sample| sample.wind_from))
        .map(|(speed_m_s, from)| Wind { speed_m_s, from });
    let fixed = request.fixed.as_deref();
    let fixed = fixed.map(|lease| as_planned(lease, request.night));
    let published = request.previous.iter().flat_map(|plan| &plan.entries);
    Ask {
        from: request.from,
        pointing_at: request
            .fixed
            .as_ref()
            .map(|lease| lease.entry.subject.clone()),
        tonight: request
            .tonight
            .iter()
            .map(|visit| Visit::clone(Arc::as_ref(visit)))
            .chain(fixed)
            .collect(),
        paused: request
            .paused
            .iter()
            .chain(&request.avoid)
            .cloned()
            .collect(),
        urgent: request
            .urgent
            .iter()
            .map(|(target, until)| Urgent {
                target: target.clone(),
                until: *until,
            })
            .collect(),
        wind,
        zenith_seeing_arcsec: value(Quantity::SeeingArcsec),
        published: published
            .map(|entry| Published {
                subject: entry.subject.clone(),
                start: entry.start,
            })
            .collect(),
    }
}

/// The visit under way as it is meant to end: what comes after it is planned as if it had, or the
/// star that is being observed would be planned again.
fn as_planned(lease: &Lease, night: NightDate) -> Visit {
    let entry = &lease.entry;
    Visit {
        id: lease.visit.clone(),
        night,
        kind: entry.kind,
        subject: entry.subject.clone(),
        began: lease.granted,
        exposing: Span::new(entry.start, entry.end),
        exposed_s: entry.exposures.total_s(),
        planned: entry.exposures,
        outcome: Outcome::Done,
        credit: 1.0,
        airmass: entry.airmass,
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: entry.predicted_rv_error_m_s,
        mid_bjd_tdb: None,
        note: String::new(),
    }
}

/// The revision that answers a request.
pub fn revision_of(request: &PlanRequest, planned: Planned) -> PlanRevision {
    PlanRevision {
        night: request.night,
        number: request.number,
        made_at: request.asked,
        from: request.from,
        cause: request.cause.clone(),
        entries: planned.entries,
        left_out: planned.left_out,
        value: planned.value,
        bound: planned.bound,
    }
}
