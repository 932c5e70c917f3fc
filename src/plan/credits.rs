//! What each star has been credited with: the part of the record that debts are counted from.

use std::collections::BTreeMap;

use super::calendar::Calendar;
use crate::catalogue::Survey;
use crate::ephemeris::{EphemerisError, Observer, SkyInstant, StarMotion};
use crate::record::{EntryKind, Visit};
use crate::score::{CreditedVisit, Standing};
use crate::time::NightDate;

/// A velocity error assumed where a visit has neither a reported nor a predicted one, m/s: as good
/// as a quiet star gets, so that an old record without errors still fills phases.
const UNKNOWN_RV_ERROR_M_S: f64 = 3.0;

/// Credited visits of every target, and the time that programmes have used.
#[derive(Clone, Debug)]
pub struct Credits {
    standings: Vec<Standing>,
    used_s: Vec<f64>,
    first_night: Option<NightDate>,
    by_id: BTreeMap<String, usize>,
}

impl Credits {
    /// Of a survey that has observed nothing.
    pub fn none(survey: &Survey) -> Self {
        let ids = survey.targets.iter().enumerate();
        Credits {
            standings: vec![Standing::default(); survey.targets.len()],
            used_s: vec![0.0; survey.programmes.len()],
            first_night: None,
            by_id: ids
                .map(|(index, target)| (target.id.as_str().to_owned(), index))
                .collect(),
        }
    }

    /// Adds a visit that ended; what it was credited with, and to which target by its index in the
    /// survey. Visits to stars that are no longer on the list are passed over.
    ///
    /// # Errors
    /// [`EphemerisError`] for a visit outside the years that the sky is known for.
    pub fn add(
        &mut self,
        survey: &Survey,
        observer: &Observer,
        visit: &Visit,
    ) -> Result<Option<(usize, CreditedVisit)>, EphemerisError> {
        self.first_night = Some(self.first_night.map_or(visit.night, |f| f.min(visit.night)));
        if visit.kind != EntryKind::Science || visit.credit <= 0.0 {
            return Ok(None);
        }
        let Some(&star) = self.by_id.get(visit.subject.as_str()) else {
            return Ok(None);
        };
        let credited = credited(survey, observer, star, visit)?;
        let used_s = visit.exposing.length_ms() as f64 / 1000.0;
        if let Some(used) = self.used_s.get_mut(survey.targets[star].programme) {
            *used += used_s;
        }
        let list = &mut self.standings[star].credited;
        let at = list.partition_point(|other| other.mid <= credited.mid);
        list.insert(at, credited);
        Ok(Some((star, credited)))
    }

    /// Credited visits of a target, by its index in the survey.
    pub fn credited(&self, star: usize) -> &[CreditedVisit] {
        &self.standings[star].credited
    }

    /// Open time used by each programme so far, seconds.
    pub fn used_s(&self) -> &[f64] {
        &self.used_s
    }

    /// The night of the earliest visit.
    pub fn first_night(&self) -> Option<NightDate> {
        self.first_night
    }

    /// Each target's standing at the start of `tonight`, with debts accrued from `accrual_first`.
    pub fn standings(
        &self,
        survey: &Survey,
        calendar: &Calendar,
        accrual_first: NightDate,
        tonight: NightDate,
    ) -> Vec<Standing> {
        let mut standings = self.standings.clone();
        for (index, standing) in standings.iter_mut().enumerate() {
            let target = &survey.targets[index];
            calendar.complete(standing, (index, target), accrual_first, tonight);
        }
        standings
    }
}

fn credited(
    survey: &Survey,
    observer: &Observer,
    star: usize,
    visit: &Visit,
) -> Result<CreditedVisit, EphemerisError> {
    let mid = visit.exposing.start.plus_ms(visit.exposing.length_ms() / 2);
    let error = visit.rv_error_m_s.or(visit.predicted_rv_error_m_s);
    let mid_bjd_tdb = match visit.mid_bjd_tdb {
        Some(known) => known,
        None => {
            let motion = StarMotion::of(&survey.targets[star].star);
            SkyInstant::at(observer, mid)?.bjd_tdb(&motion).single()
        }
    };
    Ok(CreditedVisit {
        night: visit.night,
        mid,
        mid_bjd_tdb,
        rv_error_m_s: error
            .filter(|error| *error > 0.0)
            .unwrap_or(UNKNOWN_RV_ERROR_M_S),
        credit: visit.credit,
    })
}
