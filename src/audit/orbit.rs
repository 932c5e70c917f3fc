//! How well the visits determine an orbit: the Cramér–Rao bound.

use super::phases::radians;
use crate::catalogue::Candidate;
use crate::score::Phase;
use crate::units::Symmetric;

/// One velocity, as far as its information goes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Measurement {
    /// Mid-exposure time, BJD_TDB in days.
    pub bjd_tdb: f64,
    /// One standard error of the velocity, m/s, with all that counts (jitter, floor).
    pub rv_error_m_s: f64,
}

/// Lowest errors that any unbiased fit of these visits can have (Cramér–Rao: the inverse of the
/// information matrix). The model is v = γ − K sin 2πφ, phase 0 at inferior conjunction; zero point
/// γ, K and phase are free, the period is held.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct OrbitErrors {
    /// Of the semi-amplitude, m/s, at the phase that the ephemeris gives; the less that phase is
    /// known, the more it is the mean over all phases.
    pub sigma_k_m_s: f64,
    /// Of the phase times the semi-amplitude, m/s (radians): divide by K for the phase.
    pub sigma_phase_m_s: f64,
    /// With the first eccentric harmonics free too, where the candidate asks for them and the
    /// visits suffice.
    pub eccentric: Option<EccentricErrors>,
}

/// Errors with cos 4πφ and sin 4πφ free as well.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EccentricErrors {
    /// Of the semi-amplitude, m/s.
    pub sigma_k_m_s: f64,
    /// Of an amplitude of the first harmonic, m/s; to first order in e that amplitude is e K, so
    /// that σ_e is this over K.
    pub sigma_harmonic_m_s: f64,
}

impl OrbitErrors {
    /// Of a candidate; `None` where the visits cannot determine zero point, amplitude and phase
    /// (fewer than three different phases).
    pub fn of(candidate: &Candidate, visits: &[Measurement]) -> Option<Self> {
        let conjunction = candidate.conjunction_bjd_tdb.value;
        let period_d = candidate.period_d.value;
        let blur = mean_phase_error(candidate, visits)?;
        let circular = covariance::<3>(conjunction, period_d, visits)?;
        let (sigma_k_m_s, sigma_phase_m_s) = split(&circular, blur);
        let eccentric = if candidate.eccentric_terms {
            covariance::<5>(conjunction, period_d, visits).map(|c| EccentricErrors {
                sigma_k_m_s: split(&c, blur).0,
                sigma_harmonic_m_s: ((c.at(3, 3) + c.at(4, 4)) / 2.0).sqrt(),
            })
        } else {
            None
        };
        Some(OrbitErrors {
            sigma_k_m_s,
            sigma_phase_m_s,
            eccentric,
        })
    }

    /// Error of K at a period without any ephemeris: the root mean square over all phases of the
    /// orbit, m/s.
    pub fn mean_sigma_k_m_s(period_d: f64, visits: &[Measurement]) -> Option<f64> {
        let epoch = visits.first()?.bjd_tdb;
        let c = covariance::<3>(epoch, period_d, visits)?;
        Some(((c.at(1, 1) + c.at(2, 2)) / 2.0).sqrt())
    }
}

/// Phase error of the ephemeris at the weighted mean time of the visits, radians.
fn mean_phase_error(candidate: &Candidate, visits: &[Measurement]) -> Option<f64> {
    let weights = visits.iter().map(|v| v.rv_error_m_s.powi(-2)).sum::<f64>();
    let first = visits.first()?.bjd_tdb;
    let later = visits
        .iter()
        .map(|v| (v.bjd_tdb - first) * v.rv_error_m_s.powi(-2))
        .sum::<f64>();
    Some(radians(Phase::of(candidate, first + later / weights).error))
}

/// Inverse of the information matrix of (1, cos, sin, cos 2, sin 2), the first N of them.
fn covariance<const N: usize>(
    epoch_bjd: f64,
    period_d: f64,
    visits: &[Measurement],
) -> Option<Symmetric<N>> {
    let mut information = Symmetric::<N>::diagonal([0.0; N]);
    for visit in visits {
        let angle = radians(((visit.bjd_tdb - epoch_bjd) / period_d).fract());
        let (sin, cos) = angle.sin_cos();
        let all = [1.0, cos, sin, cos * cos - sin * sin, 2.0 * sin * cos];
        let mut row = [0.0; N];
        for (element, value) in row.iter_mut().zip(all) {
            *element = value;
        }
        information.add_outer(visit.rv_error_m_s.powi(-2), &row);
    }
    if visits.len() < N {
        return None;
    }
    Some(information.cholesky()?.inverse())
}

/// Errors of K and of phase × K. The orbit points along −sin when the phase is known; a normal error
/// of the phase angle α mixes both directions: ⟨sin²α⟩ = (1 − exp(−2σ²))/2.
fn split<const N: usize>(c: &Symmetric<N>, phase_error_rad: f64) -> (f64, f64) {
    let mixed = (1.0 - (-2.0 * phase_error_rad * phase_error_rad).exp()) / 2.0;
    let along = c.at(2, 2) * (1.0 - mixed) + c.at(1, 1) * mixed;
    let across = c.at(1, 1) * (1.0 - mixed) + c.at(2, 2) * mixed;
    (along.sqrt(), across.sqrt())
}
