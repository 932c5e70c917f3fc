//! `observatory.toml`: telescope and spectrograph.

use super::defaults;
use super::range::Range;
use super::section::Section;
use crate::catalogue::{
    Calibration, CalibrationWhen, Instrument, Mount, TargetId, Telescope, VelocityModel,
    WindAvoidance,
};
use crate::units::Angle;

const ALTITUDE: Range = Range::of(0.0, 90.0, "degrees");
const OVERHEAD: Range = Range::of(0.0, 3600.0, "seconds");
const WAVELENGTH: Range = Range::of(300.0, 5000.0, "nanometres");
const EXPOSURE: Range = Range::above(0.0, 14_400.0, "seconds");
const MAGNITUDE: Range = Range::of(0.0, 30.0, "magnitudes");
const MOUNTS: &[(&str, bool)] = &[("alt-azimuth", true), ("equatorial", false)];

/// When a calibration is wanted, as it is written.
#[derive(Clone, Copy)]
enum When {
    Start,
    End,
    Every,
    Half,
}

const WHENS: &[(&str, When)] = &[
    ("night_start", When::Start),
    ("night_end", When::End),
    ("every_hours", When::Every),
    ("each_half", When::Half),
];

pub(super) fn read(root: &Section<'_>) -> Option<(Telescope, Instrument)> {
    let telescope = root.section("telescope");
    let instrument = root.section("instrument");
    for (there, key) in [
        (telescope.is_some(), "telescope"),
        (instrument.is_some(), "instrument"),
    ] {
        if !there && !root.has(key) {
            root.wrong(key, format!("the section [{key}] is missing"));
        }
    }
    let telescope = telescope.map(read_telescope);
    let instrument = instrument.map(read_instrument);
    telescope.zip(instrument)
}

fn read_telescope(section: Section<'_>) -> Telescope {
    let telescope = Telescope {
        aperture_m: section.need_number("aperture_m", Range::above(0.0, 12.0, "metres")),
        obstruction: section.number_or(
            "obstruction",
            0.0,
            Range::below(0.0, 1.0, "(share of the area)"),
        ),
        mount: mount(&section),
        slew_rate_deg_s: both_axes(
            &section,
            "slew_rate_deg_s",
            Range::above(0.0, 60.0, "degrees per second"),
        )
        .unwrap_or_else(|| {
            if !section.has("slew_rate_deg_s") {
                section.wrong(
                    "slew_rate_deg_s",
                    "is missing; it must be a list of two numbers, one for each axis",
                );
            }
            (1.0, 1.0)
        }),
        acceleration_deg_s2: both_axes(
            &section,
            "acceleration_deg_s2",
            Range::above(0.0, 60.0, "degrees per second squared"),
        )
        .unwrap_or((f64::INFINITY, f64::INFINITY)),
        settle_s: section.need_number("settle_s", OVERHEAD),
        acquisition_s: section.need_number("acquisition_s", OVERHEAD),
        min_altitude: Angle::from_deg(section.need_number("min_altitude_deg", ALTITUDE)),
        max_altitude: Angle::from_deg(section.number_or(
            "max_altitude_deg",
            defaults::MAX_ALTITUDE_DEG,
            ALTITUDE,
        )),
        min_moon_separation: Angle::from_deg(section.number_or(
            "min_moon_separation_deg",
            defaults::MIN_MOON_SEPARATION_DEG,
            Range::of(0.0, 180.0, "degrees"),
        )),
        min_sun_separation: Angle::from_deg(section.number_or(
            "min_sun_separation_deg",
            defaults::MIN_SUN_SEPARATION_DEG,
            Range::of(0.0, 180.0, "degrees"),
        )),
        wind: section.section("wind").map(wind),
    };
    if telescope.max_altitude <= telescope.min_altitude {
        let (low, high) = (telescope.min_altitude.deg(), telescope.max_altitude.deg());
        section.wrong(
            "max_altitude_deg",
            format!("found {high:.1}, must be above min_altitude_deg, which is {low:.1}"),
        );
    }
    section.finish();
    telescope
}

fn both_axes(section: &Section<'_>, key: &'static str, range: Range) -> Option<(f64, f64)> {
    section.numbers::<2>(key, range).map(|[a, b]| (a, b))
}

fn mount(section: &Section<'_>) -> Mount {
    let hour_angle = Range::of(-12.0, 12.0, "hours, east negative");
    if section.need_choice("mount", MOUNTS) == Some(false) {
        let min_h = section.number_or("min_hour_angle_h", -12.0, hour_angle);
        let max_h = section.number_or("max_hour_angle_h", 12.0, hour_angle);
        if max_h <= min_h {
            section.wrong(
                "max_hour_angle_h",
                format!("found {max_h}, must be above min_hour_angle_h, which is {min_h}"),
            );
        }
        return Mount::Equatorial {
            min_hour_angle: Angle::from_deg(min_h * 15.0),
            max_hour_angle: Angle::from_deg(max_h * 15.0),
            flip_s: section.number_or("flip_s", 0.0, OVERHEAD),
        };
    }
    Mount::AltAzimuth {
        zenith_hole: Angle::from_deg(section.number_or(
            "zenith_hole_deg",
            defaults::ZENITH_HOLE_DEG,
            Range::of(0.0, 45.0, "degrees"),
        )),
    }
}

fn wind(section: Section<'_>) -> WindAvoidance {
    let wind = WindAvoidance {
        above_m_s: section.need_number("above_m_s", Range::of(0.0, 60.0, "metres per second")),
        half_width: Angle::from_deg(
            section.need_number("half_width_deg", Range::above(0.0, 180.0, "degrees")),
        ),
    };
    section.finish();
    wind
}

fn read_instrument(section: Section<'_>) -> Instrument {
    let instrument = Instrument {
        band_min_nm: section.need_number("band_min_nm", WAVELENGTH),
        band_max_nm: section.need_number("band_max_nm", WAVELENGTH),
        zero_point_photons_s_m2_nm: section.need_number(
            "zero_point_photons_s_m2_nm",
            Range::above(0.0, 1e10, "photons per second, square metre and nanometre"),
        ),
        throughput: section.need_number("throughput", Range::above(0.0, 1.0, "")),
        reference_seeing_arcsec: section.number_or(
            "reference_seeing_arcsec",
            1.2,
            Range::above(0.0, 10.0, "arcseconds"),
        ),
        fibre_arcsec: section.need_number("fibre_arcsec", Range::above(0.0, 60.0, "arcseconds")),
        extinction_mag_airmass: section.need_number(
            "extinction_mag_airmass",
            Range::of(0.0, 2.0, "magnitudes per airmass"),
        ),
        dark_sky_mag_arcsec2: section.need_number("dark_sky_mag_arcsec2", MAGNITUDE),
        spectral_pixels: section.need_number("spectral_pixels", Range::of(1.0, 1e7, "pixels")),
        read_noise_e: section.number_or("read_noise_e", 0.0, Range::of(0.0, 1e4, "electrons")),
        readout_s: section.need_number("readout_s", OVERHEAD),
        saturation_e: section.need_number("saturation_e", Range::above(0.0, 1e9, "electrons")),
        min_exposure_s: section.need_number("min_exposure_s", EXPOSURE),
        max_exposure_s: section.need_number("max_exposure_s", EXPOSURE),
        velocity: velocity(&section),
        calibrations: calibrations(&section),
    };
    for (low, high, key, other) in [
        (
            instrument.band_min_nm,
            instrument.band_max_nm,
            "band_max_nm",
            "band_min_nm",
        ),
        (
            instrument.min_exposure_s,
            instrument.max_exposure_s,
            "max_exposure_s",
            "min_exposure_s",
        ),
    ] {
        if section.has(key) && section.has(other) && high <= low {
            let message = format!("found {high}, must be above {other}, which is {low}");
            section.wrong(key, message);
        }
    }
    section.finish();
    instrument
}

fn velocity(instrument: &Section<'_>) -> VelocityModel {
    let Some(section) = instrument.section("velocity") else {
        if !instrument.has("velocity") {
            instrument.wrong("velocity", "the section [instrument.velocity] is missing");
        }
        return VelocityModel {
            floor_m_s: 0.0,
            quality_factor: defaults::QUALITY_FACTOR.to_vec(),
        };
    };
    let floor_m_s = section.need_number("floor_m_s", Range::of(0.0, 1000.0, "metres per second"));
    let mut quality_factor = section.number_pairs(
        "quality_factor",
        Range::of(1500.0, 50_000.0, "kelvin"),
        Range::above(0.0, 1e6, "(quality factor)"),
    );
    if quality_factor.is_empty() {
        if section.has("quality_factor") {
            section.wrong(
                "quality_factor",
                "holds no usable pair, must have one at least",
            );
        }
        quality_factor = defaults::QUALITY_FACTOR.to_vec();
    }
    quality_factor.sort_by(|a, b| a.0.total_cmp(&b.0));
    if let Some(twice) = quality_factor.windows(2).find(|w| w[0].0 == w[1].0) {
        let message = format!("found {} kelvin twice, must be once", twice[0].0);
        section.wrong("quality_factor", message);
    }
    section.finish();
    VelocityModel {
        floor_m_s,
        quality_factor,
    }
}

fn calibrations(instrument: &Section<'_>) -> Vec<Calibration> {
    let mut calibrations: Vec<Calibration> = Vec::new();
    for section in instrument.sections("calibration") {
        let id = section.need_text("id");
        if !id.is_empty() && calibrations.iter().any(|c| c.id == id) {
            section.wrong("id", format!("found \"{id}\" a second time, must be once"));
        }
        let standards = section.texts("standards");
        calibrations.push(Calibration {
            id,
            duration_s: section.need_number("duration_s", Range::above(0.0, 14_400.0, "seconds")),
            when: when(&section),
            standards: standards.iter().map(|s| TargetId::new(s)).collect(),
        });
        section.finish();
    }
    calibrations
}

fn when(section: &Section<'_>) -> CalibrationWhen {
    match section.need_choice("when", WHENS) {
        None | Some(When::Start) => CalibrationWhen::NightStart,
        Some(When::End) => CalibrationWhen::NightEnd,
        Some(When::Half) => CalibrationWhen::EachHalf,
        Some(When::Every) => {
            CalibrationWhen::EveryHours(section.need_number("hours", Range::of(0.1, 24.0, "hours")))
        }
    }
}
