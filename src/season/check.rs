//! Whether a simulated night kept to its rules: a season is a test of the night code.

use std::collections::BTreeMap;

use crate::catalogue::Survey;
use crate::night::Fact;
use crate::plan::SkyTable;
use crate::record::{EntryKind, Hold, HoldCause, NightSummary, QueueEntry, Visit};
use crate::time::{MINUTE_MS, Span, Utc};

/// Looks for what must never be. `visits` are those of the night, in order of time.
///
/// # Errors
/// What was broken, in words.
pub(super) fn night(
    survey: &Survey,
    sky: &SkyTable,
    facts: &[Fact],
    (summary, visits): (&NightSummary, &[Visit]),
) -> Result<(), String> {
    let darkness_ms = sky.darkness.map_or(0, |span| span.length_ms());
    let total_ms = summary.split.total_ms();
    if total_ms != darkness_ms {
        return Err(format!(
            "{darkness_ms} ms of darkness were split into {total_ms} ms"
        ));
    }
    let stars: BTreeMap<&str, usize> = survey
        .targets
        .iter()
        .enumerate()
        .map(|(star, target)| (target.id.as_str(), star))
        .collect();
    let holds = holds(facts, sky.night.span.end);
    for fact in facts {
        match fact {
            Fact::PlanPublished(revision) => {
                for entry in &revision.entries {
                    within_limits(sky, &stars, entry)?;
                }
            }
            Fact::LeaseGranted(lease) => {
                let held = holds.iter().find(|hold| hold.span.contains(lease.granted));
                if let Some(hold) = held {
                    let cause = hold.cause.label();
                    let visit = &lease.visit;
                    return Err(format!(
                        "{visit} was handed out while {cause} held the night"
                    ));
                }
            }
            _ => {}
        }
    }
    let mut exposed = visits.iter().filter(|v| v.credit > 0.0);
    let Some(mut before) = exposed.next() else {
        return Ok(());
    };
    for visit in exposed {
        if visit.exposing.start < before.exposing.end {
            return Err(format!("{} and {} overlap", before.id, visit.id));
        }
        before = visit;
    }
    Ok(())
}

/// Every minute of a planned visit keeps every limit of sky, mount and allocation.
fn within_limits(
    sky: &SkyTable,
    stars: &BTreeMap<&str, usize>,
    entry: &QueueEntry,
) -> Result<(), String> {
    if entry.kind != EntryKind::Science {
        return Ok(());
    }
    let Some(night) = stars
        .get(entry.subject.as_str())
        .and_then(|star| sky.stars.get(*star))
    else {
        return Err(format!("{} is planned and not on the list", entry.subject));
    };
    let slot_of = |at: Utc| (at - sky.instant(0)).div_euclid(MINUTE_MS);
    for slot in slot_of(entry.start)..=slot_of(entry.end.plus_ms(-1)) {
        let slot = usize::try_from(slot).unwrap_or(usize::MAX);
        let limits = night.limits.get(slot);
        if !limits.is_some_and(|limits| limits.is_empty()) || !sky.is_usable(slot) {
            let (start, end) = (entry.start, entry.end);
            return Err(format!(
                "{} is planned from {start} to {end}, beyond its limits at minute {slot}: {limits:?}",
                entry.subject
            ));
        }
    }
    Ok(())
}

/// The night's holds; one that was never ended lasts to `end`.
pub(super) fn holds(facts: &[Fact], end: Utc) -> Vec<Hold> {
    let mut open: BTreeMap<HoldCause, (Utc, String)> = BTreeMap::new();
    let mut holds = Vec::new();
    let hold = |cause, (began, detail): (Utc, String), ended: Utc| Hold {
        cause,
        span: Span::new(began, ended.max(began)),
        detail,
    };
    for fact in facts {
        match fact {
            Fact::HoldBegan { at, cause, detail } => {
                open.entry(*cause).or_insert_with(|| (*at, detail.clone()));
            }
            Fact::HoldEnded { at, cause } => {
                if let Some(began) = open.remove(cause) {
                    holds.push(hold(*cause, began, *at));
                }
            }
            _ => {}
        }
    }
    holds.extend(
        open.into_iter()
            .map(|(cause, began)| hold(cause, began, end)),
    );
    holds.sort_by_key(|hold| (hold.span.start, hold.cause));
    holds
}
