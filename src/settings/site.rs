//! `site.toml`: where the telescope stands.

use super::defaults;
use super::range::Range;
use super::section::Section;
use crate::ephemeris::{HorizonProfile, Site};
use crate::units::Angle;

/// What `site.toml` says.
pub(super) struct SitePart {
    pub(super) site: Site,
    pub(super) earth_rotation: Option<String>,
    pub(super) utc_offset_h: Option<f64>,
}

/// Highest place with a road, and a little.
const HEIGHT: Range = Range::of(-500.0, 6500.0, "metres");
const PRESSURE: Range = Range::of(0.0, 1100.0, "hectopascal (0 for no refraction)");

pub(super) fn read(root: &Section<'_>) -> Option<SitePart> {
    let Some(site) = root.section("site") else {
        root.wrong("site", "the section [site] is missing");
        return None;
    };
    let height_m = site.need_number("height_m", HEIGHT);
    let part = SitePart {
        site: Site {
            name: site.text_or("name", "the site"),
            latitude: Angle::from_deg(site.need_number(
                "latitude_deg",
                Range::of(-90.0, 90.0, "degrees, north positive"),
            )),
            longitude: Angle::from_deg(site.need_number(
                "longitude_deg",
                Range::of(-180.0, 180.0, "degrees, east positive"),
            )),
            height_m,
            pressure_hpa: site.number_or("pressure_hpa", standard_pressure_hpa(height_m), PRESSURE),
            temperature_c: site.number_or(
                "temperature_c",
                defaults::TEMPERATURE_C,
                Range::of(-90.0, 50.0, "degrees Celsius"),
            ),
            relative_humidity: site.number_or(
                "relative_humidity",
                defaults::RELATIVE_HUMIDITY,
                Range::of(0.0, 1.0, "(0.4 is 40 per cent)"),
            ),
            horizon: horizon(&site),
        },
        earth_rotation: site.text("earth_rotation"),
        utc_offset_h: site.number("utc_offset_h", Range::of(-12.0, 14.0, "hours east of UTC")),
    };
    site.finish();
    Some(part)
}

fn horizon(site: &Section<'_>) -> HorizonProfile {
    let points = site.number_pairs(
        "horizon",
        Range::below(0.0, 360.0, "degrees of azimuth"),
        Range::of(0.0, 90.0, "degrees of altitude"),
    );
    let mut azimuths: Vec<f64> = points.iter().map(|p| p.0).collect();
    azimuths.sort_by(f64::total_cmp);
    if let Some(twice) = azimuths.windows(2).find(|w| w[0] == w[1]) {
        let message = format!("found azimuth {} twice, must be once", twice[0]);
        site.wrong("horizon", message);
    }
    HorizonProfile::from_points_deg(points)
}

/// Pressure of the international standard atmosphere (ISO 2533) below 11 km.
fn standard_pressure_hpa(height_m: f64) -> f64 {
    1013.25 * (1.0 - 0.0065 * height_m / 288.15).powf(5.255_88)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn standard_air_thins_with_height() {
        // ISO 2533: 1013.25 hPa at 0 m, 794.95 hPa at 2000 m.
        assert!((standard_pressure_hpa(0.0) - 1013.25).abs() < 1e-9);
        assert!((standard_pressure_hpa(2000.0) - 794.95).abs() < 0.05);
    }
}
