//! How long the telescope takes from one pointing to the next.

use crate::catalogue::{Mount, Telescope};

/// Where the telescope points, in both frames that mounts turn in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pointing {
    /// Altitude, degrees.
    pub altitude_deg: f64,
    /// Azimuth from north through east, degrees.
    pub azimuth_deg: f64,
    /// Hour angle, west positive, −180 to 180 degrees.
    pub hour_angle_deg: f64,
    /// Declination of date, degrees.
    pub declination_deg: f64,
}

/// Seconds from leaving one pointing until the first exposure of the next may begin: the slower
/// axis, a change of side where the mount has one, settling and acquisition.
///
/// Each axis runs a trapezoid in speed (common practice, no source). An alt-azimuth mount is taken
/// to turn the short way round: limits of its cable wrap are not modelled.
pub fn setup_s(telescope: &Telescope, from: &Pointing, to: &Pointing) -> f64 {
    let (first_deg, second_deg, flip_s) = match telescope.mount {
        Mount::AltAzimuth { .. } => (
            shortest_turn_deg(from.azimuth_deg, to.azimuth_deg),
            (from.altitude_deg - to.altitude_deg).abs(),
            0.0,
        ),
        Mount::Equatorial { flip_s, .. } => {
            let changes_side = (from.hour_angle_deg < 0.0) != (to.hour_angle_deg < 0.0);
            (
                (from.hour_angle_deg - to.hour_angle_deg).abs(),
                (from.declination_deg - to.declination_deg).abs(),
                if changes_side { flip_s } else { 0.0 },
            )
        }
    };
    let rates = telescope.slew_rate_deg_s;
    let accelerations = telescope.acceleration_deg_s2;
    let slew_s = axis_s(first_deg, rates.0, accelerations.0).max(axis_s(
        second_deg,
        rates.1,
        accelerations.1,
    ));
    slew_s + flip_s + telescope.settle_s + telescope.acquisition_s
}

/// Seconds to start from a standstill, or after a calibration during which the telescope could
/// already slew: settling and acquisition.
pub fn setup_without_slew_s(telescope: &Telescope) -> f64 {
    telescope.settle_s + telescope.acquisition_s
}

fn shortest_turn_deg(from_deg: f64, to_deg: f64) -> f64 {
    let turn = (to_deg - from_deg).rem_euclid(360.0);
    turn.min(360.0 - turn)
}

/// Time for one axis to turn through an angle from rest to rest.
fn axis_s(angle_deg: f64, rate_deg_s: f64, acceleration_deg_s2: f64) -> f64 {
    if angle_deg <= 0.0 {
        return 0.0;
    }
    // Below this angle full speed is never reached; an infinite acceleration makes it zero.
    let ramp_deg = rate_deg_s * rate_deg_s / acceleration_deg_s2;
    if angle_deg < ramp_deg {
        2.0 * (angle_deg / acceleration_deg_s2).sqrt()
    } else {
        angle_deg / rate_deg_s + rate_deg_s / acceleration_deg_s2
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::Angle;

    fn telescope(mount: Mount) -> Telescope {
        Telescope {
            aperture_m: 0.8,
            obstruction: 0.1,
            mount,
            slew_rate_deg_s: (4.0, 2.0),
            acceleration_deg_s2: (2.0, f64::INFINITY),
            settle_s: 5.0,
            acquisition_s: 60.0,
            min_altitude: Angle::from_deg(25.0),
            max_altitude: Angle::from_deg(88.0),
            min_moon_separation: Angle::from_deg(20.0),
            min_sun_separation: Angle::from_deg(40.0),
            wind: None,
        }
    }

    fn pointing(azimuth_deg: f64, altitude_deg: f64, hour_angle_deg: f64) -> Pointing {
        Pointing {
            altitude_deg,
            azimuth_deg,
            hour_angle_deg,
            declination_deg: 10.0,
        }
    }

    #[test]
    fn the_slower_axis_decides_and_azimuth_turns_the_short_way() {
        let telescope = telescope(Mount::AltAzimuth {
            zenith_hole: Angle::from_deg(2.0),
        });
        let check = |from: Pointing, to: Pointing, wanted_s: f64| {
            let found = setup_s(&telescope, &from, &to) - 65.0;
            assert!((found - wanted_s).abs() < 1e-9, "{found} for {wanted_s}");
        };
        // 20° through north at 4°/s with a ramp of 2 s.
        check(pointing(350.0, 40.0, 0.0), pointing(10.0, 40.0, 0.0), 7.0);
        // 40° of altitude at 2°/s outlast 10° of azimuth.
        check(pointing(0.0, 30.0, 0.0), pointing(10.0, 70.0, 0.0), 20.0);
        // 2° never reach full speed: 2·√(2/2).
        check(pointing(0.0, 30.0, 0.0), pointing(2.0, 30.0, 0.0), 2.0);
        check(pointing(0.0, 30.0, 0.0), pointing(0.0, 30.0, 0.0), 0.0);
    }

    #[test]
    fn an_equatorial_mount_pays_for_its_change_of_side() {
        let telescope = telescope(Mount::Equatorial {
            min_hour_angle: Angle::from_deg(-80.0),
            max_hour_angle: Angle::from_deg(80.0),
            flip_s: 90.0,
        });
        let east = pointing(90.0, 40.0, -10.0);
        let west = pointing(270.0, 40.0, 10.0);
        assert!((setup_s(&telescope, &east, &west) - (7.0 + 90.0 + 65.0)).abs() < 1e-9);
        assert!((setup_s(&telescope, &east, &east) - 65.0).abs() < 1e-9);
    }
}
