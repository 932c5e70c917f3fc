//! Where the telescope stands.

use crate::units::Angle;

/// A place on the Earth (WGS 84) with its typical air.
#[derive(Clone, Debug, PartialEq)]
pub struct Site {
    /// Name for people.
    pub name: String,
    /// Geodetic latitude, north positive.
    pub latitude: Angle,
    /// Longitude, east positive, −180° to 180°.
    pub longitude: Angle,
    /// Height above the ellipsoid in metres.
    pub height_m: f64,
    /// Typical night-time pressure in hectopascal; zero stands for no air (no refraction).
    pub pressure_hpa: f64,
    /// Typical night-time temperature in degrees Celsius.
    pub temperature_c: f64,
    /// Typical relative humidity, 0 to 1.
    pub relative_humidity: f64,
    /// Lowest free altitude by azimuth.
    pub horizon: HorizonProfile,
}

/// The lowest free altitude around the horizon: straight lines between the points given.
#[derive(Clone, Debug, PartialEq, Default)]
pub struct HorizonProfile {
    points_deg: Vec<(f64, f64)>,
}

impl HorizonProfile {
    /// From (azimuth, altitude) pairs in degrees, azimuth 0 ≤ a < 360 from north through east.
    /// No point at all is a flat horizon at 0°.
    pub fn from_points_deg(mut points_deg: Vec<(f64, f64)>) -> Self {
        points_deg.sort_by(|a, b| a.0.total_cmp(&b.0));
        HorizonProfile { points_deg }
    }

    /// The points in order of azimuth, degrees.
    pub fn points_deg(&self) -> &[(f64, f64)] {
        &self.points_deg
    }

    /// Lowest free altitude in degrees at an azimuth in degrees (any turn).
    pub fn altitude_deg(&self, azimuth_deg: f64) -> f64 {
        let azimuth = azimuth_deg.rem_euclid(360.0);
        let (Some(first), Some(last)) = (self.points_deg.first(), self.points_deg.last()) else {
            return 0.0;
        };
        let after = self.points_deg.partition_point(|p| p.0 <= azimuth);
        // Past the last point the line runs on through north to the first.
        let (before, next) = match after {
            0 => ((last.0 - 360.0, last.1), *first),
            n if n == self.points_deg.len() => (*last, (first.0 + 360.0, first.1)),
            n => (self.points_deg[n - 1], self.points_deg[n]),
        };
        let width = next.0 - before.0;
        if width <= 0.0 {
            return before.1;
        }
        before.1 + (next.1 - before.1) * (azimuth - before.0) / width
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn horizon_runs_through_north() {
        let horizon =
            HorizonProfile::from_points_deg(vec![(350.0, 20.0), (10.0, 10.0), (180.0, 0.0)]);
        for (azimuth, altitude) in [
            (350.0, 20.0),
            (0.0, 15.0),
            (360.0, 15.0),
            (5.0, 12.5),
            (180.0, 0.0),
        ] {
            assert!(
                (horizon.altitude_deg(azimuth) - altitude).abs() < 1e-9,
                "{azimuth}"
            );
        }
        assert_eq!(HorizonProfile::default().altitude_deg(77.0), 0.0);
    }
}
