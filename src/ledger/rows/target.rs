//! The settings of a target as they were when it was observed.

use serde::Serialize;

use super::{Num, RowError, num};
use crate::catalogue::{
    Candidate, ExposureRule, Measured, Programme, SpecialWindow, Target, WindowPurpose, WindowShape,
};

#[derive(Serialize)]
struct MeasuredRow {
    value: Num,
    error: Num,
}

impl From<Measured> for MeasuredRow {
    fn from(measured: Measured) -> Self {
        MeasuredRow {
            value: Num(measured.value),
            error: Num(measured.error),
        }
    }
}

#[derive(Serialize)]
struct CandidateRow {
    period_d: MeasuredRow,
    conjunction_bjd_tdb: MeasuredRow,
    semi_amplitude_m_s: Option<Num>,
    eccentricity: Num,
    argument_deg: Num,
    eccentric_terms: bool,
}

impl From<&Candidate> for CandidateRow {
    fn from(candidate: &Candidate) -> Self {
        CandidateRow {
            period_d: candidate.period_d.into(),
            conjunction_bjd_tdb: candidate.conjunction_bjd_tdb.into(),
            semi_amplitude_m_s: num(candidate.semi_amplitude_m_s),
            eccentricity: Num(candidate.eccentricity),
            argument_deg: Num(candidate.argument.deg()),
            eccentric_terms: candidate.eccentric_terms,
        }
    }
}

/// Exactly one of `transit_h` and the phases stands, and `worth` only where there is one to catch.
#[derive(Serialize)]
struct WindowRow {
    label: String,
    candidate: usize,
    transit_h: Option<Num>,
    phase_from: Option<Num>,
    phase_to: Option<Num>,
    purpose: &'static str,
    worth: Option<Num>,
}

impl From<&SpecialWindow> for WindowRow {
    fn from(window: &SpecialWindow) -> Self {
        let (transit_h, phase_from, phase_to) = match window.shape {
            WindowShape::Transit { duration_h } => (Some(Num(duration_h)), None, None),
            WindowShape::Phases { from, to } => (None, Some(Num(from)), Some(Num(to))),
        };
        let (purpose, worth) = match window.purpose {
            WindowPurpose::Catch { worth } => ("catch", Some(Num(worth))),
            WindowPurpose::Avoid => ("avoid", None),
        };
        WindowRow {
            label: window.label.clone(),
            candidate: window.candidate,
            transit_h,
            phase_from,
            phase_to,
            purpose,
            worth,
        }
    }
}

#[derive(Serialize)]
struct CadenceRow {
    every_nights: Num,
    visits_per_night: u32,
    separation_min: Num,
    total_visits: Option<u32>,
    first_night: Option<String>,
    last_night: Option<String>,
}

#[derive(Serialize)]
struct TargetRow {
    id: String,
    programme: Option<String>,
    ra_deg: Num,
    dec_deg: Num,
    epoch_jyear: Num,
    pm_ra_cosdec_mas_yr: Num,
    pm_dec_mas_yr: Num,
    parallax_mas: Num,
    radial_velocity_km_s: Num,
    magnitude: Num,
    temperature_k: Num,
    mass_msun: Option<MeasuredRow>,
    radius_rsun: Option<MeasuredRow>,
    jitter_m_s: Num,
    cadence: CadenceRow,
    exposure_rule: &'static str,
    exposure_wanted: Num,
    candidates: Vec<CandidateRow>,
    windows: Vec<WindowRow>,
    min_altitude_deg: Option<Num>,
    max_airmass: Option<Num>,
    min_moon_separation_deg: Option<Num>,
    weight: Num,
    paused: bool,
}

/// The settings of a target as JSON, its programme by name.
pub(in crate::ledger) fn target_body(
    target: &Target,
    programmes: &[Programme],
) -> Result<String, RowError> {
    let (exposure_rule, exposure_wanted) = match target.exposure {
        ExposureRule::FixedSeconds(seconds) => ("fixed_s", seconds),
        ExposureRule::SignalToNoise(snr) => ("snr", snr),
        ExposureRule::VelocityError(m_s) => ("rv_error_m_s", m_s),
    };
    let cadence = &target.cadence;
    let row = TargetRow {
        id: target.id.as_str().to_owned(),
        programme: programmes.get(target.programme).map(|p| p.id.clone()),
        ra_deg: Num(target.star.ra.deg()),
        dec_deg: Num(target.star.dec.deg()),
        epoch_jyear: Num(target.star.epoch_jyear),
        pm_ra_cosdec_mas_yr: Num(target.star.pm_ra_cosdec_mas_yr),
        pm_dec_mas_yr: Num(target.star.pm_dec_mas_yr),
        parallax_mas: Num(target.star.parallax_mas),
        radial_velocity_km_s: Num(target.star.radial_velocity_km_s),
        magnitude: Num(target.magnitude),
        temperature_k: Num(target.temperature_k),
        mass_msun: target.mass_msun.map(Into::into),
        radius_rsun: target.radius_rsun.map(Into::into),
        jitter_m_s: Num(target.jitter_m_s),
        cadence: CadenceRow {
            every_nights: Num(cadence.every_nights),
            visits_per_night: cadence.visits_per_night,
            separation_min: Num(cadence.separation_min),
            total_visits: cadence.total_visits,
            first_night: cadence.first_night.map(|night| night.to_string()),
            last_night: cadence.last_night.map(|night| night.to_string()),
        },
        exposure_rule,
        exposure_wanted: Num(exposure_wanted),
        candidates: target.candidates.iter().map(Into::into).collect(),
        windows: target.windows.iter().map(Into::into).collect(),
        min_altitude_deg: target.limits.min_altitude.map(|a| Num(a.deg())),
        max_airmass: num(target.limits.max_airmass),
        min_moon_separation_deg: target.limits.min_moon_separation.map(|a| Num(a.deg())),
        weight: Num(target.weight),
        paused: target.paused,
    };
    Ok(serde_json::to_string(&row)?)
}
