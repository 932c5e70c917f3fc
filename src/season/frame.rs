//! What is known of a season before its first night.

use chrono::Datelike;
use serde::{Deserialize, Serialize};

use super::ensemble::SeasonAsk;
use crate::audit::{Measurement, OrbitErrors, log_spaced_periods, msini_earth};
use crate::catalogue::{Survey, Target, WindowPurpose};
use crate::plan::{Calendar, History};
use crate::score::{CreditedVisit, Photometer};
use crate::settings::Settings;
use crate::time::NightDate;

/// The layout of the files that hold a frame.
pub const LAYOUT: u32 = 1;
/// Periods at which the smallest planet is worked out.
const PERIODS: usize = 12;
/// Seconds taken for a visit whose exposure cannot be worked out.
const FALLBACK_S: f64 = 1200.0;

/// What all realisations of a season have in common. Kept beside them, so that they can be read
/// without the configuration that they were made with.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Frame {
    /// [`LAYOUT`].
    pub layout: u32,
    /// Of the program.
    pub version: String,
    /// Of configuration, visits before, and weather record: the same number, the same season.
    pub fingerprint: String,
    /// First night.
    pub first: String,
    /// Number of nights.
    pub nights: u32,
    /// Seed of all chance.
    pub seed: u64,
    /// In the order of the survey.
    pub programmes: Vec<FrameProgramme>,
    /// In the order of the survey.
    pub targets: Vec<FrameTarget>,
    /// By month of the season, hours of visits that the cadences ask for.
    pub wanted_h: Vec<MonthWanted>,
}

/// A programme of a [`Frame`].
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FrameProgramme {
    /// Its id.
    pub id: String,
    /// Share of the used time that it should have; all of them add to 1.
    pub share_wanted: f64,
    /// Periods at which its stars' smallest planets are worked out, days.
    pub periods_d: Vec<f64>,
}

/// A target of a [`Frame`].
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FrameTarget {
    /// Its id.
    pub id: String,
    /// Index of its programme.
    pub programme: usize,
    /// Visits that its cadence asks for within the season, at most its total.
    pub wanted: f64,
    /// Stellar mass, solar masses.
    pub mass_msun: Option<f64>,
    /// Periods of its candidates, days.
    pub candidates_d: Vec<f64>,
    /// Labels of its windows to catch.
    pub windows: Vec<String>,
    /// Semi-amplitude of the smallest planet found before the season, m/s, by the programme's
    /// periods; `None` where the visits determine no orbit.
    pub smallest_k_m_s: Vec<Option<f64>>,
}

/// Hours wanted in a month.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct MonthWanted {
    /// Year and month as 2026-12.
    pub month: String,
    /// Hours.
    pub hours: f64,
}

impl Frame {
    /// Of a season that is about to begin.
    pub(super) fn of(
        settings: &Settings,
        calendar: &Calendar,
        history: &History,
        ask: &SeasonAsk,
        fingerprint: String,
    ) -> Self {
        let survey = &settings.survey;
        let claimed: f64 = survey.programmes.iter().map(|p| p.share).sum();
        let programmes: Vec<FrameProgramme> = survey
            .programmes
            .iter()
            .map(|programme| FrameProgramme {
                id: programme.id.clone(),
                share_wanted: programme.share / if claimed > 0.0 { claimed } else { 1.0 },
                periods_d: log_spaced_periods(
                    programme.min_period_d,
                    programme.max_period_d,
                    PERIODS,
                ),
            })
            .collect();
        let targets = survey
            .targets
            .iter()
            .enumerate()
            .map(|(star, target)| FrameTarget {
                id: target.id.to_string(),
                programme: target.programme,
                wanted: wanted(target, star, calendar, ask),
                mass_msun: target.mass_msun.map(|mass| mass.value),
                candidates_d: target.candidates.iter().map(|c| c.period_d.value).collect(),
                windows: to_catch(target).map(|(_, w)| w.label.clone()).collect(),
                smallest_k_m_s: programmes.get(target.programme).map_or(Vec::new(), |p| {
                    smallest_k(history.credited(star), &p.periods_d)
                }),
            })
            .collect();
        Frame {
            layout: LAYOUT,
            version: env!("CARGO_PKG_VERSION").to_owned(),
            fingerprint,
            first: ask.first.to_string(),
            nights: ask.nights,
            seed: ask.seed,
            programmes,
            targets,
            wanted_h: wanted_by_month(survey, calendar, ask),
        }
    }

    /// The first night; `None` in a frame that somebody has edited.
    pub fn first_night(&self) -> Option<NightDate> {
        NightDate::parse(&self.first).ok()
    }

    /// Minimum mass in Earth masses that a semi-amplitude stands for.
    pub fn msini_earth(&self, target: &FrameTarget, period_d: f64, k_m_s: f64) -> Option<f64> {
        Some(msini_earth(k_m_s, target.mass_msun?, period_d, 0.0))
    }
}

/// Year and month of a night, as 2026-12.
pub fn month_of(night: NightDate) -> String {
    let date = night.date();
    format!("{:04}-{:02}", date.year(), date.month())
}

/// A target's windows to catch, with their place in its list.
pub(super) fn to_catch(
    target: &Target,
) -> impl Iterator<Item = (usize, &crate::catalogue::SpecialWindow)> {
    let catch =
        |w: &crate::catalogue::SpecialWindow| matches!(w.purpose, WindowPurpose::Catch { .. });
    target
        .windows
        .iter()
        .enumerate()
        .filter(move |(_, w)| catch(w))
}

/// Semi-amplitude of the smallest planet found at each period, m/s.
pub(super) fn smallest_k(visits: &[CreditedVisit], periods_d: &[f64]) -> Vec<Option<f64>> {
    let measurements = measurements(visits);
    periods_d
        .iter()
        .map(|period_d| {
            let sigma = OrbitErrors::mean_sigma_k_m_s(*period_d, &measurements)?;
            Some(crate::audit::DETECTION_SNR * sigma)
        })
        .collect()
}

/// Visits as the audit weighs them: their own errors alone.
pub(super) fn measurements(visits: &[CreditedVisit]) -> Vec<Measurement> {
    let measurement = |visit: &CreditedVisit| Measurement {
        bjd_tdb: visit.mid_bjd_tdb,
        rv_error_m_s: visit.rv_error_m_s,
    };
    visits.iter().map(measurement).collect()
}

fn wanted(target: &Target, star: usize, calendar: &Calendar, ask: &SeasonAsk) -> f64 {
    let (from, until) = crate::plan::accrual_span(target, ask.first, ask.end());
    let nights = calendar.observable_nights(star, from, until);
    let accrued = f64::from(nights) * per_night(target);
    let total = target.cadence.total_visits;
    total.map_or(accrued, |total| accrued.min(f64::from(total)))
}

fn per_night(target: &Target) -> f64 {
    f64::from(target.cadence.visits_per_night) / target.cadence.every_nights
}

fn wanted_by_month(survey: &Survey, calendar: &Calendar, ask: &SeasonAsk) -> Vec<MonthWanted> {
    let setup_s = survey.telescope.settle_s + survey.telescope.acquisition_s;
    let hours: Vec<f64> = survey
        .targets
        .iter()
        .map(|target| {
            let best = Photometer::new(survey, target).best();
            let exposing_s = best.map_or(FALLBACK_S, |exposing| exposing.duration_s);
            per_night(target) * (exposing_s + setup_s) / 3600.0
        })
        .collect();
    let mut months: Vec<MonthWanted> = Vec::new();
    for night in ask.dates() {
        let wanted = |(star, target): (usize, &Target)| {
            let (from, until) = crate::plan::accrual_span(target, ask.first, ask.end());
            let counts = from <= night && night < until && calendar.is_observable(star, night);
            if counts { hours[star] } else { 0.0 }
        };
        let tonight: f64 = survey.targets.iter().enumerate().map(wanted).sum();
        let month = month_of(night);
        match months.last_mut().filter(|last| last.month == month) {
            Some(last) => last.hours += tonight,
            None => months.push(MonthWanted {
                month,
                hours: tonight,
            }),
        }
    }
    months
}

/// Of everything that decides a season, in 16 hexadecimal digits (64-bit FNV-1a, a published
/// non-cryptographic hash: it guards against a mix-up, not against a forger).
pub(super) fn fingerprint(texts: &[&str]) -> String {
    let mut hash: u64 = 0xcbf2_9ce4_8422_2325;
    for byte in texts.iter().flat_map(|text| text.bytes().chain([0])) {
        hash = (hash ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3);
    }
    format!("{hash:016x}")
}
