//! Everything that the audit says of one star.

use super::{
    Alias, GapStatistics, MassError, Measurement, OrbitErrors, Peak, PhaseCoverage, Sensitivity,
    SpectralWindow, VelocityErrors, VelocityRange, aliases, earth_irradiation_period_d,
    log_spaced_periods, msini_error, sensitivity,
};
use super::{ErrorPair, NightFacts, OwedByCause, attribute_owed};
use crate::catalogue::{Candidate, Programme, Target};
use crate::score::{Standing, overdue, owed};
use crate::time::Utc;

/// A planet counts as found when its semi-amplitude is so many times its error: a usual bar for a
/// signal of unknown period (common practice, no source).
pub const DETECTION_SNR: f64 = 5.0;
/// Periods at which the smallest planet is worked out.
const PERIODS: usize = 60;
/// The window is worked out up to here, cycles a day: past the second harmonic of the day, where the
/// strong aliases of observing at night lie.
const WINDOW_UP_TO_PER_DAY: f64 = 3.2;
/// Peaks of the window kept.
const PEAKS: usize = 8;
/// Milliseconds in a day.
const DAY_MS: f64 = 86_400_000.0;

/// One star's record, as far as the audit asks.
#[derive(Clone, Copy, Debug)]
pub struct StarRecord<'a> {
    /// The star.
    pub target: &'a Target,
    /// Its programme.
    pub programme: &'a Programme,
    /// Its credited visits and the nights that accrued.
    pub standing: &'a Standing,
    /// Its nights, for the causes of what is owed.
    pub nights: &'a [NightFacts],
    /// Velocity errors of its visits, where both are known.
    pub error_pairs: &'a [ErrorPair],
    /// Spread of the barycentric velocity that is wanted, km/s.
    pub wanted_spread_km_s: f64,
    /// Error that no light removes, m/s, of the instrument.
    pub floor_m_s: f64,
    /// Barycentric velocity correction at each credited visit, km/s.
    pub barycentric_km_s: &'a [f64],
    /// The end of the time audited.
    pub now: Utc,
}

/// What the visits of one star amount to.
#[derive(Clone, Debug, PartialEq)]
pub struct StarAudit {
    /// Credited visits, each counted once.
    pub visits: usize,
    /// Sum of their credits.
    pub credited: f64,
    /// Visits that the cadence has asked for so far.
    pub wanted: f64,
    /// Visits owed.
    pub owed: f64,
    /// The same by cause: the parts add up to it.
    pub owed_by_cause: OwedByCause,
    /// Wanted intervals since the last visit.
    pub overdue: f64,
    /// Gaps between visits.
    pub gaps: Option<GapStatistics>,
    /// Days from the last visit to the end of the time audited.
    pub waiting_d: Option<f64>,
    /// Each candidate, in the order of the target.
    pub candidates: Vec<CandidateAudit>,
    /// Smallest planets over the periods of the programme.
    pub sensitivity: Vec<Sensitivity>,
    /// Period at which a planet gets as much light as the Earth, days, where mass and radius of the
    /// star are known.
    pub earth_irradiation_period_d: Option<f64>,
    /// Smallest planet at that period.
    pub at_earth_irradiation: Option<Sensitivity>,
    /// The sampling's spectral window.
    pub window: Option<SpectralWindow>,
    /// Its strongest peaks.
    pub peaks: Vec<Peak>,
    /// Barycentric velocity over the visits.
    pub barycentric: Option<VelocityRange>,
    /// Its spread as a share of the wanted one, at most 1; 0 without visits.
    pub spread_share: f64,
    /// Velocity errors, predicted beside reported.
    pub errors: Option<VelocityErrors>,
}

/// What the visits of one star amount to for one of its candidates.
#[derive(Clone, Debug, PartialEq)]
pub struct CandidateAudit {
    /// The candidate's period, days.
    pub period_d: f64,
    /// Phases of the visits.
    pub coverage: PhaseCoverage,
    /// Errors of the orbit; `None` where the visits do not determine it.
    pub errors: Option<OrbitErrors>,
    /// Error of K in m/s with the star's jitter and the instrument's floor added to each visit's own
    /// error in quadrature.
    pub sigma_k_with_jitter_m_s: Option<f64>,
    /// Error of the minimum mass; `None` too where the star's mass is not given.
    pub mass: Option<MassError>,
    /// Periods that this sampling cannot tell from it.
    pub aliases: Vec<Alias>,
}

impl StarAudit {
    /// Of a star's record.
    pub fn of(record: &StarRecord<'_>) -> Self {
        let (target, standing) = (record.target, record.standing);
        let times_d: Vec<f64> = standing.credited.iter().map(|v| v.mid_bjd_tdb).collect();
        let measurements: Vec<Measurement> = standing
            .credited
            .iter()
            .map(|visit| Measurement {
                bjd_tdb: visit.mid_bjd_tdb,
                rv_error_m_s: visit.rv_error_m_s,
            })
            .collect();
        let window = SpectralWindow::of(&times_d, WINDOW_UP_TO_PER_DAY);
        let peaks = window.as_ref().map_or(Vec::new(), |w| w.peaks(PEAKS));
        let resolution = window.as_ref().map_or(0.0, |w| w.resolution_per_day);
        let periods = log_spaced_periods(
            record.programme.min_period_d,
            record.programme.max_period_d,
            PERIODS,
        );
        let mass = target.mass_msun.map(|mass| mass.value);
        let last = standing.credited.last().map(|visit| visit.mid);
        let owed = owed(target, standing);
        let barycentric = VelocityRange::of(record.barycentric_km_s);
        let irradiated = earth_irradiation_period_d(target);
        let noise_m_s = target.jitter_m_s.hypot(record.floor_m_s);
        let with_jitter: Vec<Measurement> = measurements
            .iter()
            .map(|m| Measurement {
                rv_error_m_s: m.rv_error_m_s.hypot(noise_m_s),
                ..*m
            })
            .collect();
        let candidate = |candidate: &Candidate| CandidateAudit {
            aliases: aliases(candidate.period_d.value, &peaks, resolution),
            sigma_k_with_jitter_m_s: OrbitErrors::of(candidate, &with_jitter)
                .map(|errors| errors.sigma_k_m_s),
            ..CandidateAudit::of(target, candidate, &measurements)
        };
        StarAudit {
            visits: standing.credited.len(),
            credited: standing.credited.iter().map(|visit| visit.credit).sum(),
            wanted: wanted(target, standing),
            owed,
            owed_by_cause: owed_by_cause(record, owed),
            overdue: overdue(target, standing, record.now),
            gaps: GapStatistics::of(&times_d),
            waiting_d: last.map(|last| (record.now - last) as f64 / DAY_MS),
            candidates: target.candidates.iter().map(candidate).collect(),
            sensitivity: sensitivity(&measurements, &periods, DETECTION_SNR, mass),
            earth_irradiation_period_d: irradiated,
            at_earth_irradiation: irradiated.and_then(|period| {
                let found = sensitivity(&measurements, &[period], DETECTION_SNR, mass);
                found.into_iter().next()
            }),
            barycentric,
            spread_share: barycentric
                .map_or(0.0, |range| range.share_of(record.wanted_spread_km_s)),
            errors: VelocityErrors::of(record.error_pairs),
            window,
            peaks,
        }
    }
}

impl CandidateAudit {
    /// By the visits' own errors; aliases and noise of the star are left to the caller.
    fn of(target: &Target, candidate: &Candidate, measurements: &[Measurement]) -> Self {
        let times_d: Vec<f64> = measurements.iter().map(|m| m.bjd_tdb).collect();
        let errors = OrbitErrors::of(candidate, measurements);
        CandidateAudit {
            period_d: candidate.period_d.value,
            coverage: PhaseCoverage::of(candidate, &times_d),
            mass: errors
                .as_ref()
                .and_then(|errors| msini_error(target, candidate, errors.sigma_k_m_s)),
            errors,
            sigma_k_with_jitter_m_s: None,
            aliases: Vec::new(),
        }
    }
}

/// The debt by cause, scaled to what is owed: the two sums differ by rounding alone.
fn owed_by_cause(record: &StarRecord<'_>, owed: f64) -> OwedByCause {
    let cadence = &record.target.cadence;
    let credited: f64 = record.standing.credited.iter().map(|v| v.credit).sum();
    let missing = cadence
        .total_visits
        .map(|total| f64::from(total) - credited);
    let mut by_cause = attribute_owed(cadence, record.nights, missing);
    let total = by_cause.total();
    if total > 0.0 {
        for part in by_cause.by_cause.values_mut() {
            *part *= owed / total;
        }
    }
    by_cause.by_cause.retain(|_, part| *part > 0.0);
    by_cause
}

/// Visits that the cadence has asked for, at most the wanted total.
fn wanted(target: &Target, standing: &Standing) -> f64 {
    let cadence = &target.cadence;
    let per_night = f64::from(cadence.visits_per_night) / cadence.every_nights;
    let accrued = f64::from(standing.accrued_nights) * per_night;
    cadence
        .total_visits
        .map_or(accrued, |total| accrued.min(f64::from(total)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::score::CreditedVisit;
    use crate::score::fixtures::{candidate, survey, target};
    use crate::time::NightDate;

    const FIRST_BJD: f64 = 2_461_376.5;

    /// A visit on each of so many nights at the same hour, a metre a second each.
    fn standing(nights: u32) -> Standing {
        let first = NightDate::parse("2026-12-01").unwrap();
        let credited = (0..nights)
            .map(|n| CreditedVisit {
                night: first.plus_nights(i64::from(n)),
                mid: Utc::from_unix_ms(1_796_169_600_000 + i64::from(n) * 86_400_000),
                mid_bjd_tdb: FIRST_BJD + f64::from(n),
                rv_error_m_s: 1.0,
                credit: 1.0,
            })
            .collect();
        Standing {
            credited,
            accrued_nights: nights + 6,
            remaining_nights: 10,
        }
    }

    fn audit(standing: &Standing, velocities: &[f64]) -> StarAudit {
        let survey = survey();
        let mut star = target();
        star.cadence.every_nights = 2.0;
        star.cadence.total_visits = None;
        star.candidates = vec![candidate(7.3, 0.0)];
        StarAudit::of(&StarRecord {
            target: &star,
            programme: &survey.programmes[0],
            standing,
            nights: &[],
            error_pairs: &[],
            wanted_spread_km_s: 17.0,
            floor_m_s: 0.0,
            barycentric_km_s: velocities,
            now: Utc::from_unix_ms(1_796_169_600_000 + 40 * 86_400_000),
        })
    }

    #[test]
    fn a_daily_record_is_told_as_one() {
        let audit = audit(&standing(30), &[-3.0, 5.5]);
        assert_eq!((audit.visits, audit.credited), (30, 30.0));
        // 36 nights at one visit every two want 18: the star is ahead and owes nothing.
        assert_eq!((audit.wanted, audit.owed), (18.0, 0.0));
        assert_eq!(audit.gaps.map(|gaps| gaps.longest_d), Some(1.0));
        assert_eq!(audit.waiting_d, Some(11.0));
        assert_eq!(audit.barycentric.map(|b| b.spread_km_s()), Some(8.5));
        assert_eq!(audit.spread_share, 0.5);
        assert_eq!(audit.peaks[0].name.as_deref(), Some("solar day"));
        let candidate = &audit.candidates[0];
        let sigma = candidate.errors.as_ref().map(|e| e.sigma_k_m_s).unwrap();
        // σ √(2/N), to the unevenness of 30 nights on 7.3 d.
        assert!(
            (sigma / (2.0f64 / 30.0).sqrt() - 1.0).abs() < 0.1,
            "{sigma}"
        );
        // Seen once a day, 7.3 d cannot be told from 1 / (1 − 1/7.3) d.
        let alias = 1.0 / (1.0 - 1.0 / 7.3);
        assert!(
            candidate
                .aliases
                .iter()
                .any(|a| (a.period_d - alias).abs() < 0.01)
        );
    }

    #[test]
    fn a_star_without_visits_has_nothing_but_its_debt() {
        let audit = audit(&standing(0), &[]);
        assert_eq!((audit.visits, audit.wanted, audit.owed), (0, 3.0, 3.0));
        assert_eq!(audit.gaps, None);
        assert_eq!(audit.waiting_d, None);
        assert_eq!(audit.candidates[0].errors, None);
        assert_eq!(audit.candidates[0].coverage.largest_gap, 1.0);
        assert!(audit.sensitivity.is_empty() && audit.peaks.is_empty());
    }
}
