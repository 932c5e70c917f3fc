//! Floor 1: what the weather is and which of it lets the night go on, as plain values.

use std::collections::BTreeMap;

use crate::time::Utc;
use crate::units::Angle;

/// A quantity that a weather feed can give. Units are in the docs of each.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Quantity {
    /// Rain rate, mm/h.
    RainMmH,
    /// Relative humidity, per cent.
    HumidityPercent,
    /// Air temperature minus dew point, kelvin (small is bad).
    DewPointSpreadK,
    /// Mean wind speed, m/s.
    WindMS,
    /// Gust speed, m/s.
    GustMS,
    /// Share of the sky under cloud, per cent.
    CloudPercent,
    /// Sky temperature minus air temperature, kelvin (near zero is cloud, so large is bad).
    SkyMinusAirK,
    /// Sky brightness, mag/arcsec² (small is bad).
    SkyBrightnessMag,
    /// Seeing at zenith, arcseconds.
    SeeingArcsec,
}

impl Quantity {
    /// The label in settings, files and messages.
    pub const fn label(self) -> &'static str {
        match self {
            Quantity::RainMmH => "rain_mm_h",
            Quantity::HumidityPercent => "humidity_percent",
            Quantity::DewPointSpreadK => "dew_point_spread_k",
            Quantity::WindMS => "wind_m_s",
            Quantity::GustMS => "gust_m_s",
            Quantity::CloudPercent => "cloud_percent",
            Quantity::SkyMinusAirK => "sky_minus_air_k",
            Quantity::SkyBrightnessMag => "sky_brightness_mag",
            Quantity::SeeingArcsec => "seeing_arcsec",
        }
    }
}

/// One reading of the weather.
#[derive(Clone, Debug, PartialEq)]
pub struct WeatherSample {
    /// When it was measured, by the feed's own word.
    pub at: Utc,
    /// What it gave; finite numbers only.
    pub values: BTreeMap<Quantity, f64>,
    /// Direction that the wind comes from, azimuth.
    pub wind_from: Option<Angle>,
    /// The feed's own plain verdict, where it has one.
    pub safe: Option<bool>,
}

/// When a quantity stops the night and when it lets it go on again.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct WeatherRule {
    /// The quantity.
    pub quantity: Quantity,
    /// Bad from here on.
    pub hold_at: f64,
    /// Good again from here on, after `dwell`; between the two, what was, stays.
    pub release_at: f64,
    /// Good for so long before the hold ends, seconds.
    pub dwell_s: f64,
    /// Large is bad (else small is bad).
    pub high_is_bad: bool,
}

/// All rules of the weather.
#[derive(Clone, Debug, PartialEq)]
pub struct WeatherRules {
    /// The rules; a quantity that has a rule and is missing from a sample counts as bad.
    pub rules: Vec<WeatherRule>,
    /// A sample older than this is no sample, seconds.
    pub stale_after_s: f64,
    /// The night starts held until samples have been good for so long, seconds.
    pub opening_dwell_s: f64,
    /// The feed must give a plain verdict, and it must be "safe".
    pub require_safe_flag: bool,
}

/// The site's weather by month, for rehearsals and seasons.
#[derive(Clone, Debug, PartialEq)]
pub struct Climate {
    /// Share of the night hours that is clear, January to December, 0 to 1.
    pub clear_fraction: [f64; 12],
    /// Mean length of a clear spell in hours.
    pub clear_spell_h: f64,
    /// Odds that a whole night is lost whatever the hours say, 0 to 1.
    pub night_lost: f64,
    /// Median of the zenith seeing, arcseconds (log-normal).
    pub seeing_median_arcsec: f64,
    /// Spread of its natural logarithm.
    pub seeing_sigma_ln: f64,
    /// Instrument faults per night hour.
    pub faults_per_hour: f64,
    /// Mean time to mend one, hours (exponential).
    pub repair_h: f64,
}
