//! What is taken where a key is left out, each with its reason.

/// No refraction correction is better than a wrong one by much: a standard air at the site's height
/// stands in for a missing pressure, so that only the temperature is a plain number.
pub const TEMPERATURE_C: f64 = 10.0;
/// Dry enough that optical refraction does not notice, as on most nights that are open.
pub const RELATIVE_HUMIDITY: f64 = 0.4;
/// Altitude limits stop here where the mount names none: the zenith itself.
pub const MAX_ALTITUDE_DEG: f64 = 90.0;
/// An alt-azimuth mount must turn ever faster near the zenith; two degrees suit most small ones.
pub const ZENITH_HOLE_DEG: f64 = 2.0;
/// Moonlight scattered within some twenty degrees of the moon swamps a fibre's sky.
pub const MIN_MOON_SEPARATION_DEG: f64 = 20.0;
/// Never reached in darkness; guards against twilight plans that look towards the glow.
pub const MIN_SUN_SEPARATION_DEG: f64 = 40.0;
/// Nautical dusk: a star of ninth magnitude stands out of the red sky by then.
pub const DARKNESS_SUN_ALTITUDE_DEG: f64 = -12.0;
/// Half of the worth from cadence, half from the orbit: neither can starve the other.
pub const COVERAGE_SHARE: f64 = 0.5;
/// A star about to set for the season is worth up to half as much again.
pub const SEASON_BOOST: f64 = 0.5;
/// A programme with none of its share weighs up to twice as much.
pub const SHARE_PULL: f64 = 1.0;
/// A second visit in one night tells less of an orbit of many days than the first.
pub const REPEAT_WORTH: f64 = 0.6;
/// Moves a stellar line across several resolution elements of a precise spectrograph (3 km/s each at
/// a resolving power of 100,000), so that the lines of the air fall elsewhere in it.
pub const BARYCENTRIC_SPREAD_KM_S: f64 = 20.0;
/// Long enough to prove a plan, short enough to wait for.
pub const BUDGET_MS: u64 = 800;
/// Any number does; a fixed one makes two runs agree.
pub const SEED: u64 = 1;
/// Programmes count alike unless told.
pub const WEIGHT: f64 = 1.0;
/// Shortest period sought without a candidate: below it one visit a night cannot follow the orbit.
pub const MIN_PERIOD_D: f64 = 1.2;
/// Longest period sought without a candidate: about one season of a star.
pub const MAX_PERIOD_D: f64 = 100.0;
/// One visit every third night follows orbits of a week and more.
pub const EVERY_NIGHTS: f64 = 3.0;
/// One visit a night.
pub const VISITS_PER_NIGHT: u32 = 1;
/// Two visits within the hour hardly tell more than one of twice the length.
pub const SEPARATION_MIN: f64 = 60.0;
/// A quarter of an hour, whatever the star: a list of bare positions can be planned at once.
pub const EXPOSURE_S: f64 = 900.0;
/// An M3 to M4 dwarf, the middle of what surveys of cool stars hold.
pub const TEMPERATURE_K: f64 = 3300.0;
/// Quiet M dwarfs show about this much.
pub const JITTER_M_S: f64 = 1.5;
/// Twice what a visit that is due is worth: a transit that is missed may not come again for long.
pub const WINDOW_WORTH: f64 = 2.0;
/// A sample every half minute is what most stations give, so three missed are noticed.
pub const STALE_AFTER_S: f64 = 120.0;
/// Ten good minutes before the night opens: two or three swings of a passing cloud.
pub const OPENING_DWELL_S: f64 = 600.0;
/// The same before a hold ends.
pub const RULE_DWELL_S: f64 = 600.0;
/// Loopback only: nobody else reaches the daemon unless told.
pub const LISTEN: &str = "127.0.0.1:7117";
/// Where the token is looked for when no file is named.
pub const TOKEN_ENV: &str = "NIGHTWRIGHT_TOKEN";
/// The record, under the working directory.
pub const LEDGER: &str = "var/ledger.sqlite";
/// Night reports, under the working directory.
pub const REPORTS: &str = "var/reports";
/// The published queue, under the working directory.
pub const QUEUE: &str = "var/queue";
/// A visit that is this late has lost its slot.
pub const LEASE_MARGIN_S: f64 = 300.0;
/// How often the weather is asked for.
pub const POLL_S: f64 = 30.0;
/// A feed that takes longer is as good as none.
pub const FEED_TIMEOUT_S: f64 = 10.0;
/// A program that was told to stop gets so long before it is killed: time to close a shutter.
pub const PUSH_GRACE_S: f64 = 20.0;
/// Beyond the planned end of a visit, its program may run on for so long.
pub const PUSH_MARGIN_S: f64 = 300.0;

/// Quality factor by effective temperature for the 810–1090 nm band at a resolving power near
/// 70,000: an invented but plausible instrument, of the order (5,000 to 20,000) that the literature
/// gives for the red and near-infrared bands of slowly turning M dwarfs, and falling towards hotter
/// stars whose lines there are few. From memory, no table was copied.
pub const QUALITY_FACTOR: &[(f64, f64)] = &[
    (2500.0, 16_000.0),
    (2800.0, 15_000.0),
    (3100.0, 13_000.0),
    (3400.0, 11_000.0),
    (3700.0, 9_500.0),
    (4000.0, 8_500.0),
    (4800.0, 7_000.0),
    (5800.0, 5_500.0),
];
