//! Reasons in plain words: why a star is in the queue, and why the others are not.

use crate::record::{EntryKind, LeftOut, QueueEntry};
use crate::time::MINUTE_MS;

use super::build::VALUE_UNIT;
use super::limits::Limit;
use super::offer::{Narrowed, Offer, Offers};
use super::queue::Reading;

/// A weight that would let a star in is only told up to here: beyond, it is no remedy.
const MOST_WEIGHT_TOLD: f64 = 20.0;

/// Targets without a visit, each with what kept it out.
pub(super) fn left_out(reading: &Reading<'_>, entries: &[QueueEntry]) -> Vec<LeftOut> {
    let in_queue = |offers: &&Offers| {
        let id = &reading.survey.targets[offers.target].id;
        !entries
            .iter()
            .any(|entry| entry.kind == EntryKind::Science && entry.subject == *id)
    };
    let out = reading.offers.iter().filter(in_queue);
    out.map(|offers| LeftOut {
        target: reading.survey.targets[offers.target].id.clone(),
        because: kept_out(reading, offers, entries),
    })
    .collect()
}

fn kept_out(reading: &Reading<'_>, offers: &Offers, entries: &[QueueEntry]) -> String {
    match &offers.narrowed {
        Narrowed::NotWanted(why) => why.clone(),
        Narrowed::ByLimits(lost) if offers.starts.is_empty() => out_of_reach(reading, lost),
        Narrowed::ByLimits(_) => outbid(reading, offers, entries),
    }
}

fn out_of_reach(reading: &Reading<'_>, lost: &[(Limit, usize)]) -> String {
    let first = reading.sky.first_slot_from(reading.ask.from);
    let left = reading.sky.slots - first;
    let mut worst: Vec<(Limit, usize)> = lost.to_vec();
    worst.sort_by_key(|(_, minutes)| std::cmp::Reverse(*minutes));
    if left == 0 {
        return "no darkness is left".to_owned();
    }
    if worst.is_empty() {
        return "worth nothing tonight".to_owned();
    }
    let told: Vec<String> = worst
        .iter()
        .take(3)
        .map(|(limit, minutes)| format!("{} ({minutes} of {left} minutes)", limit.words()))
        .collect();
    format!("no visit fits: kept out by {}", told.join(", "))
}

/// The start at which the least value would have to give way, and what would tip the scales.
fn outbid(reading: &Reading<'_>, offers: &Offers, entries: &[QueueEntry]) -> String {
    let displaced = |offer: &Offer| displaced(reading, offer, entries);
    let missing = |offer: &Offer| displaced(offer).0 - offer.value.total;
    let nearest = offers
        .starts
        .iter()
        .min_by(|a, b| missing(a).total_cmp(&missing(b)));
    let Some(offer) = nearest else {
        return "worth nothing tonight".to_owned();
    };
    let (worth, by) = displaced(offer);
    let at = reading.sky.instant(offer.slot);
    let clock = at.to_string()[11..16].to_owned();
    let offered = format!(
        "its {} minutes at {clock} UTC offer {:.2}",
        offer.slots, offer.value.total
    );
    if by.is_empty() {
        // Nothing stands in the way of this start alone: the set-ups around it do.
        return format!("outbid: {offered}, less than the slews to and from it would cost");
    }
    let factor = worth / offer.value.total.max(1.0 / VALUE_UNIT);
    let remedy = if factor.is_finite() && factor < MOST_WEIGHT_TOLD {
        format!("; {factor:.1} times its weight would let it in")
    } else {
        String::new()
    };
    format!(
        "outbid by {}: {offered}, they {worth:.2}{remedy}",
        by.join(" and ")
    )
}

/// Value and names of the entries that a visit would push out, set-ups included.
fn displaced(reading: &Reading<'_>, offer: &Offer, entries: &[QueueEntry]) -> (f64, Vec<String>) {
    let start = reading.sky.instant(offer.slot);
    let end = start.plus_ms(offer.slots as i64 * MINUTE_MS);
    let setup_ms = (super::slew::setup_without_slew_s(&reading.survey.telescope) * 1000.0) as i64;
    let mut worth = 0.0;
    let mut names = Vec::new();
    for entry in entries {
        let clashes = entry.start < end.plus_ms(setup_ms) && start < entry.end.plus_ms(setup_ms);
        if clashes {
            worth += match entry.kind {
                EntryKind::Science => entry.value.total,
                EntryKind::Standard | EntryKind::Calibration => {
                    f64::from(super::build::CALIBRATION_VALUE) / VALUE_UNIT
                }
            };
            names.push(entry.subject.to_string());
        }
    }
    (worth, names)
}
