//! How much air a star is seen through, relative to the zenith.

use crate::units::{Angle, bracketed_root};

/// A published model of relative airmass.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Default)]
pub enum AirmassModel {
    /// sec z of a plane-parallel atmosphere, of the apparent altitude. Good to 1 % up to z = 75°.
    PlaneParallel,
    /// Young & Irvine 1967, AJ 72, 945: sec z (1 − 0.0012 tan² z), of the true altitude. Below
    /// an altitude of 4°, where the formula turns over, its value there is kept.
    YoungIrvine1967,
    /// Hardie 1962, in Hiltner (ed.), Astronomical Techniques, p. 178: a cubic in sec z − 1, of
    /// the apparent altitude. Below 5°, where it turns over, its value there is kept.
    Hardie1962,
    /// Rozenberg 1966, Twilight, p. 160, of the apparent altitude; 40 at the horizon.
    Rozenberg1966,
    /// Kasten & Young 1989, Appl. Opt. 28, 4735, of the apparent altitude; 38 at the horizon.
    KastenYoung1989,
    /// Young 1994, Appl. Opt. 33, 1108, of the true altitude; 31.7 at a true altitude of 0°.
    /// The default: it takes the altitude without refraction as it is, holds down to the horizon
    /// (within 0.0037) and costs one division.
    #[default]
    Young1994,
    /// Pickering 2002, DIO 12, 1, 20, of the apparent altitude; 38.7 at the horizon.
    Pickering2002,
}

/// Which altitude a model asks for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum AltitudeKind {
    /// Without refraction.
    True,
    /// As seen, with refraction.
    Apparent,
}

impl AirmassModel {
    /// Which altitude [`AirmassModel::airmass`] takes.
    pub fn altitude_kind(self) -> AltitudeKind {
        match self {
            AirmassModel::YoungIrvine1967 | AirmassModel::Young1994 => AltitudeKind::True,
            AirmassModel::PlaneParallel
            | AirmassModel::Hardie1962
            | AirmassModel::Rozenberg1966
            | AirmassModel::KastenYoung1989
            | AirmassModel::Pickering2002 => AltitudeKind::Apparent,
        }
    }

    /// Airmass at an altitude of the kind that the model takes; infinite below 0°, so that any
    /// limit on it refuses.
    pub fn airmass(self, altitude: Angle) -> f64 {
        let sine = altitude.rad().sin();
        if altitude.rad() < 0.0 {
            return f64::INFINITY;
        }
        match self {
            AirmassModel::PlaneParallel => 1.0 / sine,
            AirmassModel::YoungIrvine1967 => young_irvine_1967(altitude),
            AirmassModel::Hardie1962 => hardie_1962(altitude),
            AirmassModel::Rozenberg1966 => 1.0 / (sine + 0.025 * (-11.0 * sine).exp()),
            AirmassModel::KastenYoung1989 => {
                1.0 / (sine + 0.505_72 * (altitude.deg() + 6.079_95).powf(-1.6364))
            }
            AirmassModel::Young1994 => young_1994(sine),
            AirmassModel::Pickering2002 => {
                let h = altitude.deg();
                let raised = h + 244.0 / (165.0 + 47.0 * h.powf(1.1));
                1.0 / raised.to_radians().sin()
            }
        }
    }
}

/// Lowest altitude of the kind that a model takes at which its airmass does not exceed a limit; the
/// zenith where the limit is below one.
pub fn altitude_of_airmass(model: AirmassModel, limit: f64) -> Angle {
    let excess = |rad: f64| {
        let airmass = model.airmass(Angle::from_rad(rad));
        // A large finite number stands for the plane-parallel model's pole at the horizon.
        airmass.min(1e9) - limit
    };
    let zenith = std::f64::consts::FRAC_PI_2;
    if excess(0.0) <= 0.0 {
        return Angle::ZERO;
    }
    match bracketed_root(excess, 0.0, zenith, 1e-9) {
        Ok(rad) => Angle::from_rad(rad),
        Err(_) => Angle::from_rad(zenith),
    }
}

/// Young 1994 of the sine of the true altitude, which must not be negative.
#[inline(always)]
pub(crate) fn young_1994(sine: f64) -> f64 {
    let numerator = (1.002_432 * sine + 0.148_386) * sine + 0.009_646_7;
    let denominator = ((sine + 0.149_864) * sine + 0.010_296_3) * sine + 0.000_303_978;
    numerator / denominator
}

fn young_irvine_1967(altitude: Angle) -> f64 {
    let secant = 1.0 / altitude.rad().max(Angle::from_deg(4.0).rad()).sin();
    secant * (1.0 - 0.0012 * (secant * secant - 1.0))
}

fn hardie_1962(altitude: Angle) -> f64 {
    let beyond = 1.0 / altitude.rad().max(Angle::from_deg(5.0).rad()).sin() - 1.0;
    let correction = (0.000_808_3 * beyond + 0.002_875) * beyond + 0.001_816_7;
    1.0 + beyond - correction * beyond
}

#[cfg(test)]
mod tests {
    use super::*;

    const ALL: [AirmassModel; 7] = [
        AirmassModel::PlaneParallel,
        AirmassModel::YoungIrvine1967,
        AirmassModel::Hardie1962,
        AirmassModel::Rozenberg1966,
        AirmassModel::KastenYoung1989,
        AirmassModel::Young1994,
        AirmassModel::Pickering2002,
    ];

    /// Bemporad's table (Mitt. Grossh. Sternwarte Heidelberg 4, 1904) by apparent zenith distance,
    /// as reprinted in Allen's Astrophysical Quantities; from memory.
    const BEMPORAD: [(f64, f64); 8] = [
        (0.0, 1.000),
        (60.0, 1.995),
        (70.0, 2.904),
        (75.0, 3.816),
        (80.0, 5.60),
        (85.0, 10.39),
        (87.0, 15.36),
        (88.0, 19.79),
    ];

    #[test]
    fn models_agree_with_the_classical_table() {
        // To 0.8 % where the table is sound for all; the newer models differ from it near the
        // horizon by what they improve upon (up to 3 % at 88°).
        let check = |model: AirmassModel, to_z_deg: f64, tolerance: f64| {
            for (z_deg, expected) in BEMPORAD.into_iter().filter(|row| row.0 <= to_z_deg) {
                let found = model.airmass(Angle::from_deg(90.0 - z_deg));
                assert!(
                    (found / expected - 1.0).abs() < tolerance,
                    "{model:?} {z_deg}: {found}"
                );
            }
        };
        check(AirmassModel::PlaneParallel, 70.0, 0.008);
        check(AirmassModel::Hardie1962, 80.0, 0.01);
        check(AirmassModel::YoungIrvine1967, 80.0, 0.012);
        check(AirmassModel::Rozenberg1966, 80.0, 0.012);
        check(AirmassModel::KastenYoung1989, 88.0, 0.03);
        check(AirmassModel::Pickering2002, 88.0, 0.03);
    }

    #[test]
    fn limit_on_airmass_is_a_limit_on_altitude() {
        for model in ALL {
            for limit in [1.2, 2.0, 3.5] {
                let altitude = altitude_of_airmass(model, limit);
                assert!((model.airmass(altitude) - limit).abs() < 1e-6, "{model:?}");
            }
            assert!(altitude_of_airmass(model, 0.9).deg() > 89.9);
            assert!(altitude_of_airmass(model, f64::INFINITY) == Angle::ZERO);
        }
    }

    #[test]
    fn horizon_values_are_the_published_ones() {
        // The abstracts: about 38 (Kasten & Young), 31.7 at the true horizon (Young 1994,
        // from memory), 40 (Rozenberg), 38.75 (Pickering: csc of 244'/165).
        let check = |model: AirmassModel, expected: f64, tolerance: f64| {
            let found = model.airmass(Angle::ZERO);
            assert!((found - expected).abs() < tolerance, "{model:?} {found}");
        };
        check(AirmassModel::KastenYoung1989, 38.0, 0.15);
        check(AirmassModel::Young1994, 31.7, 0.1);
        check(AirmassModel::Rozenberg1966, 40.0, 0.01);
        check(AirmassModel::Pickering2002, 38.75, 0.01);
    }

    #[test]
    fn one_at_the_zenith_rising_downwards_infinite_below() {
        for model in ALL {
            let mut last = 0.0;
            for tenth in (1..=900).rev() {
                let found = model.airmass(Angle::from_deg(f64::from(tenth) / 10.0));
                assert!(found >= last, "{model:?} {tenth}");
                last = found;
            }
            assert!(
                (model.airmass(Angle::from_deg(90.0)) - 1.0).abs() < 4e-4,
                "{model:?}"
            );
            assert_eq!(model.airmass(Angle::from_deg(-0.001)), f64::INFINITY);
        }
    }
}
