//! What the night is run by: limits in time, each with its default and the reason for it.

use crate::catalogue::Survey;
use crate::time::SpanSet;
use crate::weather::WeatherRules;

/// Time beyond a visit's planned end before its lease runs out, seconds: a guide star lost and
/// found again, a slow read-out, a report sent twice over a bad link.
pub const LEASE_MARGIN_S: f64 = 300.0;
/// Most that one extension may add from now, and that all of them may add to the planned end.
pub const EXTENSION_LIMIT_S: f64 = 1800.0;
/// How late an entry's setup may begin before the rest is planned afresh, seconds: a star's place
/// and value change little in two minutes.
pub const SLIP_TOLERANCE_S: f64 = 120.0;
/// How far a visit's end may lie from its planned end before the rest is planned afresh, seconds.
pub const REPLAN_AFTER_S: f64 = 120.0;
/// How long after darkness the last lease and the last lamps may take, seconds.
pub const CLOSING_LIMIT_S: f64 = 3600.0;
/// Difference between wall and monotonic clock that counts as a step, milliseconds: twice a leap
/// second that the system clock repeats.
pub const CLOCK_STEP_MS: i64 = 2000;
/// How far ahead of the wall clock a sample's time stamp may lie, seconds: two clocks that a time
/// service keeps differ by less.
pub const FUTURE_TOLERANCE_S: f64 = 60.0;
/// A weather sample is kept in the ledger at least so often, seconds.
pub const WEATHER_NOTE_EVERY_S: f64 = 600.0;
/// The rest of the night is planned afresh for wind or seeing at most so often, seconds: a visit
/// takes about as long.
pub const WEATHER_REPLAN_EVERY_S: f64 = 900.0;
/// Seeing better or worse by this factor wants other exposures: where the star is wider than the
/// fibre, they then take about twice or half as long.
pub const SEEING_REPLAN_RATIO: f64 = 1.5;
/// After a failed plan the next is asked for so much later, seconds.
pub const PLAN_RETRY_S: f64 = 60.0;
/// A ledger that could not be written is tried again so much later, seconds.
pub const LEDGER_RETRY_S: f64 = 5.0;
/// A subject that was refused or not found so often in a night is left alone for the rest of it.
pub const FAILED_STARTS_LIMIT: u32 = 2;

/// How visits reach the observatory.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum HandOut {
    /// The observatory claims them.
    Pull,
    /// The shell starts a command for each.
    Push,
}

/// All that decides how a night is run.
#[derive(Clone, Debug, PartialEq)]
pub struct NightRules {
    /// Weather that stops the night.
    pub weather: WeatherRules,
    /// Spans that are not ours, within any night.
    pub blocked: SpanSet,
    /// How visits are handed out.
    pub hand_out: HandOut,
    /// See [`LEASE_MARGIN_S`].
    pub lease_margin_s: f64,
    /// See [`EXTENSION_LIMIT_S`].
    pub extension_limit_s: f64,
    /// See [`SLIP_TOLERANCE_S`].
    pub slip_tolerance_s: f64,
    /// See [`REPLAN_AFTER_S`].
    pub replan_after_s: f64,
    /// See [`CLOSING_LIMIT_S`].
    pub closing_limit_s: f64,
    /// See [`CLOCK_STEP_MS`].
    pub clock_step_ms: i64,
    /// See [`FUTURE_TOLERANCE_S`].
    pub future_tolerance_s: f64,
    /// See [`WEATHER_NOTE_EVERY_S`].
    pub weather_note_every_s: f64,
    /// A stronger wind than this keeps the telescope from pointing towards it, m/s; `None`: none
    /// does.
    pub wind_avoided_above_m_s: Option<f64>,
    /// The zenith seeing that a plan takes where no feed tells it, arcseconds; `None`: not known.
    pub typical_seeing_arcsec: Option<f64>,
    /// See [`WEATHER_REPLAN_EVERY_S`].
    pub weather_replan_every_s: f64,
    /// See [`SEEING_REPLAN_RATIO`].
    pub seeing_replan_ratio: f64,
    /// See [`PLAN_RETRY_S`].
    pub plan_retry_s: f64,
    /// See [`LEDGER_RETRY_S`].
    pub ledger_retry_s: f64,
    /// See [`FAILED_STARTS_LIMIT`].
    pub failed_starts_limit: u32,
}

impl NightRules {
    /// These weather rules for the nights of a survey: its blocked spans, the wind that its telescope
    /// avoids, its typical seeing, and every other limit at its default.
    pub fn for_survey(weather: WeatherRules, survey: &Survey) -> Self {
        NightRules {
            blocked: survey.allocation.blocked.clone(),
            wind_avoided_above_m_s: survey.telescope.wind.as_ref().map(|wind| wind.above_m_s),
            typical_seeing_arcsec: Some(survey.planning.typical_seeing_arcsec),
            ..NightRules::new(weather)
        }
    }

    /// These weather rules and every other limit at its default.
    pub fn new(weather: WeatherRules) -> Self {
        NightRules {
            weather,
            blocked: SpanSet::default(),
            hand_out: HandOut::Pull,
            lease_margin_s: LEASE_MARGIN_S,
            extension_limit_s: EXTENSION_LIMIT_S,
            slip_tolerance_s: SLIP_TOLERANCE_S,
            replan_after_s: REPLAN_AFTER_S,
            closing_limit_s: CLOSING_LIMIT_S,
            clock_step_ms: CLOCK_STEP_MS,
            future_tolerance_s: FUTURE_TOLERANCE_S,
            weather_note_every_s: WEATHER_NOTE_EVERY_S,
            wind_avoided_above_m_s: None,
            typical_seeing_arcsec: None,
            weather_replan_every_s: WEATHER_REPLAN_EVERY_S,
            seeing_replan_ratio: SEEING_REPLAN_RATIO,
            plan_retry_s: PLAN_RETRY_S,
            ledger_retry_s: LEDGER_RETRY_S,
            failed_starts_limit: FAILED_STARTS_LIMIT,
        }
    }
}
