//! An invented survey for this floor's tests.

use crate::catalogue::{
    Allocation, Cadence, Candidate, ExposureRule, Instrument, Measured, Mount, Planning, Programme,
    Survey, Target, TargetId, TargetLimits, Telescope, VelocityModel,
};
use crate::ephemeris::{HorizonProfile, Site, Star};
use crate::score::CreditedVisit;
use crate::time::{DAY_MS, NightDate, Utc};
use crate::units::Angle;

/// A zero of time for the tests, and its BJD.
pub const START: Utc = Utc::from_unix_ms(1_796_083_200_000);
pub const START_BJD: f64 = 2_461_375.5;

pub fn night(number: i64) -> NightDate {
    NightDate::parse("2026-12-01").unwrap().plus_nights(number)
}

pub fn at(days: f64) -> Utc {
    START.plus_ms((days * DAY_MS as f64).round() as i64)
}

/// A visit `days` after the start, in the night of that number.
pub fn visit(days: f64, credit: f64) -> CreditedVisit {
    CreditedVisit {
        night: night(days.floor() as i64),
        mid: at(days),
        mid_bjd_tdb: START_BJD + days,
        rv_error_m_s: 1.5,
        credit,
    }
}

pub fn candidate(period_d: f64, error_d: f64) -> Candidate {
    Candidate {
        period_d: Measured {
            value: period_d,
            error: error_d,
        },
        conjunction_bjd_tdb: Measured {
            value: START_BJD,
            error: 0.0,
        },
        semi_amplitude_m_s: None,
        eccentricity: 0.0,
        argument: Angle::ZERO,
        eccentric_terms: false,
    }
}

pub fn target() -> Target {
    Target {
        id: TargetId::new("t1"),
        programme: 0,
        star: Star {
            ra: Angle::from_deg(60.0),
            dec: Angle::from_deg(10.0),
            epoch_jyear: 2016.0,
            pm_ra_cosdec_mas_yr: 0.0,
            pm_dec_mas_yr: 0.0,
            parallax_mas: 0.0,
            radial_velocity_km_s: 0.0,
        },
        magnitude: 8.0,
        temperature_k: 3300.0,
        mass_msun: None,
        radius_rsun: None,
        jitter_m_s: 1.0,
        cadence: Cadence {
            every_nights: 3.0,
            visits_per_night: 1,
            separation_min: 0.0,
            total_visits: None,
            first_night: None,
            last_night: None,
        },
        exposure: ExposureRule::VelocityError(1.5),
        candidates: Vec::new(),
        windows: Vec::new(),
        limits: TargetLimits::default(),
        weight: 1.0,
        paused: false,
    }
}

pub fn survey() -> Survey {
    Survey {
        name: "test".to_owned(),
        first_night: None,
        site: Site {
            name: "nowhere".to_owned(),
            latitude: Angle::from_deg(30.0),
            longitude: Angle::ZERO,
            height_m: 2000.0,
            pressure_hpa: 800.0,
            temperature_c: 5.0,
            relative_humidity: 0.3,
            horizon: HorizonProfile::default(),
        },
        telescope: Telescope {
            aperture_m: 0.7,
            obstruction: 0.2,
            mount: Mount::AltAzimuth {
                zenith_hole: Angle::from_deg(1.0),
            },
            slew_rate_deg_s: (5.0, 5.0),
            acceleration_deg_s2: (f64::INFINITY, f64::INFINITY),
            settle_s: 5.0,
            acquisition_s: 60.0,
            min_altitude: Angle::from_deg(25.0),
            max_altitude: Angle::from_deg(90.0),
            min_moon_separation: Angle::from_deg(20.0),
            min_sun_separation: Angle::from_deg(40.0),
            wind: None,
        },
        instrument: Instrument {
            band_min_nm: 820.0,
            band_max_nm: 920.0,
            zero_point_photons_s_m2_nm: 5e7,
            throughput: 0.05,
            reference_seeing_arcsec: 1.5,
            fibre_arcsec: 2.0,
            extinction_mag_airmass: 0.05,
            dark_sky_mag_arcsec2: 19.5,
            spectral_pixels: 20_000.0,
            read_noise_e: 5.0,
            readout_s: 10.0,
            saturation_e: 100_000.0,
            min_exposure_s: 10.0,
            max_exposure_s: 1200.0,
            velocity: VelocityModel {
                floor_m_s: 0.5,
                quality_factor: vec![(3000.0, 16_000.0), (4000.0, 10_000.0)],
            },
            calibrations: Vec::new(),
        },
        programmes: vec![Programme {
            id: "main".to_owned(),
            label: "Main".to_owned(),
            weight: 2.0,
            share: 1.0,
            min_period_d: 1.1,
            max_period_d: 120.0,
        }],
        targets: vec![target()],
        allocation: Allocation::default(),
        planning: Planning {
            darkness_sun_altitude: Angle::from_deg(-12.0),
            coverage_share: 0.5,
            season_boost: 1.0,
            share_pull: 1.0,
            repeat_worth: 0.5,
            barycentric_spread_km_s: 20.0,
            typical_seeing_arcsec: 1.5,
            budget_ms: 1000,
            seed: 1,
        },
    }
}
