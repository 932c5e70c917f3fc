//! What a visit would add to the knowledge of an orbit.
//!
//! For a period P, a visit at time t has the design row x = (1, cos 2πt/P, sin 2πt/P), and
//! (cos 4πt/P, sin 4πt/P) where eccentric terms are asked for. The visits so far, weighted by
//! 1/σ², and a weak prior make the information matrix M; one more visit of weight w adds
//! ln(1 + w xᵀM⁻¹x) to ln det M (matrix determinant lemma): Bayesian D-optimal design (Chaloner &
//! Verdinelli 1995, Statistical Science 10, 273; for radial velocities Loredo 2004, AIP Conf. Proc.
//! 707, 330).
//!
//! **An uncertain period.** The gain is averaged over the period's error: the normal distribution
//! is cut into slices of equal probability, each stands with its own exact M at its median period.
//! Soon after the last visits all slices agree; E periods later they are E·σ_P/P apart in phase, and
//! once that nears one the average no longer prefers any phase, which is the honest answer for an
//! ephemeris that has run out. What is left then is a ripple of about one over the root of the
//! number of slices.
//!
//! **No candidate.** The slices are periods spaced evenly in their logarithm between the
//! programme's bounds: what is filled are then the holes that day and season leave in the sampling.
//!
//! The value is the gain over that of a visit at the best phase for every slice: 0 to 1. A star
//! whose phases are all filled has 1 everywhere: then only cadence decides.

use std::f64::consts::TAU;

use super::Photometer;
use crate::catalogue::{Candidate, Measured, Survey, Target};
use crate::units::Symmetric;

/// Slices of all candidates of a star together, and periods of the grid of a star without any.
const SLICES: usize = 48;
/// A candidate among many keeps at least so many slices.
const FEWEST_SLICES: usize = 16;
/// Prior spread of the velocity's zero point, in errors of one visit. Weak: one visit pins it.
const PRIOR_OFFSET_ERRORS: f64 = 100.0;
/// Prior spread of the amplitudes, in errors of one visit, where no semi-amplitude is guessed.
const PRIOR_AMPLITUDE_ERRORS: f64 = 10.0;
/// A guessed semi-amplitude counts up to so many errors of one visit: the product of the gains of
/// all slices then stays far below the largest number of 64 bits.
const LARGEST_PRIOR_ERRORS: f64 = 100.0;
/// No period below this share of the best estimate is believed, however large its error.
const SHORTEST_PERIOD_SHARE: f64 = 0.1;
/// Velocity errors below this count as this: no spectrograph does better, and weights stay finite.
const SMALLEST_ERROR_M_S: f64 = 0.01;
/// Velocity error taken where a star cannot be exposed on at all.
const UNKNOWN_ERROR_M_S: f64 = 1.0;
/// Bounds of the period grid, days, for a target whose programme is not in the survey.
const PERIODS_WITHOUT_PROGRAMME_D: (f64, f64) = (1.0, 100.0);
/// Phases tried for the best one.
const PHASES_TRIED: usize = 48;
/// Steps of a table in the shortest period: a straight line between two is good to 0.001 of the
/// highest harmonic, cos 8πφ with eccentric terms (half of that step is taken then).
const STEPS_PER_PERIOD: f64 = 96.0;
/// Longest step of a table, days.
const LONGEST_STEP_D: f64 = 15.0 / 1440.0;
/// Shortest step of a table, days.
const SHORTEST_STEP_D: f64 = 1.0 / 1440.0;

/// xᵀM⁻¹x as a trigonometric polynomial of the phase: a₀ + Σ aₖ cos kθ + bₖ sin kθ.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Spread {
    constant: f64,
    cos: [f64; 4],
    sin: [f64; 4],
}

impl Spread {
    /// Products of the rows' sines and cosines written as sums: cos a cos b = (cos(a−b) +
    /// cos(a+b))/2 and so on.
    fn of(c: &Symmetric<5>) -> Self {
        let at = |i: usize, j: usize| c.at(i, j);
        Spread {
            constant: at(0, 0) + (at(1, 1) + at(2, 2) + at(3, 3) + at(4, 4)) / 2.0,
            cos: [
                2.0 * at(0, 1) + at(1, 3) + at(2, 4),
                2.0 * at(0, 3) + (at(1, 1) - at(2, 2)) / 2.0,
                at(1, 3) - at(2, 4),
                (at(3, 3) - at(4, 4)) / 2.0,
            ],
            sin: [
                2.0 * at(0, 2) + at(1, 4) - at(2, 3),
                2.0 * at(0, 4) + at(1, 2),
                at(1, 4) + at(2, 3),
                at(3, 4),
            ],
        }
    }

    fn circular(&self, (sin, cos): (f64, f64)) -> f64 {
        let (sin2, cos2) = twice((sin, cos));
        self.constant
            + self.cos[0] * cos
            + self.sin[0] * sin
            + self.cos[1] * cos2
            + self.sin[1] * sin2
    }

    fn eccentric(&self, (sin, cos): (f64, f64)) -> f64 {
        let (sin2, cos2) = twice((sin, cos));
        let (sin3, cos3) = (sin2 * cos + cos2 * sin, cos2 * cos - sin2 * sin);
        let (sin4, cos4) = twice((sin2, cos2));
        self.circular((sin, cos))
            + self.cos[2] * cos3
            + self.sin[2] * sin3
            + self.cos[3] * cos4
            + self.sin[3] * sin4
    }
}

fn twice((sin, cos): (f64, f64)) -> (f64, f64) {
    (2.0 * sin * cos, cos * cos - sin * sin)
}

/// One period with what is known at it.
#[derive(Clone, Debug, PartialEq)]
struct Slice {
    period_d: f64,
    eccentric: bool,
    /// M⁻¹. Terms that are not asked for have no prior spread, so that they stay out by themselves.
    covariance: Symmetric<5>,
    spread: Spread,
    /// The largest xᵀM⁻¹x of any phase.
    largest: f64,
}

impl Slice {
    fn new(period_d: f64, eccentric: bool, error_m_s: f64, amplitude_errors: f64) -> Self {
        let offset = (PRIOR_OFFSET_ERRORS * error_m_s).powi(2);
        let amplitude = (amplitude_errors * error_m_s).powi(2);
        let harmonic = if eccentric { amplitude } else { 0.0 };
        let covariance = Symmetric::diagonal([offset, amplitude, amplitude, harmonic, harmonic]);
        let mut slice = Slice {
            period_d,
            eccentric,
            covariance,
            spread: Spread::of(&covariance),
            largest: 0.0,
        };
        slice.refresh();
        slice
    }

    /// (sin, cos) of the phase angle.
    fn angle(&self, bjd_tdb: f64) -> (f64, f64) {
        (TAU * (bjd_tdb / self.period_d).fract()).sin_cos()
    }

    fn add(&mut self, bjd_tdb: f64, weight: f64) {
        let (sin, cos) = self.angle(bjd_tdb);
        let (sin2, cos2) = twice((sin, cos));
        self.covariance
            .condition_on(weight, &[1.0, cos, sin, cos2, sin2]);
    }

    fn refresh(&mut self) {
        self.spread = Spread::of(&self.covariance);
        let step = (TAU / PHASES_TRIED as f64).sin_cos();
        let mut angle = (0.0, 1.0);
        self.largest = 0.0;
        for _ in 0..PHASES_TRIED {
            self.largest = self.largest.max(self.spread_at(angle));
            angle = turned(angle, step);
        }
    }

    fn spread_at(&self, angle: (f64, f64)) -> f64 {
        if self.eccentric {
            self.spread.eccentric(angle)
        } else {
            self.spread.circular(angle)
        }
    }

    /// Multiplies each of the gains at equal steps from `start` by 1 + w xᵀM⁻¹x.
    fn multiply_gains(&self, weight: f64, start_bjd: f64, step_d: f64, gains: &mut [f64]) {
        let step = (TAU * (step_d / self.period_d)).sin_cos();
        let mut angle = self.angle(start_bjd);
        for gain in gains {
            *gain *= 1.0 + weight * self.spread_at(angle);
            angle = turned(angle, step);
        }
    }
}

/// The angle turned on by another, both as (sin, cos).
fn turned((sin, cos): (f64, f64), (sin_step, cos_step): (f64, f64)) -> (f64, f64) {
    (
        sin * cos_step + cos * sin_step,
        cos * cos_step - sin * sin_step,
    )
}

/// The slices of one candidate, or the grid: they are averaged first.
#[derive(Clone, Debug, PartialEq)]
struct Orbit {
    slices: Vec<Slice>,
    /// Mean of ln(1 + w max xᵀM⁻¹x) over the slices.
    best_gain: f64,
}

impl Orbit {
    fn new(slices: Vec<Slice>, weight: f64) -> Self {
        let mut orbit = Orbit {
            slices,
            best_gain: 0.0,
        };
        orbit.refresh(weight);
        orbit
    }

    fn refresh(&mut self, weight: f64) {
        for slice in &mut self.slices {
            slice.refresh();
        }
        self.best_gain = self.mean(|slice| (weight * slice.largest).ln_1p());
    }

    fn mean(&self, of: impl Fn(&Slice) -> f64) -> f64 {
        self.slices.iter().map(of).sum::<f64>() / self.slices.len() as f64
    }
}

/// What is known of a star's orbits, and what one more visit would add. Lives as long as the star's
/// settings: each visit is taken in as it comes.
#[derive(Clone, Debug, PartialEq)]
pub struct Coverage {
    orbits: Vec<Orbit>,
    /// 1/σ² of the visit to come.
    weight: f64,
    /// Sum of the orbits' best gains.
    best_gain: f64,
}

impl Coverage {
    /// Before any visit. The visit to come is taken to have the velocity error of the star's best
    /// case: what a worse sky costs is charged by the quality, not here.
    pub fn new(survey: &Survey, target: &Target) -> Self {
        let error_m_s = Photometer::new(survey, target)
            .best()
            .map_or(UNKNOWN_ERROR_M_S, |exposing| exposing.rv_error_m_s);
        if target.candidates.is_empty() {
            let bounds = survey
                .programmes
                .get(target.programme)
                .map_or(PERIODS_WITHOUT_PROGRAMME_D, |p| {
                    (p.min_period_d, p.max_period_d)
                });
            Coverage::of_grid(bounds, error_m_s)
        } else {
            Coverage::of_candidates(&target.candidates, error_m_s)
        }
    }

    /// Over a grid of periods between two bounds in days.
    fn of_grid(bounds_d: (f64, f64), visit_error_m_s: f64) -> Self {
        let error_m_s = visit_error_m_s.max(SMALLEST_ERROR_M_S);
        let slices = log_spaced(bounds_d, SLICES)
            .map(|p| Slice::new(p, false, error_m_s, PRIOR_AMPLITUDE_ERRORS))
            .collect();
        Coverage::of_orbits(vec![slices], error_m_s)
    }

    fn of_candidates(candidates: &[Candidate], visit_error_m_s: f64) -> Self {
        let error_m_s = visit_error_m_s.max(SMALLEST_ERROR_M_S);
        let count = (SLICES / candidates.len().max(1)).max(FEWEST_SLICES);
        let slices_of = |candidate: &Candidate| {
            let guess_errors = candidate.semi_amplitude_m_s.unwrap_or(0.0) / error_m_s;
            let prior_errors = guess_errors.clamp(PRIOR_AMPLITUDE_ERRORS, LARGEST_PRIOR_ERRORS);
            slice_periods(candidate.period_d, count)
                .map(|p| Slice::new(p, candidate.eccentric_terms, error_m_s, prior_errors))
                .collect()
        };
        Coverage::of_orbits(candidates.iter().map(slices_of).collect(), error_m_s)
    }

    fn of_orbits(slices: Vec<Vec<Slice>>, error_m_s: f64) -> Self {
        let weight = error_m_s.powi(-2);
        let orbits: Vec<Orbit> = slices.into_iter().map(|s| Orbit::new(s, weight)).collect();
        Coverage {
            best_gain: orbits.iter().map(|orbit| orbit.best_gain).sum(),
            orbits,
            weight,
        }
    }

    /// Takes in a visit: its mid-exposure time and its velocity error. A rank-one update.
    pub fn add_visit(&mut self, mid_bjd_tdb: f64, rv_error_m_s: f64) {
        self.add_visits([(mid_bjd_tdb, rv_error_m_s)]);
    }

    /// Takes in many visits at once, which is faster than one by one. A visit whose time or error
    /// is no number teaches nothing.
    pub fn add_visits(&mut self, visits: impl IntoIterator<Item = (f64, f64)>) {
        for (mid_bjd_tdb, rv_error_m_s) in visits {
            if !(mid_bjd_tdb.is_finite() && rv_error_m_s.is_finite()) {
                continue;
            }
            let weight = rv_error_m_s.max(SMALLEST_ERROR_M_S).powi(-2);
            for slice in self.orbits.iter_mut().flat_map(|orbit| &mut orbit.slices) {
                slice.add(mid_bjd_tdb, weight);
            }
        }
        for orbit in &mut self.orbits {
            orbit.refresh(self.weight);
        }
        self.best_gain = self.orbits.iter().map(|orbit| orbit.best_gain).sum();
    }

    /// The value of a visit at that time, 0 to 1.
    pub fn value_at(&self, mid_bjd_tdb: f64) -> f64 {
        let gain_of = |slice: &Slice| {
            let spread = slice.spread_at(slice.angle(mid_bjd_tdb));
            (self.weight * spread).ln_1p()
        };
        self.scaled(self.orbits.iter().map(|orbit| orbit.mean(gain_of)).sum())
    }

    /// The values of visits at `count` times, `step_d` days apart.
    pub fn values_on_grid(&self, start_bjd_tdb: f64, step_d: f64, count: usize) -> Vec<f64> {
        let mut gains = vec![0.0; count];
        let mut product = vec![1.0; count];
        for orbit in &self.orbits {
            // The sum of the logarithms is the logarithm of the product, which is taken once.
            product.fill(1.0);
            for slice in &orbit.slices {
                slice.multiply_gains(self.weight, start_bjd_tdb, step_d, &mut product);
            }
            for (gain, factor) in gains.iter_mut().zip(&product) {
                *gain += factor.ln() / orbit.slices.len() as f64;
            }
        }
        gains.into_iter().map(|gain| self.scaled(gain)).collect()
    }

    fn scaled(&self, gain: f64) -> f64 {
        if self.best_gain > 0.0 {
            (gain / self.best_gain).clamp(0.0, 1.0)
        } else {
            1.0
        }
    }

    /// A table of the values between two times, close enough for straight lines between its points.
    pub fn table(&self, from_bjd_tdb: f64, to_bjd_tdb: f64) -> CoverageTable {
        let shortest_d = self
            .orbits
            .iter()
            .flat_map(|orbit| &orbit.slices)
            .map(|s| s.period_d / if s.eccentric { 2.0 } else { 1.0 })
            .fold(f64::INFINITY, f64::min);
        let step_d = (shortest_d / STEPS_PER_PERIOD).clamp(SHORTEST_STEP_D, LONGEST_STEP_D);
        let count = ((to_bjd_tdb - from_bjd_tdb) / step_d).ceil().max(1.0) as usize + 1;
        CoverageTable {
            start_bjd_tdb: from_bjd_tdb,
            step_d,
            values: self.values_on_grid(from_bjd_tdb, step_d, count),
        }
    }
}

/// Middles of `count` steps even in the logarithm.
fn log_spaced((min, max): (f64, f64), count: usize) -> impl Iterator<Item = f64> {
    let ratio = (max / min).ln();
    (0..count).map(move |i| min * (ratio * (i as f64 + 0.5) / count as f64).exp())
}

/// Median periods of `count` equally probable slices of a normal distribution; of one, where the
/// period is exact.
fn slice_periods(period: Measured, count: usize) -> impl Iterator<Item = f64> {
    let count = if period.error > 0.0 { count } else { 1 };
    (0..count).map(move |i| {
        let probability = (i as f64 + 0.5) / count as f64;
        (period.value + period.error * normal_quantile(probability))
            .max(SHORTEST_PERIOD_SHARE * period.value)
    })
}

/// Quantile of the standard normal distribution, 0 < p < 1, to 4.5e-4 (Abramowitz & Stegun 1964,
/// formula 26.2.23), which is far below the width of a slice.
fn normal_quantile(p: f64) -> f64 {
    let tail = p.min(1.0 - p);
    let t = (-2.0 * tail.ln()).sqrt();
    let upper = t
        - (2.515_517 + t * (0.802_853 + t * 0.010_328))
            / (1.0 + t * (1.432_788 + t * (0.189_269 + t * 0.001_308)));
    if p < 0.5 { -upper } else { upper }
}

/// Values of coverage through a night.
#[derive(Clone, Debug, PartialEq)]
pub struct CoverageTable {
    start_bjd_tdb: f64,
    step_d: f64,
    values: Vec<f64>,
}

impl CoverageTable {
    /// The value at a time: a straight line between the points, the end points beyond them.
    pub fn at(&self, bjd_tdb: f64) -> f64 {
        let last = self.values.len() - 1;
        let position = ((bjd_tdb - self.start_bjd_tdb) / self.step_d).clamp(0.0, last as f64);
        let before = (position as usize).min(last.saturating_sub(1));
        let after = (before + 1).min(last);
        let share = position - before as f64;
        self.values[before] * (1.0 - share) + self.values[after] * share
    }
}

#[cfg(test)]
mod tests;
