//! One target, from a section of `targets.toml` or a row of `targets.csv`.

use super::defaults;
use super::range::Range;
use super::section::Section;
use super::spectral;
use super::survey::WEIGHT;
use crate::catalogue::{
    Cadence, Candidate, ExposureRule, Measured, Programme, SpecialWindow, Target, TargetId,
    TargetLimits, WindowPurpose, WindowShape,
};
use crate::ephemeris::Star;
use crate::units::Angle;

/// The fastest star known moves 10.4″ a year.
const PROPER_MOTION: Range = Range::of(-15_000.0, 15_000.0, "milliarcseconds a year");
/// The nearest star known stands at 769 mas.
const PARALLAX: Range = Range::of(0.0, 1000.0, "milliarcseconds");
const PERIOD: Range = Range::above(0.0, 100_000.0, "days");
const ERROR_D: Range = Range::of(0.0, 100_000.0, "days");
const VELOCITY: Range = Range::of(0.0, 100_000.0, "metres per second");
const PHASE: Range = Range::below(0.0, 1.0, "");
const SOLAR: Range = Range::above(0.0, 10.0, "(the sun is 1)");
const SOLAR_ERROR: Range = Range::of(0.0, 10.0, "(the sun is 1)");

/// What was taken by default that the sky or the velocities feel: told once for the whole list.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Assumed {
    pub(super) parallax: bool,
    pub(super) radial_velocity: bool,
    pub(super) temperature: bool,
}

/// Reads one target.
pub(super) fn read(section: &Section<'_>, programmes: &[Programme]) -> (Target, Assumed) {
    let id = id(section);
    let candidates: Vec<Candidate> = section
        .sections("candidate")
        .into_iter()
        .map(candidate)
        .collect();
    let windows = section
        .sections("window")
        .into_iter()
        .filter_map(|window| special_window(window, candidates.len()))
        .collect();
    let (temperature_k, temperature_assumed) = temperature(section);
    // For people alone: it is checked to be a text and read past.
    section.text("note");
    let target = Target {
        id: TargetId::new(&id),
        programme: programme(section, programmes),
        star: star(section),
        magnitude: section.need_number("magnitude", Range::of(-2.0, 25.0, "magnitudes")),
        temperature_k,
        mass_msun: measured(section, "mass_msun", "mass_error_msun"),
        radius_rsun: measured(section, "radius_rsun", "radius_error_rsun"),
        jitter_m_s: section.number_or("jitter_m_s", defaults::JITTER_M_S, VELOCITY),
        cadence: cadence(section),
        exposure: exposure(section),
        candidates,
        windows,
        limits: limits(section),
        weight: section.number_or("weight", defaults::WEIGHT, WEIGHT),
        paused: section.flag("paused"),
    };
    let assumed = Assumed {
        parallax: !section.has("parallax_mas"),
        radial_velocity: !section.has("radial_velocity_km_s"),
        temperature: temperature_assumed,
    };
    (target, assumed)
}

fn id(section: &Section<'_>) -> String {
    let id = section.need_text("id");
    let allowed = |c: char| c.is_ascii_alphanumeric() || "-_.+".contains(c);
    if !id.is_empty() && (!id.chars().all(allowed) || id.len() > 64) {
        section.wrong(
            "id",
            format!("found \"{id}\", must be 1 to 64 letters, digits, '-', '_', '.', '+'"),
        );
    }
    id
}

fn programme(section: &Section<'_>, programmes: &[Programme]) -> usize {
    let words: Vec<(&str, usize)> = programmes
        .iter()
        .enumerate()
        .map(|(index, programme)| (programme.id.as_str(), index))
        .collect();
    // Where survey.toml could not be read there is nothing to compare with.
    if words.is_empty() {
        section.text("programme");
        return 0;
    }
    section.choice("programme", &words).unwrap_or(0)
}

fn star(section: &Section<'_>) -> Star {
    Star {
        ra: Angle::from_deg(section.need_number("ra_deg", Range::below(0.0, 360.0, "degrees"))),
        dec: Angle::from_deg(section.need_number("dec_deg", Range::of(-90.0, 90.0, "degrees"))),
        epoch_jyear: section.need_number("epoch", Range::of(1900.0, 2100.0, "(Julian year)")),
        pm_ra_cosdec_mas_yr: section.need_number("pm_ra_mas_yr", PROPER_MOTION),
        pm_dec_mas_yr: section.need_number("pm_dec_mas_yr", PROPER_MOTION),
        parallax_mas: section.number_or("parallax_mas", 0.0, PARALLAX),
        radial_velocity_km_s: section.number_or(
            "radial_velocity_km_s",
            0.0,
            Range::of(-1000.0, 1000.0, "kilometres per second"),
        ),
    }
}

fn temperature(section: &Section<'_>) -> (f64, bool) {
    let given = section.number("temperature_k", Range::of(1500.0, 50_000.0, "kelvin"));
    let class = section.text("spectral_class");
    let from_class = class.as_deref().and_then(spectral::temperature_k);
    if let (Some(class), None) = (&class, from_class) {
        section.wrong(
            "spectral_class",
            format!("found \"{class}\", must be a class from F0 to L0, like \"M3.5 V\""),
        );
    }
    match given.or(from_class) {
        Some(kelvin) => (kelvin, false),
        None => (defaults::TEMPERATURE_K, true),
    }
}

fn measured(section: &Section<'_>, key: &'static str, error_key: &'static str) -> Option<Measured> {
    let error = section.number_or(error_key, 0.0, SOLAR_ERROR);
    let value = section.number(key, SOLAR);
    if section.has(error_key) && !section.has(key) {
        section.wrong(error_key, format!("stands alone; {key} must be there too"));
    }
    value.map(|value| Measured { value, error })
}

fn cadence(section: &Section<'_>) -> Cadence {
    let cadence = Cadence {
        every_nights: section.number_or(
            "every_nights",
            defaults::EVERY_NIGHTS,
            Range::of(1.0, 400.0, "nights"),
        ),
        visits_per_night: section
            .whole("visits_per_night", Range::of(1.0, 50.0, "visits"))
            .map_or(defaults::VISITS_PER_NIGHT, |n| n as u32),
        separation_min: section.number_or(
            "separation_min",
            defaults::SEPARATION_MIN,
            Range::of(0.0, 1440.0, "minutes"),
        ),
        total_visits: section
            .whole("total_visits", Range::of(1.0, 100_000.0, "visits"))
            .map(|n| n as u32),
        first_night: section.night("first_night"),
        last_night: section.night("last_night"),
    };
    if let (Some(first), Some(last)) = (cadence.first_night, cadence.last_night)
        && last < first
    {
        let message = format!("found {last}, must not be before first_night, which is {first}");
        section.wrong("last_night", message);
    }
    cadence
}

fn exposure(section: &Section<'_>) -> ExposureRule {
    let seconds = section.number("exposure_s", Range::above(0.0, 43_200.0, "seconds"));
    let snr = section.number("signal_to_noise", Range::above(0.0, 100_000.0, ""));
    let error = section.number("velocity_error_m_s", Range::above(0.0, 10_000.0, "m/s"));
    const KEYS: [&str; 3] = ["exposure_s", "signal_to_noise", "velocity_error_m_s"];
    let there: Vec<&str> = KEYS.into_iter().filter(|k| section.has(k)).collect();
    if let [first, second, ..] = there.as_slice() {
        section.wrong(
            second,
            format!("stands beside {first}; only one of {} may", KEYS.join(", ")),
        );
    }
    match (seconds, snr, error) {
        (Some(s), _, _) => ExposureRule::FixedSeconds(s),
        (_, Some(ratio), _) => ExposureRule::SignalToNoise(ratio),
        (_, _, Some(m_s)) => ExposureRule::VelocityError(m_s),
        _ => ExposureRule::FixedSeconds(defaults::EXPOSURE_S),
    }
}

fn candidate(section: Section<'_>) -> Candidate {
    let candidate = Candidate {
        period_d: Measured {
            value: section.need_number("period_d", PERIOD),
            error: section.number_or("period_error_d", 0.0, ERROR_D),
        },
        conjunction_bjd_tdb: Measured {
            value: section.need_number(
                "conjunction_bjd_tdb",
                Range::of(2_400_000.0, 2_500_000.0, "days, BJD_TDB in full"),
            ),
            error: section.number_or("conjunction_error_d", 0.0, ERROR_D),
        },
        semi_amplitude_m_s: section.number("semi_amplitude_m_s", VELOCITY),
        eccentricity: section.number_or("eccentricity", 0.0, Range::below(0.0, 1.0, "")),
        argument: Angle::from_deg(section.number_or(
            "argument_deg",
            0.0,
            Range::of(-360.0, 360.0, "degrees"),
        )),
        eccentric_terms: section.flag("eccentric_terms"),
    };
    section.finish();
    candidate
}

fn special_window(section: Section<'_>, candidates: usize) -> Option<SpecialWindow> {
    const PURPOSES: &[(&str, bool)] = &[("catch", true), ("avoid", false)];
    let shape = shape(&section);
    let number = section
        .whole("candidate", Range::of(1.0, 20.0, "(from 1, as listed)"))
        .unwrap_or(1) as usize;
    if number > candidates {
        section.wrong(
            "candidate",
            format!("window of candidate {number}, but the target has {candidates}"),
        );
    }
    let worth = section.number_or(
        "worth",
        defaults::WINDOW_WORTH,
        Range::above(0.0, 1000.0, ""),
    );
    let purpose = match section.need_choice("purpose", PURPOSES) {
        Some(false) => WindowPurpose::Avoid,
        _ => WindowPurpose::Catch { worth },
    };
    if purpose == WindowPurpose::Avoid && section.has("worth") {
        section.wrong("worth", "has no meaning for a window to avoid");
    }
    let label = section.text_or("label", "window");
    section.finish();
    shape.map(|shape| SpecialWindow {
        label,
        candidate: number.saturating_sub(1),
        shape,
        purpose,
    })
}

fn shape(section: &Section<'_>) -> Option<WindowShape> {
    let transit = section.number("transit_h", Range::above(0.0, 48.0, "hours"));
    let from = section.number("phase_from", PHASE);
    let to = section.number("phase_to", PHASE);
    let by_transit = section.has("transit_h");
    let by_phase = (section.has("phase_from"), section.has("phase_to"));
    match (by_transit, by_phase) {
        (true, (false, false)) => transit.map(|duration_h| WindowShape::Transit { duration_h }),
        (false, (true, true)) => from
            .zip(to)
            .map(|(from, to)| WindowShape::Phases { from, to }),
        _ => {
            section.wrong(
                "transit_h",
                "must have either transit_h, or phase_from and phase_to",
            );
            None
        }
    }
}

fn limits(section: &Section<'_>) -> TargetLimits {
    TargetLimits {
        min_altitude: section
            .number("min_altitude_deg", Range::of(0.0, 90.0, "degrees"))
            .map(Angle::from_deg),
        max_airmass: section.number("max_airmass", Range::of(1.0, 40.0, "")),
        min_moon_separation: section
            .number("min_moon_separation_deg", Range::of(0.0, 180.0, "degrees"))
            .map(Angle::from_deg),
    }
}
