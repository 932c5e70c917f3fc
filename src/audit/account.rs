//! From what the ledger kept of the nights to what each star's nights were like.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use super::NightFacts;
use crate::catalogue::{Survey, TargetId};
use crate::ephemeris::{EphemerisError, Observer};
use crate::plan::{Calendar, Reach, accrual_span};
use crate::record::{DarknessSplit, EntryKind, Hold, HoldCause, LossCause, Outcome, Visit};
use crate::score::Photometer;
use crate::time::{MINUTE_MS, NightDate, Span, Utc};

/// Step at which a past night is looked at: a visit takes several of them.
const STEP_MS: i64 = 5 * MINUTE_MS;
/// A hold that began so soon after a visit ended early is taken to have ended it.
const HOLD_AFTER_MS: i64 = 2 * MINUTE_MS;
/// Minutes taken for a visit whose exposure cannot be worked out.
const FALLBACK_MIN: f64 = 20.0;

/// What the ledger kept of one night.
#[derive(Clone, Debug, PartialEq)]
pub struct NightAccount {
    /// The night.
    pub night: NightDate,
    /// Its darkness as it was worked out then.
    pub darkness: Option<Span>,
    /// Its holds.
    pub holds: Vec<Hold>,
    /// Targets that some revision of its plan had.
    pub planned: BTreeSet<TargetId>,
    /// When its last plan began, and the visits that this had for each target.
    pub last_plan: Option<(Utc, BTreeMap<TargetId, u32>)>,
    /// Targets that a person had paused.
    pub paused: BTreeSet<TargetId>,
    /// Where its darkness went; `None` when it was never closed.
    pub split: Option<DarknessSplit>,
}

/// Minutes of one night for one star.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
struct Minutes {
    observable: f32,
    moon: f32,
    held: [f32; HoldCause::ALL.len()],
}

/// What one star's visits of one night came to.
#[derive(Clone, Debug, Default, PartialEq)]
struct Attempts {
    credit: f64,
    losses: Vec<LossCause>,
    unanswered: u32,
    /// Begun after the night's last plan was made.
    begun_since_plan: u32,
}

/// All nights of an audit, ready to be told star by star.
#[derive(Debug)]
pub struct Accounts<'a> {
    survey: &'a Survey,
    calendar: &'a Calendar,
    nights: BTreeMap<NightDate, (&'a NightAccount, Vec<Minutes>)>,
    attempts: Vec<BTreeMap<NightDate, Attempts>>,
    /// Cadence accrues in `first ≤ night < next`.
    first: NightDate,
    next: NightDate,
}

impl<'a> Accounts<'a> {
    /// From the nights kept and all visits, for a cadence that accrues in `first ≤ night < next`.
    ///
    /// # Errors
    /// [`EphemerisError`] outside the years that the sky is known for.
    pub fn new(
        (survey, observer): (&'a Survey, &Observer),
        calendar: &'a Calendar,
        (nights, visits): (&'a [NightAccount], &[Visit]),
        (first, next): (NightDate, NightDate),
    ) -> Result<Self, EphemerisError> {
        let minutes = nights
            .par_iter()
            .map(|account| minutes_of(survey, observer, account))
            .collect::<Result<Vec<_>, _>>()?;
        Ok(Accounts {
            survey,
            calendar,
            attempts: attempts(survey, nights, visits),
            nights: nights
                .iter()
                .zip(minutes)
                .map(|(account, minutes)| (account.night, (account, minutes)))
                .collect(),
            first,
            next,
        })
    }

    /// A star's nights in order: all that accrue, and those with visits before.
    pub fn facts(&self, star: usize) -> Vec<NightFacts> {
        let target = &self.survey.targets[star];
        let (from, until) = accrual_span(target, self.first, self.next);
        let needed_min = needed_min(self.survey, star);
        let with_visits = self.attempts[star].keys().copied();
        let counted = (0..until.nights_since(from).max(0)).map(|n| from.plus_nights(n));
        let nights: BTreeSet<NightDate> = with_visits.chain(counted).collect();
        nights
            .into_iter()
            .map(|night| {
                let accrues =
                    from <= night && night < until && self.calendar.is_observable(star, night);
                self.night(star, (night, accrues), needed_min)
            })
            .collect()
    }

    fn night(
        &self,
        star: usize,
        (night, accrues): (NightDate, bool),
        needed_min: f64,
    ) -> NightFacts {
        let target = &self.survey.targets[star];
        let known = self.nights.get(&night);
        let minutes = known
            .and_then(|(_, minutes)| minutes.get(star).copied())
            .unwrap_or_default();
        let has = |list: fn(&NightAccount) -> &BTreeSet<TargetId>| {
            known.is_some_and(|(account, _)| list(account).contains(target.id.as_str()))
        };
        let attempts = self.attempts[star].get(&night).cloned().unwrap_or_default();
        let held = HoldCause::ALL.into_iter().zip(minutes.held);
        NightFacts {
            night,
            recorded: known.is_some(),
            accrues,
            credit: attempts.credit,
            observable_min: f64::from(minutes.observable),
            moon_min: f64::from(minutes.moon),
            held_min: held
                .filter(|(_, minutes)| *minutes > 0.0)
                .map(|(cause, minutes)| (cause, f64::from(minutes)))
                .collect(),
            needed_min,
            paused: has(|account| &account.paused),
            planned: has(|account| &account.planned),
            unclaimed: known.is_some_and(|(account, _)| {
                planned_last(account, &target.id) > attempts.begun_since_plan
            }),
            losses: attempts.losses,
            unanswered: attempts.unanswered,
        }
    }
}

/// Visits that the last plan of a night had for a target.
fn planned_last(account: &NightAccount, target: &TargetId) -> u32 {
    let plan = account.last_plan.as_ref();
    plan.and_then(|(_, visits)| visits.get(target).copied())
        .unwrap_or(0)
}

/// Minutes of a visit in the best conditions, with settling and acquisition.
fn needed_min(survey: &Survey, star: usize) -> f64 {
    let best = Photometer::new(survey, &survey.targets[star]).best();
    let exposing_min = best.map_or(FALLBACK_MIN, |exposing| exposing.duration_s / 60.0);
    let telescope = &survey.telescope;
    exposing_min + (telescope.settle_s + telescope.acquisition_s) / 60.0
}

/// Every star's minutes of a night.
fn minutes_of(
    survey: &Survey,
    observer: &Observer,
    account: &NightAccount,
) -> Result<Vec<Minutes>, EphemerisError> {
    let mut all = vec![Minutes::default(); survey.targets.len()];
    let Some(darkness) = account.darkness else {
        return Ok(all);
    };
    let reach = Reach::compute(survey, observer, darkness, STEP_MS)?;
    let held: Vec<Option<usize>> = reach
        .instants()
        .iter()
        .map(|at| {
            HoldCause::ALL.iter().position(|cause| {
                let holds = account.holds.iter().filter(|hold| hold.cause == *cause);
                holds.into_iter().any(|hold| hold.span.contains(*at))
            })
        })
        .collect();
    let step_min = STEP_MS as f32 / MINUTE_MS as f32;
    for (star, minutes) in all.iter_mut().enumerate() {
        for ((within, moonless), held) in reach.of(star).zip(&held) {
            if !within {
                continue;
            }
            minutes.observable += step_min;
            if !moonless {
                minutes.moon += step_min;
            } else if let Some(cause) = held {
                minutes.held[*cause] += step_min;
            }
        }
    }
    Ok(all)
}

fn attempts(
    survey: &Survey,
    nights: &[NightAccount],
    visits: &[Visit],
) -> Vec<BTreeMap<NightDate, Attempts>> {
    let index: BTreeMap<&str, usize> = survey
        .targets
        .iter()
        .enumerate()
        .map(|(index, target)| (target.id.as_str(), index))
        .collect();
    let accounts: BTreeMap<NightDate, &NightAccount> = nights
        .iter()
        .map(|account| (account.night, account))
        .collect();
    let mut all = vec![BTreeMap::<NightDate, Attempts>::new(); survey.targets.len()];
    for visit in visits.iter().filter(|v| v.kind == EntryKind::Science) {
        let Some(star) = index.get(visit.subject.as_str()) else {
            continue;
        };
        let account = accounts.get(&visit.night).copied();
        let attempts = all[*star].entry(visit.night).or_default();
        let plan = account.and_then(|account| account.last_plan.as_ref());
        if plan.is_some_and(|(from, _)| visit.exposing.end > *from) {
            attempts.begun_since_plan += 1;
        }
        attempts.credit += visit.credit.max(0.0);
        match visit.outcome {
            Outcome::Done => {}
            Outcome::Short => {
                attempts.losses.push(what_cut_short(visit, account));
            }
            Outcome::Lost(cause) => attempts.losses.push(cause),
            Outcome::Refused | Outcome::Unreported => attempts.unanswered += 1,
        }
    }
    all
}

/// The hold that ended a visit early, where one began then.
fn what_cut_short(visit: &Visit, account: Option<&NightAccount>) -> LossCause {
    let end = visit.exposing.end;
    let around = Span::new(visit.began, end.plus_ms(HOLD_AFTER_MS));
    let holds = account.map_or(&[][..], |account| &account.holds);
    let began = holds.iter().find(|hold| around.contains(hold.span.start));
    began.map_or(LossCause::Other, |hold| match hold.cause {
        HoldCause::Weather | HoldCause::FeedLost => LossCause::Weather,
        HoldCause::Instrument | HoldCause::Ledger => LossCause::Instrument,
        HoldCause::Operator => LossCause::Operator,
    })
}

#[cfg(test)]
mod tests;
