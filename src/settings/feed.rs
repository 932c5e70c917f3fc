//! Where weather comes from: a live feed, or a recorded file.

use super::defaults;
use super::range::Range;
use super::section::Section;
use crate::weather::Quantity;

/// A live weather feed.
#[derive(Clone, Debug, PartialEq)]
pub struct Feed {
    /// Time between two requests, seconds.
    pub poll_s: f64,
    /// Longest time that one request may take in all, seconds.
    pub timeout_s: f64,
    /// What is asked.
    pub source: FeedSource,
}

/// What a feed is.
#[derive(Clone, Debug, PartialEq)]
pub enum FeedSource {
    /// Any HTTP endpoint that answers with a JSON document.
    Json(JsonFeed),
    /// Devices behind the open ASCOM Alpaca standard over HTTP.
    Alpaca(AlpacaFeed),
}

/// A JSON document with each quantity at a JSON pointer (RFC 6901).
#[derive(Clone, Debug, PartialEq)]
pub struct JsonFeed {
    /// Address of the document.
    pub url: String,
    /// Pointer to the instant of the measurement.
    pub time: String,
    /// How that instant is written.
    pub time_format: TimeFormat,
    /// Pointer to the feed's own verdict, `true` for safe.
    pub safe: Option<String>,
    /// The quantities.
    pub values: Vec<MappedValue>,
}

/// Devices of an Alpaca server.
#[derive(Clone, Debug, PartialEq)]
pub struct AlpacaFeed {
    /// `http://host:port`.
    pub address: String,
    /// Number of its ObservingConditions device, if any.
    pub observing_conditions: Option<u32>,
    /// Number of its SafetyMonitor device, if any.
    pub safety_monitor: Option<u32>,
}

/// A recorded weather file: CSV with a header.
#[derive(Clone, Debug, PartialEq)]
pub struct RecordedWeather {
    /// Column of the instant of the measurement.
    pub time_column: String,
    /// How that instant is written.
    pub time_format: TimeFormat,
    /// Hours by which the written time runs ahead of UTC (0 where it is UTC or says its own offset).
    pub utc_offset_h: f64,
    /// Column of a plain verdict, if any.
    pub safe_column: Option<String>,
    /// The other columns.
    pub values: Vec<MappedValue>,
}

/// How an instant is written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum TimeFormat {
    /// RFC 3339.
    Rfc3339,
    /// Seconds since 1970-01-01 UTC.
    UnixSeconds,
    /// Milliseconds since 1970-01-01 UTC.
    UnixMilliseconds,
    /// A strftime pattern such as `%Y-%m-%d %H:%M`.
    Pattern(String),
}

/// A quantity with the place where it is found and its unit there.
#[derive(Clone, Debug, PartialEq)]
pub struct MappedValue {
    /// What it is.
    pub kind: MappedKind,
    /// JSON pointer or column name.
    pub from: String,
    /// Standard unit = `factor` × value + `offset`.
    pub factor: f64,
    /// See `factor`.
    pub offset: f64,
}

impl MappedValue {
    /// The value in the standard unit of its kind.
    pub fn to_standard(&self, value: f64) -> f64 {
        self.factor * value + self.offset
    }
}

/// What a feed can give: the quantities of rules, and what they are made from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MappedKind {
    /// A quantity as the rules know it.
    Quantity(Quantity),
    /// Air temperature, °C: with the dew point it makes the spread, with the sky's the difference.
    AirTemperature,
    /// Dew point, °C.
    DewPoint,
    /// Sky temperature, °C.
    SkyTemperature,
    /// Azimuth that the wind comes from, degrees.
    WindFrom,
}

/// The words for the quantities that rules can name.
pub(super) const QUANTITIES: &[(&str, Quantity)] = &[
    ("rain_mm_h", Quantity::RainMmH),
    ("humidity_percent", Quantity::HumidityPercent),
    ("dew_point_spread_k", Quantity::DewPointSpreadK),
    ("wind_m_s", Quantity::WindMS),
    ("gust_m_s", Quantity::GustMS),
    ("cloud_percent", Quantity::CloudPercent),
    ("sky_minus_air_k", Quantity::SkyMinusAirK),
    ("sky_brightness_mag", Quantity::SkyBrightnessMag),
    ("seeing_arcsec", Quantity::SeeingArcsec),
];

/// The words for what a feed or a file can map.
const KINDS: &[(&str, MappedKind)] = &[
    ("rain", MappedKind::Quantity(Quantity::RainMmH)),
    ("humidity", MappedKind::Quantity(Quantity::HumidityPercent)),
    (
        "dew_point_spread",
        MappedKind::Quantity(Quantity::DewPointSpreadK),
    ),
    ("wind", MappedKind::Quantity(Quantity::WindMS)),
    ("gust", MappedKind::Quantity(Quantity::GustMS)),
    ("cloud", MappedKind::Quantity(Quantity::CloudPercent)),
    (
        "sky_minus_air",
        MappedKind::Quantity(Quantity::SkyMinusAirK),
    ),
    (
        "sky_brightness",
        MappedKind::Quantity(Quantity::SkyBrightnessMag),
    ),
    ("seeing", MappedKind::Quantity(Quantity::SeeingArcsec)),
    ("air_temperature", MappedKind::AirTemperature),
    ("dew_point", MappedKind::DewPoint),
    ("sky_temperature", MappedKind::SkyTemperature),
    ("wind_from", MappedKind::WindFrom),
];

type Units = &'static [(&'static str, (f64, f64))];

const PERCENT: Units = &[
    ("percent", (1.0, 0.0)),
    ("fraction", (100.0, 0.0)),
    ("okta", (12.5, 0.0)),
];
const SPEED: Units = &[
    ("m/s", (1.0, 0.0)),
    ("km/h", (1.0 / 3.6, 0.0)),
    // The international knot is 1852 m an hour, the mile 1609.344 m (both exact).
    ("kn", (1852.0 / 3600.0, 0.0)),
    ("mph", (1609.344 / 3600.0, 0.0)),
];
const DIFFERENCE: Units = &[
    ("K", (1.0, 0.0)),
    ("degC", (1.0, 0.0)),
    ("degF", (5.0 / 9.0, 0.0)),
];
const TEMPERATURE: Units = &[
    ("degC", (1.0, 0.0)),
    ("K", (1.0, -273.15)),
    ("degF", (5.0 / 9.0, -160.0 / 9.0)),
];
const RAIN: Units = &[("mm/h", (1.0, 0.0)), ("in/h", (25.4, 0.0))];
const SKY: Units = &[("mag/arcsec2", (1.0, 0.0))];
const SEEING: Units = &[("arcsec", (1.0, 0.0))];
const DIRECTION: Units = &[
    ("deg", (1.0, 0.0)),
    ("rad", (180.0 / std::f64::consts::PI, 0.0)),
];

const fn units_of(kind: MappedKind) -> Units {
    match kind {
        MappedKind::Quantity(quantity) => match quantity {
            Quantity::RainMmH => RAIN,
            Quantity::HumidityPercent | Quantity::CloudPercent => PERCENT,
            Quantity::DewPointSpreadK | Quantity::SkyMinusAirK => DIFFERENCE,
            Quantity::WindMS | Quantity::GustMS => SPEED,
            Quantity::SkyBrightnessMag => SKY,
            Quantity::SeeingArcsec => SEEING,
        },
        MappedKind::AirTemperature | MappedKind::DewPoint | MappedKind::SkyTemperature => {
            TEMPERATURE
        }
        MappedKind::WindFrom => DIRECTION,
    }
}

/// What a quantity can sensibly be.
pub(super) const fn range_of(quantity: Quantity) -> Range {
    match quantity {
        Quantity::RainMmH => Range::of(0.0, 500.0, "mm/h"),
        Quantity::HumidityPercent => Range::of(0.0, 100.0, "per cent"),
        Quantity::CloudPercent => Range::of(0.0, 100.0, "per cent"),
        Quantity::DewPointSpreadK => Range::of(-5.0, 100.0, "kelvin"),
        Quantity::WindMS | Quantity::GustMS => Range::of(0.0, 150.0, "m/s"),
        Quantity::SkyMinusAirK => Range::of(-120.0, 50.0, "kelvin"),
        Quantity::SkyBrightnessMag => Range::of(-30.0, 30.0, "mag/arcsec2"),
        Quantity::SeeingArcsec => Range::of(0.0, 60.0, "arcseconds"),
    }
}

pub(super) fn read_feed(root: &Section<'_>) -> Option<Feed> {
    let section = root.section("feed")?;
    let alpaca = section.need_choice("kind", &[("json", false), ("alpaca", true)])?;
    let feed = Feed {
        poll_s: section.number_or(
            "poll_s",
            defaults::POLL_S,
            Range::of(1.0, 3600.0, "seconds"),
        ),
        timeout_s: section.number_or(
            "timeout_s",
            defaults::FEED_TIMEOUT_S,
            Range::of(0.1, 600.0, "seconds"),
        ),
        source: if alpaca {
            FeedSource::Alpaca(alpaca_feed(&section))
        } else {
            FeedSource::Json(json_feed(&section))
        },
    };
    section.finish();
    Some(feed)
}

fn json_feed(section: &Section<'_>) -> JsonFeed {
    JsonFeed {
        url: need_url(section, "url"),
        time: need_pointer(section, "time"),
        time_format: time_format(section),
        safe: section.has("safe").then(|| need_pointer(section, "safe")),
        values: mapped_values(section, true),
    }
}

fn alpaca_feed(section: &Section<'_>) -> AlpacaFeed {
    let device = Range::of(0.0, 65_535.0, "(device number)");
    let feed = AlpacaFeed {
        address: need_url(section, "address"),
        observing_conditions: section
            .whole("observing_conditions", device)
            .map(|n| n as u32),
        safety_monitor: section.whole("safety_monitor", device).map(|n| n as u32),
    };
    if !section.has("observing_conditions") && !section.has("safety_monitor") {
        section.wrong(
            "observing_conditions",
            "must have observing_conditions or safety_monitor, a device number each",
        );
    }
    feed
}

pub(super) fn read_recorded(root: &Section<'_>) -> Option<RecordedWeather> {
    let section = root.section("recorded_weather")?;
    let recorded = RecordedWeather {
        time_column: section.need_text("time_column"),
        time_format: time_format(&section),
        utc_offset_h: section.number_or(
            "utc_offset_h",
            0.0,
            Range::of(-12.0, 14.0, "hours east of UTC"),
        ),
        safe_column: section.text("safe_column"),
        values: mapped_values(&section, false),
    };
    section.finish();
    Some(recorded)
}

fn time_format(section: &Section<'_>) -> TimeFormat {
    match section.text("time_format").as_deref() {
        None | Some("rfc3339") => TimeFormat::Rfc3339,
        Some("unix_s") => TimeFormat::UnixSeconds,
        Some("unix_ms") => TimeFormat::UnixMilliseconds,
        Some(pattern) => {
            let mut items = chrono::format::StrftimeItems::new(pattern);
            if !pattern.contains('%') || items.any(|i| i == chrono::format::Item::Error) {
                section.wrong(
                    "time_format",
                    format!(
                        "found \"{pattern}\", must be \"rfc3339\", \"unix_s\", \"unix_ms\" or a \
                         pattern like \"%Y-%m-%d %H:%M\""
                    ),
                );
            }
            TimeFormat::Pattern(pattern.to_owned())
        }
    }
}

fn mapped_values(section: &Section<'_>, pointers: bool) -> Vec<MappedValue> {
    let mut values: Vec<MappedValue> = Vec::new();
    for value in section.sections("value") {
        let kind = value.need_choice("quantity", KINDS);
        let from = if pointers {
            need_pointer(&value, "from")
        } else {
            value.need_text("from")
        };
        let units = kind.map_or(&[][..], units_of);
        let unit = match kind {
            Some(_) => value.need_choice("unit", units),
            None => value.text("unit").and(None),
        };
        if let (Some(kind), Some((factor, offset))) = (kind, unit) {
            if values.iter().any(|v| v.kind == kind) {
                value.wrong("quantity", "is mapped a second time, must be once");
            }
            values.push(MappedValue {
                kind,
                from,
                factor,
                offset,
            });
        }
        value.finish();
    }
    values
}

fn need_pointer(section: &Section<'_>, key: &'static str) -> String {
    let pointer = section.need_text(key);
    if !pointer.is_empty() && !pointer.starts_with('/') {
        section.wrong(
            key,
            format!("found \"{pointer}\", must be a JSON pointer like \"/wind/speed\""),
        );
    }
    pointer
}

/// An HTTP address that must be there.
pub(super) fn need_url(section: &Section<'_>, key: &'static str) -> String {
    let url = section.need_text(key);
    let rest = ["http://", "https://"]
        .iter()
        .find_map(|scheme| url.strip_prefix(scheme));
    let sound = rest.is_some_and(|r| {
        let host = r.split(['/', '?', '#']).next().unwrap_or("");
        !host.is_empty() && !host.contains(char::is_whitespace)
    });
    if !url.is_empty() && !sound {
        section.wrong(
            key,
            format!("found \"{url}\", must be an address like http://127.0.0.1:8080/weather.json"),
        );
    }
    url
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_turn_into_the_standard_ones() {
        let check = |kind: MappedKind, unit: &str, value: f64, standard: f64| {
            let (_, (factor, offset)) = units_of(kind).iter().find(|(u, _)| *u == unit).unwrap();
            let mapped = MappedValue {
                kind,
                from: String::new(),
                factor: *factor,
                offset: *offset,
            };
            assert!(
                (mapped.to_standard(value) - standard).abs() < 1e-9,
                "{unit}"
            );
        };
        // Fixed points of the scales and the definitions of knot, mile and inch.
        check(MappedKind::AirTemperature, "degF", 32.0, 0.0);
        check(MappedKind::AirTemperature, "degF", 212.0, 100.0);
        check(MappedKind::DewPoint, "K", 273.15, 0.0);
        check(MappedKind::Quantity(Quantity::WindMS), "kn", 3600.0, 1852.0);
        check(MappedKind::Quantity(Quantity::GustMS), "km/h", 36.0, 10.0);
        check(MappedKind::Quantity(Quantity::RainMmH), "in/h", 1.0, 25.4);
        check(
            MappedKind::Quantity(Quantity::CloudPercent),
            "okta",
            8.0,
            100.0,
        );
        check(
            MappedKind::Quantity(Quantity::DewPointSpreadK),
            "degF",
            9.0,
            5.0,
        );
        check(MappedKind::WindFrom, "rad", std::f64::consts::PI, 180.0);
    }
}
