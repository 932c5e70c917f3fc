//! Weather by chance or by record, given out through a feed.

use std::collections::BTreeMap;
use std::sync::Arc;

use chrono::Datelike;
use rand_chacha::ChaCha8Rng;

use super::chance::{Purpose, between, exponential, happens, normal, stream};
use crate::night::{FeedFault, NightBounds, Stamp};
use crate::ports::WeatherSource;
use crate::time::{Span, SpanSet, Utc};
use crate::units::Angle;
use crate::weather::{Climate, Quantity, WeatherRule, WeatherRules, WeatherSample};

const HOUR_MS: i64 = 3_600_000;
/// Share of the seeing's variance (of its logarithm) that a whole night has in common; the rest
/// changes from hour to hour (common practice, no source).
const NIGHTLY_SEEING_SHARE: f64 = 0.5;
/// Median of the mean wind and spread of its logarithm (common practice, no source).
const WIND_MEDIAN_M_S: f64 = 4.0;
const WIND_SIGMA_LN: f64 = 0.45;
/// Gusts over mean wind (common practice, no source).
const GUST_FACTOR: f64 = 1.5;

/// The hourly two-state Markov chain of clear and cloudy.
///
/// With `a` the odds that a clear hour is followed by a cloudy one and `b` those of the reverse,
/// clear spells last 1/a hours on average and the stationary clear fraction is b/(a+b). So
/// a = 1/spell and b = a·f/(1−f); where that b would exceed 1 (short spells under a very clear
/// sky), b = 1 and a = (1−f)/f, which keeps the fraction and lengthens the spells.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SkyChain {
    /// Odds that a clear hour is followed by a cloudy one.
    pub clouds_over: f64,
    /// Odds that a cloudy hour is followed by a clear one.
    pub clears: f64,
}

impl SkyChain {
    /// The chain of that clear fraction (0 to 1) and mean clear spell (hours, at least 1).
    pub fn new(clear_fraction: f64, clear_spell_h: f64) -> Self {
        let fraction = clear_fraction.clamp(0.0, 1.0);
        if fraction >= 1.0 {
            return SkyChain {
                clouds_over: 0.0,
                clears: 1.0,
            };
        }
        let clouds_over = 1.0 / clear_spell_h.max(1.0);
        let clears = clouds_over * fraction / (1.0 - fraction);
        if clears <= 1.0 {
            SkyChain {
                clouds_over,
                clears,
            }
        } else {
            SkyChain {
                clouds_over: (1.0 - fraction) / fraction,
                clears: 1.0,
            }
        }
    }

    /// Whether the hour after one that was clear (or not) is clear.
    pub fn next(self, clear: bool, rng: &mut ChaCha8Rng) -> bool {
        let odds = if clear {
            1.0 - self.clouds_over
        } else {
            self.clears
        };
        happens(rng, odds)
    }
}

/// Recorded weather to replay, as blocks of a record moved in time.
#[derive(Clone, Debug, PartialEq)]
pub struct Recorded {
    /// The record, by time.
    pub samples: Arc<[WeatherSample]>,
    /// Added to the record's instants to bring them into the night.
    pub shift_ms: i64,
    /// How long a line of the record stands for the weather after it, milliseconds: the feed then
    /// gives it with a fresh time stamp.
    pub valid_ms: i64,
}

impl Recorded {
    /// What the feed gives at an instant of the night: the line that stands then, freshly stamped.
    pub(super) fn at(&self, now: Utc) -> Result<WeatherSample, FeedFault> {
        let then = now.plus_ms(-self.shift_ms);
        let after = self.samples.partition_point(|sample| sample.at <= then);
        let line = after.checked_sub(1).and_then(|i| self.samples.get(i));
        match line.filter(|line| then - line.at < self.valid_ms) {
            Some(line) => Ok(WeatherSample {
                at: now,
                ..line.clone()
            }),
            None => Err(FeedFault::Unreachable(format!("no record for {then}"))),
        }
    }
}

#[derive(Clone, Debug)]
struct Hour {
    clear: bool,
    values: BTreeMap<Quantity, f64>,
    wind_from: Angle,
}

/// One night's weather, noon to noon, and its feed.
#[derive(Clone, Debug)]
pub struct NightWeather {
    from: Utc,
    hours: Vec<Hour>,
    outages: SpanSet,
    recorded: Option<Recorded>,
}

impl NightWeather {
    /// Draws a night. `clear_before`: the hour before it was clear; `None`: the chain starts from
    /// its stationary fraction. The second value is whether its last hour was clear, for the next
    /// night: by day the chain goes on, and a lost night does not break it.
    ///
    /// In a clear hour every quantity that has a rule is on the good side of its release (the
    /// climate's clear fraction is that of usable weather), seeing apart; in a cloudy one the feed
    /// says "unsafe" and cloud, humidity and sky temperature say why.
    pub fn draw(
        climate: &Climate,
        rules: &WeatherRules,
        bounds: &NightBounds,
        clear_before: Option<bool>,
        key: (u64, u32),
    ) -> (Self, bool) {
        let month = bounds.night.date().month0() as usize;
        let fraction = climate.clear_fraction[month.min(11)];
        let chain = SkyChain::new(fraction, climate.clear_spell_h);
        let stream_for = |purpose| stream(key.0, key.1, bounds.night, purpose);
        let mut sky = stream_for(Purpose::Sky);
        let lost = happens(&mut sky, climate.night_lost);
        let mut clear = match clear_before {
            Some(before) => chain.next(before, &mut sky),
            None => happens(&mut sky, fraction),
        };
        let mut air = Air::new(
            climate,
            stream_for(Purpose::Seeing),
            stream_for(Purpose::Air),
        );
        let mut hours = Vec::with_capacity(24);
        let count = bounds.span.length_ms() / HOUR_MS;
        for hour in 0..count.max(1) {
            if hour > 0 {
                clear = chain.next(clear, &mut sky);
            }
            hours.push(air.hour(clear && !lost, rules));
        }
        let weather = NightWeather {
            from: bounds.span.start,
            hours,
            outages: SpanSet::default(),
            recorded: None,
        };
        (weather, clear)
    }

    /// Replays a record in place of what was drawn.
    pub fn replaying(mut self, recorded: Recorded) -> Self {
        self.recorded = Some(recorded);
        self
    }

    /// Makes the feed fail now and then: so many outages per hour, of that mean length.
    pub fn with_outages(mut self, per_hour: f64, mean_s: f64, mut rng: ChaCha8Rng) -> Self {
        let length_ms = self.hours.len() as i64 * HOUR_MS;
        self.outages = spells(self.from, length_ms, (per_hour, mean_s), &mut rng);
        self
    }

    /// Whether that instant's hour is clear.
    pub fn is_clear(&self, at: Utc) -> bool {
        self.hour(at).is_some_and(|hour| hour.clear)
    }

    fn hour(&self, at: Utc) -> Option<&Hour> {
        let index = (at - self.from).div_euclid(HOUR_MS);
        let last = self.hours.len().checked_sub(1)?;
        self.hours
            .get(usize::try_from(index).unwrap_or(0).min(last))
    }
}

impl WeatherSource for NightWeather {
    fn poll(&mut self, now: Stamp) -> Result<WeatherSample, FeedFault> {
        if self.outages.contains(now.utc) {
            return Err(FeedFault::Unreachable("simulated outage".to_owned()));
        }
        if let Some(recorded) = &self.recorded {
            return recorded.at(now.utc);
        }
        let hour = self.hour(now.utc);
        let hour = hour.ok_or_else(|| FeedFault::Unreachable("no weather".to_owned()))?;
        Ok(WeatherSample {
            at: now.utc,
            values: hour.values.clone(),
            wind_from: Some(hour.wind_from),
            safe: Some(hour.clear),
        })
    }
}

/// Spells that begin at so many an hour from `from` on, of that mean length in seconds.
pub(super) fn spells(
    from: Utc,
    length_ms: i64,
    (per_hour, mean_s): (f64, f64),
    rng: &mut ChaCha8Rng,
) -> SpanSet {
    let mut found = Vec::new();
    if per_hour <= 0.0 || mean_s <= 0.0 {
        return SpanSet::default();
    }
    let end = from.plus_ms(length_ms);
    let mut at = from;
    loop {
        at = at.plus_ms((exponential(rng, 1.0 / per_hour) * HOUR_MS as f64) as i64);
        if at >= end {
            break;
        }
        let until = at.plus_ms((exponential(rng, mean_s) * 1000.0).ceil() as i64);
        found.push(Span::new(at, until));
        at = until;
    }
    SpanSet::from_spans(found)
}

/// Draws the air of one hour after another.
struct Air<'a> {
    climate: &'a Climate,
    nightly_seeing_ln: f64,
    seeing: ChaCha8Rng,
    air: ChaCha8Rng,
    wind_from_deg: f64,
}

impl<'a> Air<'a> {
    fn new(climate: &'a Climate, mut seeing: ChaCha8Rng, mut air: ChaCha8Rng) -> Self {
        let sigma = climate.seeing_sigma_ln * NIGHTLY_SEEING_SHARE.sqrt();
        Air {
            climate,
            nightly_seeing_ln: sigma * normal(&mut seeing),
            wind_from_deg: between(&mut air, 0.0, 360.0),
            seeing,
            air,
        }
    }

    /// Draws the same numbers whether the hour is clear or not.
    fn hour(&mut self, clear: bool, rules: &WeatherRules) -> Hour {
        let hourly = self.climate.seeing_sigma_ln * (1.0 - NIGHTLY_SEEING_SHARE).sqrt();
        let seeing_ln = self.nightly_seeing_ln + hourly * normal(&mut self.seeing);
        let wind = WIND_MEDIAN_M_S * (WIND_SIGMA_LN * normal(&mut self.air)).exp();
        let share = between(&mut self.air, 0.0, 1.0);
        self.wind_from_deg += 20.0 * normal(&mut self.air);
        let pick =
            |clear_value: f64, cloudy_value: f64| if clear { clear_value } else { cloudy_value };
        let mut values = BTreeMap::from([
            (Quantity::RainMmH, pick(0.0, (share - 0.5).max(0.0) * 4.0)),
            (Quantity::HumidityPercent, pick(40.0, 85.0) + 10.0 * share),
            (Quantity::DewPointSpreadK, pick(8.0, 0.5) + share),
            (Quantity::WindMS, wind.min(100.0)),
            (Quantity::GustMS, (GUST_FACTOR * wind).min(150.0)),
            (Quantity::CloudPercent, pick(5.0, 85.0) + 10.0 * share),
            (Quantity::SkyMinusAirK, pick(-28.0, -4.0) - 2.0 * share),
            (Quantity::SkyBrightnessMag, pick(21.2, 18.0)),
            (
                Quantity::SeeingArcsec,
                (self.climate.seeing_median_arcsec * seeing_ln.exp()).min(20.0),
            ),
        ]);
        if clear {
            rules
                .rules
                .iter()
                .for_each(|rule| make_good(&mut values, rule));
        }
        Hour {
            clear,
            values,
            wind_from: Angle::from_deg(self.wind_from_deg.rem_euclid(360.0)),
        }
    }
}

fn make_good(values: &mut BTreeMap<Quantity, f64>, rule: &WeatherRule) {
    if rule.quantity == Quantity::SeeingArcsec {
        return;
    }
    if let Some(value) = values.get_mut(&rule.quantity) {
        *value = if rule.high_is_bad {
            value.min(rule.release_at)
        } else {
            value.max(rule.release_at)
        };
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::time::NightDate;

    /// Stationary fraction and mean run lengths of a two-state chain are b/(a+b), 1/a and 1/b
    /// (any text on Markov chains, e.g. Grimmett & Stirzaker, Probability and Random Processes,
    /// ch. 6).
    #[test]
    fn the_chain_has_its_fraction_and_its_spells() {
        for (fraction, spell_h) in [(0.6, 9.0), (0.25, 4.0), (0.9, 5.0)] {
            let chain = SkyChain::new(fraction, spell_h);
            let (a, b) = (chain.clouds_over, chain.clears);
            assert!((b / (a + b) - fraction).abs() < 1e-12);
            let night = NightDate::parse("2026-12-01").unwrap();
            let mut rng = stream(11, 0, night, Purpose::Sky);
            let (hours, mut clear, mut clear_hours, mut spells) = (400_000, true, 0.0, 0.0);
            for _ in 0..hours {
                let next = chain.next(clear, &mut rng);
                clear_hours += f64::from(u8::from(next));
                spells += f64::from(u8::from(clear && !next));
                clear = next;
            }
            // Five standard errors: a correlated hour counts as 1/((1+ρ)/(1−ρ)) of a free one,
            // with ρ = 1 − a − b.
            let rho = 1.0 - a - b;
            let free = f64::from(hours) * (1.0 - rho) / (1.0 + rho);
            let error = 5.0 * (fraction * (1.0 - fraction) / free).sqrt();
            assert!((clear_hours / f64::from(hours) - fraction).abs() < error);
            let mean_spell_h: f64 = clear_hours / spells;
            assert!((mean_spell_h * a - 1.0).abs() < 5.0 / spells.sqrt() + 1e-3);
        }
    }

    #[test]
    fn a_fraction_out_of_reach_of_the_spell_is_kept_by_longer_spells() {
        let chain = SkyChain::new(0.9, 2.0);
        assert_eq!(chain.clears, 1.0);
        assert!((chain.clears / (chain.clears + chain.clouds_over) - 0.9).abs() < 1e-12);
    }

    #[test]
    fn a_record_is_replayed_while_its_lines_stand() {
        let at = |ms| Utc::from_unix_ms(ms);
        let line = |ms, cloud| WeatherSample {
            at: at(ms),
            values: BTreeMap::from([(Quantity::CloudPercent, cloud)]),
            wind_from: None,
            safe: None,
        };
        let recorded = Recorded {
            samples: Arc::from(vec![line(0, 1.0), line(1000, 2.0)]),
            shift_ms: 50_000,
            valid_ms: 1500,
        };
        let cloud = |ms| {
            recorded
                .at(at(ms))
                .map(|s| s.values[&Quantity::CloudPercent])
        };
        assert_eq!(cloud(50_999), Ok(1.0));
        assert_eq!(cloud(51_000), Ok(2.0));
        assert_eq!(cloud(52_499), Ok(2.0));
        assert!(cloud(52_500).is_err());
        assert!(cloud(49_999).is_err());
    }
}
