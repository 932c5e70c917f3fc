//! The audit of a whole survey.

use std::collections::BTreeMap;

use chrono::Datelike;
use rayon::prelude::*;

use super::{
    Accounts, ErrorPair, NightAccount, ProgrammeUse, StarAudit, StarRecord, VelocityErrors,
    programme_use,
};
use crate::catalogue::{Survey, TargetId};
use crate::ephemeris::{EphemerisError, NightSky, Observer, StarMotion};
use crate::plan::{Calendar, Credits, accrual_first};
use crate::record::{DarknessSplit, EntryKind, Visit};
use crate::score::Standing;
use crate::time::{Night, NightDate};

/// The record of a survey as the ledger gives it.
#[derive(Clone, Debug, PartialEq)]
pub struct Record {
    /// First night counted; `None`: from the beginning.
    pub since: Option<NightDate>,
    /// Last night counted.
    pub until: NightDate,
    /// Visits of these nights, in order of time.
    pub visits: Vec<Visit>,
    /// What was kept of these nights, in order.
    pub nights: Vec<NightAccount>,
}

/// Every star, the programmes, the instrument and the darkness.
#[derive(Clone, Debug)]
pub struct SurveyAudit {
    /// First night of which the cadence counts.
    pub first: NightDate,
    /// Last night.
    pub until: NightDate,
    /// Stars by their index in the survey, those asked for alone.
    pub stars: Vec<(usize, StarAudit)>,
    /// Standing of the same stars, for what shows single visits.
    pub standings: Vec<Standing>,
    /// Barycentric velocity of the same stars' credited visits, km/s.
    pub barycentric_km_s: Vec<Vec<f64>>,
    /// Programmes, from all stars.
    pub programmes: Vec<ProgrammeUse>,
    /// Velocity errors of all stars together: the instrument's.
    pub errors: Option<VelocityErrors>,
    /// Months with a recorded night, in order.
    pub months: Vec<MonthUse>,
    /// Nights that the ledger has a record of.
    pub recorded_nights: usize,
}

/// Where the darkness of a month went.
#[derive(Clone, Debug, PartialEq)]
pub struct MonthUse {
    /// Year and month of the evenings.
    pub month: (i32, u32),
    /// Nights that were closed.
    pub nights: u32,
    /// Their darkness, split.
    pub split: DarknessSplit,
}

impl SurveyAudit {
    /// Of a record, for the stars of these indices.
    ///
    /// # Errors
    /// [`EphemerisError`] outside the years that the sky is known for.
    pub fn of(
        survey: &Survey,
        observer: &Observer,
        record: &Record,
        stars: &[usize],
    ) -> Result<Self, EphemerisError> {
        let next = record.until.plus_nights(1);
        let mut credits = Credits::none(survey);
        for visit in &record.visits {
            credits.add(survey, observer, visit)?;
        }
        let earliest = accrual_first(survey, first_night(record), next);
        let first = record.since.map_or(earliest, |since| since.max(earliest));
        let first = first.min(next);
        let calendar = Calendar::compute(survey, observer, first, next)?;
        let mut standings = credits.standings(survey, &calendar, first, next);
        let accounts = Accounts::new(
            (survey, observer),
            &calendar,
            (&record.nights, &record.visits),
            (first, next),
        )?;
        let velocities = barycentric_km_s(survey, observer, &standings, stars)?;
        let pairs = error_pairs(survey, &record.visits);
        let now = Night::of(record.until, survey.site.longitude).span.end;
        let audits: Vec<StarAudit> = stars
            .par_iter()
            .zip(&velocities)
            .map(|(star, velocities)| {
                let target = &survey.targets[*star];
                StarAudit::of(&StarRecord {
                    target,
                    programme: &survey.programmes[target.programme],
                    standing: &standings[*star],
                    nights: &accounts.facts(*star),
                    error_pairs: &pairs[*star],
                    wanted_spread_km_s: survey.planning.barycentric_spread_km_s,
                    floor_m_s: survey.instrument.velocity.floor_m_s,
                    barycentric_km_s: velocities,
                    now,
                })
            })
            .collect();
        let owed = standings.iter().enumerate().map(|(star, standing)| {
            let target = &survey.targets[star];
            (target.programme, crate::score::owed(target, standing))
        });
        let used = credits.used_s().iter().copied().enumerate();
        let programmes = programme_use(&survey.programmes, used, owed);
        Ok(SurveyAudit {
            first,
            until: record.until,
            stars: stars.iter().copied().zip(audits).collect(),
            standings: stars
                .iter()
                .map(|star| std::mem::take(&mut standings[*star]))
                .collect(),
            barycentric_km_s: velocities,
            programmes,
            errors: VelocityErrors::of(&pairs.concat()),
            months: months(&record.nights),
            recorded_nights: record.nights.len(),
        })
    }
}

/// The first night that the record knows.
fn first_night(record: &Record) -> Option<NightDate> {
    let visits = record.visits.iter().map(|visit| visit.night);
    let nights = record.nights.iter().map(|account| account.night);
    visits.chain(nights).min()
}

/// Barycentric velocity of each credited visit of these stars. Visits of one night share its sky.
fn barycentric_km_s(
    survey: &Survey,
    observer: &Observer,
    standings: &[Standing],
    stars: &[usize],
) -> Result<Vec<Vec<f64>>, EphemerisError> {
    let mut by_night: BTreeMap<NightDate, Vec<(usize, usize)>> = BTreeMap::new();
    for (row, star) in stars.iter().enumerate() {
        for (index, visit) in standings[*star].credited.iter().enumerate() {
            by_night.entry(visit.night).or_default().push((row, index));
        }
    }
    let motions: Vec<StarMotion> = stars
        .iter()
        .map(|star| StarMotion::of(&survey.targets[*star].star))
        .collect();
    let nights: Vec<_> = by_night.into_iter().collect();
    let found = nights
        .par_iter()
        .map(|(night, visits)| {
            let sky = NightSky::of(observer, Night::of(*night, survey.site.longitude))?;
            let velocity = |(row, index): &(usize, usize)| {
                let mid = standings[stars[*row]].credited[*index].mid;
                sky.barycentric_correction_m_s(&motions[*row], mid) / 1000.0
            };
            Ok(visits.iter().map(velocity).collect::<Vec<f64>>())
        })
        .collect::<Result<Vec<_>, EphemerisError>>()?;
    let mut all: Vec<Vec<f64>> = stars
        .iter()
        .map(|star| vec![0.0; standings[*star].credited.len()])
        .collect();
    for ((_, visits), velocities) in nights.iter().zip(found) {
        for ((row, index), velocity) in visits.iter().zip(velocities) {
            all[*row][*index] = velocity;
        }
    }
    Ok(all)
}

/// Velocity errors of each star's visits that have both.
fn error_pairs(survey: &Survey, visits: &[Visit]) -> Vec<Vec<ErrorPair>> {
    let index: BTreeMap<&TargetId, usize> = survey
        .targets
        .iter()
        .enumerate()
        .map(|(index, target)| (&target.id, index))
        .collect();
    let mut all = vec![Vec::new(); survey.targets.len()];
    for visit in visits.iter().filter(|v| v.kind == EntryKind::Science) {
        let both = visit.predicted_rv_error_m_s.zip(visit.rv_error_m_s);
        if let (Some((predicted_m_s, reported_m_s)), Some(star)) = (both, index.get(&visit.subject))
        {
            all[*star].push(ErrorPair {
                night: visit.night,
                predicted_m_s,
                reported_m_s,
            });
        }
    }
    all
}

fn months(nights: &[NightAccount]) -> Vec<MonthUse> {
    let mut months: BTreeMap<(i32, u32), MonthUse> = BTreeMap::new();
    for account in nights {
        let Some(split) = &account.split else {
            continue;
        };
        let date = account.night.date();
        let month = (date.year(), date.month());
        let row = months.entry(month).or_insert_with(|| MonthUse {
            month,
            nights: 0,
            split: DarknessSplit::default(),
        });
        row.nights += 1;
        row.split.add(split);
    }
    months.into_values().collect()
}
