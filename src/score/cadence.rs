//! How much a star is wanted, from what is owed to it and how long it has waited.

use thiserror::Error;

use super::Standing;
use crate::catalogue::{Cadence, Target};
use crate::time::{DAY_MS, MINUTE_MS, NightDate, Utc};

/// The cadence term never exceeds this: a star that waited a whole winter is urgent, but not worth
/// more than two and a half others that are due.
pub const CADENCE_CAP: f64 = 2.5;

/// How strongly a debt beyond one night's visits raises the term: by this for each factor e.
const DEBT_PULL: f64 = 0.25;

/// Credits within this of a whole visit count as one, so that sums of thirds come out right.
const CREDIT_TOLERANCE: f64 = 1e-6;

/// Why a star is not wanted.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum NotWanted {
    /// Paused in the settings.
    #[error("paused")]
    Paused,
    /// Its first night is still to come.
    #[error("not wanted before {first}")]
    NotYet {
        /// First night.
        first: NightDate,
    },
    /// Its last night is over.
    #[error("not wanted after {last}")]
    Over {
        /// Last night.
        last: NightDate,
    },
    /// It has all visits that it was to get.
    #[error("complete: {credited:.1} of {total} visits")]
    Complete {
        /// Credited.
        credited: f64,
        /// Wanted in all.
        total: u32,
    },
    /// It has had its visits of the night.
    #[error("has had its {wanted} visits of the night")]
    ServedTonight {
        /// Visits wanted on a night.
        wanted: u32,
    },
    /// Its next visit of the night must wait.
    #[error("its next visit of the night must wait until {until}")]
    TooSoon {
        /// Until when.
        until: Utc,
    },
}

/// Accrued minus credited visits; negative for a star that is ahead of its cadence.
pub fn balance(target: &Target, standing: &Standing) -> f64 {
    let per_night = f64::from(target.cadence.visits_per_night) / target.cadence.every_nights;
    f64::from(standing.accrued_nights) * per_night - credited(standing)
}

/// Visits owed: the balance, at least 0 (a star that is ahead owes nothing and is owed nothing), at
/// most what is missing to the wanted total.
pub fn owed(target: &Target, standing: &Standing) -> f64 {
    let missing = target.cadence.total_visits.map_or(f64::INFINITY, |total| {
        (f64::from(total) - credited(standing)).max(0.0)
    });
    balance(target, standing).clamp(0.0, missing)
}

/// Time since the last credited visit over the wanted interval. A visit of credit c stops only the
/// share c of the clock. A star never visited is due (1), or more when it has accrued more.
pub fn overdue(target: &Target, standing: &Standing, now: Utc) -> f64 {
    Wait::of(target, standing).intervals(now)
}

/// Sum of credits.
fn credited(standing: &Standing) -> f64 {
    standing.credited.iter().map(|visit| visit.credit).sum()
}

/// How long a star has waited, so that any later instant is quickly answered.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Wait {
    /// Middle of the last credited visit.
    last: Option<Utc>,
    /// Waiting in intervals that was left over after it.
    carried: f64,
    /// Length of an interval, milliseconds.
    interval_ms: f64,
}

impl Wait {
    fn of(target: &Target, standing: &Standing) -> Self {
        let interval_ms = target.cadence.every_nights * DAY_MS as f64;
        let mut wait = Wait {
            last: None,
            carried: f64::from(standing.accrued_nights) / target.cadence.every_nights,
            interval_ms,
        };
        let visits_per_night = f64::from(target.cadence.visits_per_night);
        for night in standing.credited.chunk_by(|a, b| a.night == b.night) {
            let credit: f64 = night.iter().map(|visit| visit.credit).sum();
            let Some(last) = night.last() else { continue };
            let before = match wait.last {
                // How long it had waited for its first visit is no longer known: it was due.
                None => 1.0,
                Some(_) => wait.intervals(last.mid),
            };
            let served = (credit / visits_per_night).clamp(0.0, 1.0);
            wait.carried = before * (1.0 - served);
            wait.last = Some(last.mid);
        }
        wait
    }

    fn intervals(&self, now: Utc) -> f64 {
        match self.last {
            None => self.carried.max(1.0),
            Some(last) => self.carried + (now - last).max(0) as f64 / self.interval_ms,
        }
    }
}

/// The cadence term of one star through one night.
///
/// After u wanted intervals (see [`overdue`]) the term is u up to 1, then 1 + ln u. It is multiplied
/// by 1 + 0.25 ln d for a debt of d > 1 nights' visits, by 1/d for a star that is d > 1 nights'
/// visits ahead, and cut at [`CADENCE_CAP`]. So it is 0 right after a credited visit, 1 when a star
/// in balance (within one night's visits) is due, and never falls with time or rising debt.
///
/// On a night on which the star has had visits already, the next one is worth what remains: the term
/// as it was before tonight, times 1 for the part of a first visit that is still missing, times
/// `repeat_worth` for the parts of the further visits wanted, and 0 for what goes beyond. This want
/// of further visits ends with the night.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CadenceTerm {
    refused: Option<NotWanted>,
    wait: Wait,
    debt_factor: f64,
    /// What the next visit brings of a night's worth; below 1 only after visits tonight.
    remaining: f64,
    /// Before this instant the separation from tonight's last visit is not reached.
    not_before: Option<Utc>,
}

impl CadenceTerm {
    /// For tonight.
    pub fn new(target: &Target, standing: &Standing, night: NightDate, repeat_worth: f64) -> Self {
        let split = standing
            .credited
            .partition_point(|visit| visit.night < night);
        let (earlier, tonight) = standing.credited.split_at(split);
        let before = Standing {
            credited: earlier.to_vec(),
            ..standing.clone()
        };
        let tonight_credit: f64 = tonight.iter().map(|visit| visit.credit).sum();
        let separation_ms = (target.cadence.separation_min * MINUTE_MS as f64).round() as i64;
        CadenceTerm {
            refused: refusal(target, standing, night, tonight_credit),
            wait: Wait::of(target, &before),
            debt_factor: debt_factor(
                balance(target, &before) / f64::from(target.cadence.visits_per_night),
            ),
            remaining: marginal(&target.cadence, tonight_credit, repeat_worth),
            not_before: tonight.last().map(|visit| visit.mid.plus_ms(separation_ms)),
        }
    }

    /// The term at an instant, 0 to [`CADENCE_CAP`].
    ///
    /// # Errors
    /// [`NotWanted`].
    pub fn at(&self, now: Utc) -> Result<f64, NotWanted> {
        if let Some(refused) = self.refused {
            return Err(refused);
        }
        match self.not_before {
            Some(until) if now < until => return Err(NotWanted::TooSoon { until }),
            _ => {}
        }
        let term = risen(self.wait.intervals(now)) * self.debt_factor;
        Ok(term.min(CADENCE_CAP) * self.remaining)
    }

    /// Wanted intervals waited, visits of tonight left out.
    pub fn overdue(&self, now: Utc) -> f64 {
        self.wait.intervals(now)
    }

    /// Why it is not wanted all night.
    pub fn refused(&self) -> Option<NotWanted> {
        self.refused
    }
}

/// Linear, then logarithmic: concave and smooth at 1, so that visits in part never pay.
fn risen(intervals: f64) -> f64 {
    if intervals <= 1.0 {
        intervals
    } else {
        1.0 + intervals.ln()
    }
}

fn debt_factor(nights_visits: f64) -> f64 {
    if nights_visits > 1.0 {
        1.0 + DEBT_PULL * nights_visits.ln()
    } else if nights_visits < -1.0 {
        -1.0 / nights_visits
    } else {
        1.0
    }
}

/// What a visit on top of `had` credits tonight brings: the stretch from `had` to `had` + 1 lies
/// over the first visit (worth 1), the further ones wanted, and nothing.
fn marginal(cadence: &Cadence, had: f64, repeat_worth: f64) -> f64 {
    let overlap = |from: f64, to: f64| ((had + 1.0).min(to) - had.max(from)).max(0.0);
    let wanted = f64::from(cadence.visits_per_night);
    overlap(0.0, 1.0) + repeat_worth * overlap(1.0, wanted)
}

fn refusal(
    target: &Target,
    standing: &Standing,
    night: NightDate,
    tonight_credit: f64,
) -> Option<NotWanted> {
    let cadence = &target.cadence;
    if target.paused {
        return Some(NotWanted::Paused);
    }
    if let Some(first) = cadence.first_night.filter(|first| night < *first) {
        return Some(NotWanted::NotYet { first });
    }
    if let Some(last) = cadence.last_night.filter(|last| night > *last) {
        return Some(NotWanted::Over { last });
    }
    let credited = credited(standing);
    if let Some(total) = cadence.total_visits
        && credited + CREDIT_TOLERANCE >= f64::from(total)
    {
        return Some(NotWanted::Complete { credited, total });
    }
    let wanted = cadence.visits_per_night;
    (tonight_credit + CREDIT_TOLERANCE >= f64::from(wanted))
        .then_some(NotWanted::ServedTonight { wanted })
}

#[cfg(test)]
mod tests;
