use super::*;
use crate::score::fixtures::{START, START_BJD, survey, target};
use proptest::prelude::*;

fn conditions(airmass: f64, seeing: f64, sky: f64) -> Conditions {
    Conditions {
        utc: START,
        bjd_tdb: START_BJD,
        airmass,
        zenith_seeing_arcsec: seeing,
        sky_mag_arcsec2: sky,
    }
}

fn rule() -> impl Strategy<Value = ExposureRule> {
    prop_oneof![
        (1.0f64..5000.0).prop_map(ExposureRule::FixedSeconds),
        (5.0f64..300.0).prop_map(ExposureRule::SignalToNoise),
        (0.3f64..10.0).prop_map(ExposureRule::VelocityError),
    ]
}

proptest! {
    #[test]
    fn exposures_keep_their_limits_and_reach_what_the_rule_asks(
        rule in rule(),
        magnitude in -1.0f64..13.0,
        (airmass, seeing, sky) in (1.0f64..3.0, 0.5f64..4.0, 15.0f64..21.0),
    ) {
        let survey = survey();
        let instrument = &survey.instrument;
        let mut star = target();
        star.magnitude = magnitude;
        star.exposure = rule;
        let photometer = Photometer::new(&survey, &star);
        let Ok(exposing) = photometer.expose(&conditions(airmass, seeing, sky)) else {
            return Ok(());
        };
        let seconds = exposing.exposures.seconds;
        prop_assert!(seconds >= instrument.min_exposure_s);
        prop_assert!(seconds <= instrument.max_exposure_s);
        prop_assert!(exposing.exposures.total_s() <= 1.01 * LONGEST_OPEN_S);
        prop_assert!((0.0..=1.0).contains(&exposing.quality));
        prop_assert!(exposing.rv_error_m_s > exposing.photon_rv_error_m_s);
        // Saturation by the whole signal of a pixel: S t = snr² at least, so this bounds it below.
        let count = f64::from(exposing.exposures.count);
        prop_assert!(exposing.snr.powi(2) / count <= instrument.saturation_e * 1.000_001);
        match rule {
            ExposureRule::FixedSeconds(wanted) => {
                prop_assert!(exposing.exposures.total_s() >= wanted * 0.999_999);
            }
            ExposureRule::SignalToNoise(wanted) => prop_assert!(exposing.snr >= wanted * 0.999_999),
            ExposureRule::VelocityError(wanted) => {
                prop_assert!(exposing.photon_rv_error_m_s <= wanted * 1.000_001);
            }
        }
    }

    #[test]
    fn a_worse_sky_never_improves_the_quality(
        rule in rule(),
        (airmass, seeing, sky) in (1.0f64..2.0, 0.5f64..2.0, 17.0f64..21.0),
        (dx, ds, db) in (0.0f64..1.0, 0.0f64..2.0, 0.0f64..3.0),
    ) {
        let survey = survey();
        let mut star = target();
        star.exposure = rule;
        let photometer = Photometer::new(&survey, &star);
        let quality = |c: Conditions| photometer.expose(&c).map_or(0.0, |e| e.quality);
        let good = quality(conditions(airmass, seeing, sky));
        let bad = quality(conditions(airmass + dx, seeing + ds, sky - db));
        // Rounding to a tenth of a second moves the information of a fixed exposure by as much.
        prop_assert!(bad <= good + 1e-6, "{bad} {good}");
    }
}

#[test]
fn follows_the_relation_of_bouchy_pepe_and_queloz() {
    // Bouchy, Pepe & Queloz 2001, A&A 374, 733, equation 12: δv = c / (Q √N). By hand: Q = 10000
    // and 10⁸ photons give 2.998 m/s.
    assert!((photon_rv_error_m_s(1e4, 1e8) - 2.997_924_58).abs() < 1e-9);
    // The photometer's own, without sky and read-out: four times the time halves the error.
    let mut survey = survey();
    survey.instrument.read_noise_e = 0.0;
    survey.instrument.dark_sky_mag_arcsec2 = 40.0;
    let error_after = |seconds: f64| {
        let mut star = target();
        star.exposure = ExposureRule::FixedSeconds(seconds);
        let exposed = Photometer::new(&survey, &star).best().unwrap();
        let photons = exposed.snr.powi(2) * survey.instrument.spectral_pixels;
        // Q at 3300 K on the straight line from 16000 (3000 K) to 10000 (4000 K).
        let expected = photon_rv_error_m_s(14_200.0, photons);
        assert!((exposed.photon_rv_error_m_s / expected - 1.0).abs() < 1e-12);
        exposed.photon_rv_error_m_s
    };
    assert!((error_after(100.0) / error_after(400.0) - 2.0).abs() < 1e-6);
}

#[test]
fn a_zero_magnitude_star_gives_ten_million_photons() {
    // Common practice, no source: about 10⁷ photons a second and nanometre from a bright star of
    // magnitude zero to a quarter-metre telescope. The zero point of 10⁸ photons/s/m²/nm (1000
    // photons/s/cm²/Å, common practice, from memory) must come out so through the whole model.
    let mut survey = survey();
    survey.telescope.aperture_m = 0.25;
    survey.telescope.obstruction = 0.0;
    let instrument = &mut survey.instrument;
    instrument.zero_point_photons_s_m2_nm = 1e8;
    instrument.throughput = fibre_coupling(instrument.fibre_arcsec, 1.5);
    instrument.extinction_mag_airmass = 0.0;
    instrument.read_noise_e = 0.0;
    instrument.dark_sky_mag_arcsec2 = 40.0;
    instrument.saturation_e = f64::INFINITY;
    // A hole so wide that it passes everything.
    instrument.fibre_arcsec = 100.0;
    instrument.throughput = 1.0;
    let mut star = target();
    star.magnitude = 0.0;
    star.exposure = ExposureRule::FixedSeconds(10.0);
    let exposed = Photometer::new(&survey, &star).best().unwrap();
    let photons = exposed.snr.powi(2) * survey.instrument.spectral_pixels;
    let per_second_nm = photons / 10.0 / 100.0;
    assert!((3e6..3e7).contains(&per_second_nm), "{per_second_nm}");
}

#[test]
fn seeing_and_hole() {
    // A hole as wide as the image's full width at half maximum passes half of a Gaussian.
    assert!((fibre_coupling(1.7, 1.7) - 0.5).abs() < 1e-12);
    assert!((fibre_coupling(3.4, 1.7) - 15.0 / 16.0).abs() < 1e-12);
    // At the reference seeing in the zenith the throughput is the configured one: the flux ratio of
    // two seeings is that of what the hole passes.
    let mut survey = survey();
    survey.instrument.read_noise_e = 0.0;
    let mut star = target();
    star.exposure = ExposureRule::FixedSeconds(100.0);
    let photometer = Photometer::new(&survey, &star);
    let signal = |seeing: f64| {
        photometer
            .expose(&conditions(1.0, seeing, 40.0))
            .unwrap()
            .snr
            .powi(2)
    };
    let ratio = fibre_coupling(2.0, 3.0) / fibre_coupling(2.0, 1.5);
    assert!((signal(3.0) / signal(1.5) / ratio - 1.0).abs() < 1e-9);
    // Airmass 2 widens the image by 2^0.6 and dims it by k magnitudes.
    let widened = fibre_coupling(2.0, 1.5 * 2f64.powf(0.6)) / fibre_coupling(2.0, 1.5);
    let dimmed = 10f64.powf(-0.4 * 0.05);
    let at_two = photometer
        .expose(&conditions(2.0, 1.5, 40.0))
        .unwrap()
        .snr
        .powi(2);
    assert!((at_two / signal(1.5) / (widened * dimmed) - 1.0).abs() < 1e-9);
}

#[test]
fn refuses_what_cannot_be_exposed_on() {
    let survey = survey();
    let with = |magnitude: f64, rule: ExposureRule, c: Conditions| {
        let mut star = target();
        star.magnitude = magnitude;
        star.exposure = rule;
        Photometer::new(&survey, &star).expose(&c)
    };
    let good = conditions(1.2, 1.5, 19.5);
    let rule = ExposureRule::SignalToNoise(100.0);
    assert!(matches!(
        with(-9.0, rule, good),
        Err(CannotExpose::Saturates { .. })
    ));
    assert!(matches!(
        with(18.0, rule, good),
        Err(CannotExpose::TooLong { .. })
    ));
    assert!(matches!(
        with(200.0, rule, good),
        Err(CannotExpose::TooLong { .. })
    ));
    for bad in [f64::NAN, f64::INFINITY, 0.0] {
        let refused = with(8.0, rule, conditions(bad, 1.5, 19.5));
        assert!(matches!(refused, Err(CannotExpose::NoConditions { .. })));
    }
    let mut without = survey.clone();
    without.instrument.velocity.quality_factor.clear();
    assert!(matches!(
        Photometer::new(&without, &target()).expose(&good),
        Err(CannotExpose::NoQualityFactor { .. })
    ));
}

#[test]
fn quality_factor_between_and_beyond_the_table() {
    let table = [(3000.0, 16_000.0), (4000.0, 10_000.0)];
    for (temperature, factor) in [(2500.0, 16_000.0), (3500.0, 13_000.0), (6000.0, 10_000.0)] {
        assert_eq!(quality_factor(&table, temperature), Some(factor));
    }
    assert_eq!(quality_factor(&[], 3500.0), None);
}
