//! The weather's gate: what the samples so far say about observing, with hysteresis.
//!
//! A sample passes when it is fresh and sound. A rule is *bad* from `hold_at` on, and when its
//! quantity is missing; it is *good* again after the quantity has stayed on the good side of
//! `release_at` for `dwell_s` without a break. Between the two limits a good rule stays good, and a
//! bad one stays bad with its dwell starting over. After the feed was lost, nobody knows what the
//! sky did: each rule must earn its dwell again. A gate that has never been open also wants
//! `opening_dwell_s` of good samples.

use thiserror::Error;

use super::Stamp;
use super::accounting::seconds_ms;
use super::rules::NightRules;
use crate::time::{MonotonicMs, Utc};
use crate::weather::{Quantity, WeatherRule, WeatherSample};

/// What is wrong with a weather feed.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum FeedFault {
    /// No answer: refused, timed out, cut off, too long.
    #[error("the weather feed cannot be reached: {0}")]
    Unreachable(String),
    /// An answer that is no weather sample.
    #[error("the weather feed's answer is malformed: {0}")]
    Malformed(String),
    /// A number that cannot be.
    #[error("the weather feed gives {} = {value}, which cannot be", quantity.label())]
    Nonsense {
        /// Of what.
        quantity: Quantity,
        /// The number.
        value: f64,
    },
    /// A time stamp ahead of the clock.
    #[error(
        "the weather feed's time stamp {at} lies ahead of the clock: set the feed's clock or ours"
    )]
    FutureStamp {
        /// The time stamp.
        at: Utc,
    },
    /// No newer sample for too long: too old, or the time stamp does not move on.
    #[error("no fresh weather sample for {age_s:.0} s")]
    Stale {
        /// Age of the freshest one, seconds.
        age_s: f64,
    },
    /// No sample has come since the night keeper started.
    #[error("no weather sample yet")]
    NoneYet,
}

/// What the gate says now.
#[derive(Clone, Debug, PartialEq)]
pub enum Verdict {
    /// Nothing in the weather forbids observing.
    Open,
    /// A rule forbids it; in words, with the values that decided.
    Bad(String),
    /// The feed cannot be relied on.
    Lost(FeedFault),
    /// Nothing heard yet after a restart: nothing new may begin, what runs may go on.
    Unheard,
}

#[derive(Clone, Copy, Debug, PartialEq, Default)]
struct RuleState {
    good: bool,
    good_since: Option<MonotonicMs>,
}

impl RuleState {
    const GOOD: RuleState = RuleState {
        good: true,
        good_since: None,
    };

    fn take(&mut self, reading: Reading, dwell_ms: i64, now: MonotonicMs) {
        match reading {
            Reading::Bad => *self = RuleState::default(),
            Reading::Between if self.good => {}
            Reading::Between => self.good_since = None,
            Reading::Good => {
                let since = *self.good_since.get_or_insert(now);
                self.good |= now.0 - since.0 >= dwell_ms;
            }
        }
    }
}

#[derive(Clone, Copy, PartialEq)]
enum Reading {
    Good,
    Between,
    Bad,
}

#[derive(Clone, Debug, PartialEq)]
enum Feed {
    NoneYet,
    Unheard,
    Sound,
    Lost(FeedFault),
}

/// The gate.
#[derive(Clone, Debug, PartialEq)]
pub struct Gate {
    feed: Feed,
    /// One for each rule, in their order, and one for the plain verdict at the end.
    rules: Vec<RuleState>,
    opening: RuleState,
    latest: Option<WeatherSample>,
    /// Time stamp that a sample must pass to be news; none since the wall clock stepped.
    newest: Option<Utc>,
    /// When the freshest sample stops being fresh.
    stale_at: Option<MonotonicMs>,
    noted_at: Option<MonotonicMs>,
}

impl Gate {
    /// A gate that nothing has passed yet: closed.
    pub fn closed(rules: &NightRules) -> Self {
        Gate {
            feed: Feed::NoneYet,
            rules: vec![RuleState::default(); rules.weather.rules.len() + 1],
            opening: RuleState::default(),
            latest: None,
            newest: None,
            stale_at: None,
            noted_at: None,
        }
    }

    /// The gate of a night keeper that came back within a night. It was open when the record says
    /// so, and gets as long as a sample stays fresh to hear a new one.
    pub fn resumed(rules: &NightRules, was_open: bool, now: MonotonicMs) -> Self {
        let mut gate = Gate::closed(rules);
        if was_open {
            gate.feed = Feed::Unheard;
            gate.rules.fill(RuleState::GOOD);
            gate.opening = RuleState::GOOD;
            gate.stale_at = Some(now.plus_ms(seconds_ms(rules.weather.stale_after_s)));
        }
        gate
    }

    /// What the gate says.
    pub fn verdict(&self, rules: &NightRules) -> Verdict {
        match &self.feed {
            Feed::NoneYet => Verdict::Lost(FeedFault::NoneYet),
            Feed::Unheard => Verdict::Unheard,
            Feed::Lost(fault) => Verdict::Lost(fault.clone()),
            Feed::Sound => self.weather_verdict(rules),
        }
    }

    /// The freshest sample, if the feed is sound.
    pub fn latest(&self) -> Option<&WeatherSample> {
        self.latest.as_ref().filter(|_| self.feed == Feed::Sound)
    }

    /// When the freshest sample will have become stale.
    pub fn stale_at(&self) -> Option<MonotonicMs> {
        self.stale_at
    }

    /// Takes a sample in.
    pub fn take(&mut self, sample: WeatherSample, now: Stamp, rules: &NightRules) {
        if let Err(fault) = sound(&sample, now, rules) {
            self.lose(fault);
            return;
        }
        if self.newest.is_some_and(|newest| sample.at <= newest) {
            // The same time stamp again is no news: the stale timer goes on running. It also does
            // not bring back a feed that was lost.
            return;
        }
        let fresh_ms = seconds_ms(rules.weather.stale_after_s) - (now.utc - sample.at).max(0);
        self.stale_at = Some(now.mono.plus_ms(fresh_ms));
        self.newest = Some(sample.at);
        self.latest = Some(sample);
        if fresh_ms <= 0 {
            self.expire(now.mono, rules);
            return;
        }
        self.feed = Feed::Sound;
        self.judge(now.mono, rules);
    }

    /// Takes in that the feed gave no sample. Silence is borne until the freshest sample is stale;
    /// an answer that makes no sense is not borne at all.
    pub fn fail(&mut self, fault: FeedFault) {
        let silent = matches!(fault, FeedFault::Unreachable(_));
        let still_fresh = matches!(self.feed, Feed::Sound | Feed::Unheard);
        if !(silent && still_fresh) {
            self.lose(fault);
        }
    }

    /// Closes the gate when the freshest sample has become stale.
    pub fn expire(&mut self, now: MonotonicMs, rules: &NightRules) {
        if let Some(stale_at) = self.stale_at.filter(|at| *at <= now) {
            let over_s = (now.0 - stale_at.0) as f64 / 1000.0;
            self.lose(FeedFault::Stale {
                age_s: rules.weather.stale_after_s + over_s,
            });
        }
    }

    /// The wall clock stepped: time stamps from before it cannot be compared with those after.
    pub fn clock_stepped(&mut self) {
        self.newest = None;
    }

    /// Follows a change of the rules: where their number changed, each starts from what held for
    /// all before.
    pub fn adopt(&mut self, rules: &NightRules) {
        let wanted = rules.weather.rules.len() + 1;
        if self.rules.len() != wanted {
            let all_good = self.rules.iter().all(|r| r.good);
            let start = if all_good {
                RuleState::GOOD
            } else {
                RuleState::default()
            };
            self.rules = vec![start; wanted];
        }
    }

    /// Whether the freshest sample is due for the ledger; notes that it was kept.
    pub fn note(&mut self, now: MonotonicMs, rules: &NightRules, changed: bool) -> bool {
        let every_ms = seconds_ms(rules.weather_note_every_s);
        let due = self.noted_at.is_none_or(|at| now.0 - at.0 >= every_ms);
        if due || changed {
            self.noted_at = Some(now);
        }
        due || changed
    }

    fn lose(&mut self, fault: FeedFault) {
        if !matches!(self.feed, Feed::Lost(_)) {
            self.feed = Feed::Lost(fault);
        }
        self.stale_at = None;
        self.rules.fill(RuleState::default());
        if !self.opening.good {
            self.opening = RuleState::default();
        }
    }

    fn judge(&mut self, now: MonotonicMs, rules: &NightRules) {
        let Some(sample) = &self.latest else { return };
        let weather = &rules.weather;
        let mut worst = Reading::Good;
        let longest_dwell_s = weather.rules.iter().map(|r| r.dwell_s).fold(0.0, f64::max);
        let readings = weather.rules.iter().map(|rule| {
            let value = sample.values.get(&rule.quantity);
            (read(rule, value), rule.dwell_s)
        });
        let flag = flag_reading(sample, weather.require_safe_flag);
        for (state, (reading, dwell_s)) in self
            .rules
            .iter_mut()
            .zip(readings.chain([(flag, longest_dwell_s)]))
        {
            state.take(reading, seconds_ms(dwell_s), now);
            if reading != Reading::Good {
                worst = reading;
            }
        }
        if !self.opening.good {
            self.opening
                .take(worst, seconds_ms(weather.opening_dwell_s), now);
        }
    }

    fn weather_verdict(&self, rules: &NightRules) -> Verdict {
        let sample = self.latest.as_ref();
        let flag = self.rules.last().copied().unwrap_or_default();
        let mut words: Vec<String> = rules
            .weather
            .rules
            .iter()
            .zip(&self.rules)
            .filter(|(_, state)| !state.good)
            .map(|(rule, state)| {
                let value = sample.and_then(|s| s.values.get(&rule.quantity));
                describe(rule, value, state.good_since.is_some())
            })
            .collect();
        if !flag.good {
            words.push(match sample.and_then(|s| s.safe) {
                Some(true) => "the feed says safe again, waiting for it to last".to_owned(),
                Some(false) => "the feed says unsafe".to_owned(),
                None => "the feed does not say whether it is safe".to_owned(),
            });
        }
        if words.is_empty() && !self.opening.good {
            words.push(format!(
                "good weather must last {} s before the night opens",
                rules.weather.opening_dwell_s
            ));
        }
        if words.is_empty() {
            Verdict::Open
        } else {
            Verdict::Bad(words.join("; "))
        }
    }
}

fn describe(rule: &WeatherRule, value: Option<&f64>, waiting: bool) -> String {
    let name = rule.quantity.label();
    match value {
        None => format!("{name} is missing"),
        Some(value) if waiting => {
            format!(
                "{name} = {value:.1} is good again, waiting for {} s of it",
                rule.dwell_s
            )
        }
        Some(value) => format!(
            "{name} = {value:.1}, hold at {}, release at {}",
            rule.hold_at, rule.release_at
        ),
    }
}

fn read(rule: &WeatherRule, value: Option<&f64>) -> Reading {
    let Some(value) = value else {
        return Reading::Bad;
    };
    // Turned so that large is bad for every rule.
    let sign = if rule.high_is_bad { 1.0 } else { -1.0 };
    let (value, hold_at, release_at) = (value * sign, rule.hold_at * sign, rule.release_at * sign);
    if value >= hold_at {
        Reading::Bad
    } else if value <= release_at {
        Reading::Good
    } else {
        Reading::Between
    }
}

fn flag_reading(sample: &WeatherSample, required: bool) -> Reading {
    match sample.safe {
        Some(true) => Reading::Good,
        Some(false) => Reading::Bad,
        None if required => Reading::Bad,
        None => Reading::Good,
    }
}

/// Least and greatest value that a working sensor gives (common practice, no source: generous, so
/// that only sentinels such as -9999 and broken units fall outside).
fn plausible(quantity: Quantity) -> (f64, f64) {
    match quantity {
        Quantity::RainMmH => (0.0, 1000.0),
        Quantity::HumidityPercent => (0.0, 110.0),
        Quantity::DewPointSpreadK => (-10.0, 100.0),
        Quantity::WindMS | Quantity::GustMS => (0.0, 150.0),
        Quantity::CloudPercent => (0.0, 100.0),
        Quantity::SkyMinusAirK => (-150.0, 50.0),
        Quantity::SkyBrightnessMag => (-30.0, 30.0),
        Quantity::SeeingArcsec => (0.0, 60.0),
    }
}

fn sound(sample: &WeatherSample, now: Stamp, rules: &NightRules) -> Result<(), FeedFault> {
    if sample.at - now.utc > seconds_ms(rules.future_tolerance_s) {
        return Err(FeedFault::FutureStamp { at: sample.at });
    }
    for (quantity, value) in &sample.values {
        let (least, greatest) = plausible(*quantity);
        if !(least..=greatest).contains(value) {
            return Err(FeedFault::Nonsense {
                quantity: *quantity,
                value: *value,
            });
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests;
