//! An observatory that carries visits out with the habits of real ones.

use std::collections::BTreeMap;
use std::sync::Arc;

use rand_chacha::ChaCha8Rng;

use super::chance::{between, exponential, happens};
use crate::night::{Lease, VisitReport};
use crate::ports::{Observatory, ObservatoryFault};
use crate::record::{EntryKind, LossCause, Outcome, VisitId};
use crate::time::{MonotonicMs, Span};

use super::clock::SimClock;
use crate::ports::Clock;

/// How the observatory carries visits out. All odds are per visit, 0 to 1. The defaults are a
/// small robotic telescope in good order (common practice, no source).
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Habits {
    /// Mean time from being free to claiming, seconds.
    pub claim_delay_s: f64,
    /// Odds that the first exposure starts late.
    pub late_start_odds: f64,
    /// Mean of that lateness, seconds.
    pub late_start_s: f64,
    /// Odds that the visit takes longer than planned.
    pub overrun_odds: f64,
    /// Mean of the overrun, seconds.
    pub overrun_s: f64,
    /// Odds that it is stopped early.
    pub short_odds: f64,
    /// Odds that the star is not found.
    pub lost_odds: f64,
    /// Odds that the observatory refuses.
    pub refused_odds: f64,
    /// Odds that it is never reported.
    pub unreported_odds: f64,
    /// Mean time from the end to the report, seconds.
    pub report_delay_s: f64,
    /// Odds that the report comes much later, perhaps after the lease has run out.
    pub late_report_odds: f64,
    /// Mean of that delay, seconds.
    pub late_report_s: f64,
    /// Odds that a claim or a report is sent twice.
    pub duplicate_odds: f64,
    /// Outages of the weather feed per hour.
    pub feed_outages_per_hour: f64,
    /// Mean length of one, seconds.
    pub feed_outage_s: f64,
}

impl Default for Habits {
    fn default() -> Self {
        Habits {
            claim_delay_s: 1.0,
            late_start_odds: 0.05,
            late_start_s: 45.0,
            overrun_odds: 0.05,
            overrun_s: 90.0,
            short_odds: 0.01,
            lost_odds: 0.01,
            refused_odds: 0.005,
            unreported_odds: 0.003,
            report_delay_s: 2.0,
            late_report_odds: 0.005,
            late_report_s: 1200.0,
            duplicate_odds: 0.02,
            feed_outages_per_hour: 0.01,
            feed_outage_s: 300.0,
        }
    }
}

impl Habits {
    /// An observatory that does everything at once and as planned.
    pub fn perfect() -> Self {
        Habits {
            claim_delay_s: 0.0,
            late_start_odds: 0.0,
            late_start_s: 0.0,
            overrun_odds: 0.0,
            overrun_s: 0.0,
            short_odds: 0.0,
            lost_odds: 0.0,
            refused_odds: 0.0,
            unreported_odds: 0.0,
            report_delay_s: 0.0,
            late_report_odds: 0.0,
            late_report_s: 0.0,
            duplicate_odds: 0.0,
            feed_outages_per_hour: 0.0,
            feed_outage_s: 0.0,
        }
    }
}

/// How a visit goes, on the monotonic clock.
#[derive(Clone, Debug)]
struct Script {
    lease: Arc<Lease>,
    exposing: (MonotonicMs, MonotonicMs),
    /// Open-shutter time if `exposing` runs to its end, seconds.
    gathers_s: f64,
    outcome: Outcome,
    /// When the observatory is free again.
    free_at: MonotonicMs,
    /// When it reports; `None`: never.
    reports_at: Option<MonotonicMs>,
    twice: bool,
    needs_more_time: Option<f64>,
}

/// What the observatory will do next about a visit.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Promise {
    pub(super) free_at: MonotonicMs,
    pub(super) reports_at: Option<MonotonicMs>,
    pub(super) twice: bool,
    /// Seconds of extension to ask for at once.
    pub(super) extension_s: Option<f64>,
}

/// The simulated observatory.
#[derive(Clone, Debug)]
pub struct SimObservatory {
    habits: Habits,
    rng: ChaCha8Rng,
    clock: SimClock,
    scripts: BTreeMap<VisitId, Script>,
}

impl SimObservatory {
    /// An observatory with these habits and this stream of chance.
    pub fn new(habits: Habits, rng: ChaCha8Rng, clock: SimClock) -> Self {
        SimObservatory {
            habits,
            rng,
            clock,
            scripts: BTreeMap::new(),
        }
    }

    /// Tells it the time.
    pub fn set_clock(&mut self, clock: SimClock) {
        self.clock = clock;
    }

    /// Time until it claims, milliseconds.
    pub(super) fn claim_delay_ms(&mut self) -> i64 {
        milliseconds(exponential(&mut self.rng, self.habits.claim_delay_s))
    }

    /// Whether it sends something twice.
    pub(super) fn sends_twice(&mut self) -> bool {
        happens(&mut self.rng, self.habits.duplicate_odds)
    }

    /// What it will do about a visit it began, if it still does anything.
    pub(super) fn promise(&self, visit: &VisitId) -> Option<Promise> {
        self.scripts.get(visit).map(|script| Promise {
            free_at: script.free_at,
            reports_at: script.reports_at,
            twice: script.twice,
            extension_s: script.needs_more_time,
        })
    }

    /// The report of a visit whose time to report has come; `None` when it is not due now.
    pub(super) fn report(&self, visit: &VisitId) -> Option<VisitReport> {
        let now = self.clock.now();
        let script = self.scripts.get(visit)?;
        let (start, end) = script.exposing;
        let length_s = (end.0 - start.0) as f64 / 1000.0;
        script.reports_at.filter(|at| *at <= now.mono)?;
        let gathered = matches!(script.outcome, Outcome::Done | Outcome::Short);
        let exposing = Span::new(self.clock.utc_at(start), self.clock.utc_at(end));
        Some(VisitReport {
            outcome: script.outcome,
            exposing: gathered.then_some(exposing),
            exposed_s: gathered.then_some(script.gathers_s.min(length_s)),
            snr: None,
            rv_error_m_s: gathered
                .then_some(script.lease.entry.predicted_rv_error_m_s)
                .flatten(),
            note: String::new(),
        })
    }

    /// Draws how the visit goes. Always the same number of draws, so that one visit's fate does not
    /// shift the next one's.
    fn script(&mut self, lease: &Arc<Lease>) -> Script {
        let (habits, now) = (self.habits, self.clock.now().mono);
        let rng = &mut self.rng;
        let mut maybe = |odds, mean_s| {
            let (yes, delay) = (happens(rng, odds), exponential(rng, mean_s));
            if yes { milliseconds(delay) } else { 0 }
        };
        let late_ms = maybe(habits.late_start_odds, habits.late_start_s);
        let overrun_ms = maybe(habits.overrun_odds, habits.overrun_s);
        let late_report_ms = maybe(habits.late_report_odds, habits.late_report_s);
        let delay_ms = maybe(1.0, habits.report_delay_s);
        let silent = happens(rng, habits.unreported_odds);
        let twice = happens(rng, habits.duplicate_odds);
        let fate = between(rng, 0.0, 1.0);
        let share = between(rng, 0.2, 0.9);

        let entry = &lease.entry;
        let planned_ms = entry.end - entry.start;
        let start = now.plus_ms(milliseconds(entry.setup_s) + late_ms);
        // Lamps shine on the fibre whatever the telescope finds.
        let cause = match entry.kind {
            EntryKind::Calibration => LossCause::Instrument,
            EntryKind::Science | EntryKind::Standard => LossCause::Acquisition,
        };
        let (outcome, length_ms, part) = self.fate(fate, cause, (planned_ms, overrun_ms), share);
        let end = if outcome == Outcome::Refused {
            now
        } else {
            start.plus_ms(length_ms)
        };
        let needs_ms = end.0 - now.0 + late_report_ms.min(1) + 60_000;
        let left_ms = lease.expires - lease.granted;
        Script {
            lease: Arc::clone(lease),
            exposing: (start.min(end), end),
            gathers_s: entry.exposures.total_s() * part,
            outcome,
            free_at: end,
            reports_at: (!silent).then(|| end.plus_ms(delay_ms + late_report_ms)),
            twice,
            needs_more_time: (needs_ms > left_ms).then(|| needs_ms as f64 / 1000.0),
        }
    }

    /// Outcome (lost to `cause`, if it is), time on the star in milliseconds, and share of the exposures gathered.
    fn fate(
        &self,
        fate: f64,
        cause: LossCause,
        (planned_ms, overrun_ms): (i64, i64),
        share: f64,
    ) -> (Outcome, i64, f64) {
        let habits = &self.habits;
        let mut line = habits.refused_odds;
        if fate < line {
            return (Outcome::Refused, 0, 0.0);
        }
        line += habits.lost_odds;
        if fate < line {
            return (Outcome::Lost(cause), 0, 0.0);
        }
        line += habits.short_odds;
        if fate < line {
            let length_ms = (planned_ms as f64 * share) as i64;
            return (Outcome::Short, length_ms, share);
        }
        (Outcome::Done, planned_ms + overrun_ms, 1.0)
    }
}

fn milliseconds(seconds: f64) -> i64 {
    (seconds * 1000.0).round() as i64
}

impl Observatory for SimObservatory {
    fn start(&mut self, lease: &Lease) -> Result<(), ObservatoryFault> {
        let lease = Arc::new(lease.clone());
        let script = self.script(&lease);
        self.scripts.insert(lease.visit.clone(), script);
        Ok(())
    }

    /// Closes the shutter now; what was gathered is reported after the usual delay.
    fn stop(&mut self, visit: &VisitId, _cause: LossCause) {
        let now = self.clock.now().mono;
        let delay_ms = milliseconds(exponential(&mut self.rng, self.habits.report_delay_s));
        let Some(script) = self.scripts.get_mut(visit).filter(|s| s.free_at > now) else {
            return;
        };
        let (start, end) = script.exposing;
        let whole_ms = (end.0 - start.0).max(1) as f64;
        let gathered_ms = (now.0 - start.0).max(0);
        script.gathers_s *= gathered_ms as f64 / whole_ms;
        script.exposing = (start.min(now), now);
        script.free_at = now;
        script.outcome = if gathered_ms > 0 {
            Outcome::Short
        } else {
            Outcome::Lost(LossCause::Other)
        };
        script.reports_at = script.reports_at.map(|_| now.plus_ms(delay_ms));
    }
}
