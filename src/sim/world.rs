//! The invented world that nights happen in.

use super::chance::{Purpose, stream};
use super::observatory::Habits;
use super::weather::{NightWeather, Recorded, spells};
use crate::night::{NightBounds, NightRules};
use crate::time::{SpanSet, Utc};
use crate::weather::Climate;

/// An invented world: climate, faults, an observatory with its habits. Weather, feed and faults
/// depend on the seed, the realisation and the night, never on what is planned, so that two
/// scenarios with the same numbers see the same ones; the observatory's habits are drawn visit by
/// visit. Nights are run in their order, since the sky and a repair go on from one to the next.
#[derive(Clone, Debug)]
pub struct World {
    /// Seed of all chance.
    pub seed: u64,
    /// Which of several worlds with that seed.
    pub realisation: u32,
    /// The site's weather by month, with the rate of instrument faults.
    pub climate: Climate,
    /// A record to replay in place of drawn weather and of drawn outages of its feed.
    pub recorded: Option<Recorded>,
    /// How the observatory carries visits out.
    pub habits: Habits,
    /// By what the night is run.
    pub rules: NightRules,
    /// How often the weather feed is polled, milliseconds.
    pub poll_ms: i64,
    clear_before: Option<bool>,
    broken_until: Option<Utc>,
}

/// Weather polls by default, milliseconds.
const POLL_MS: i64 = 60_000;

impl World {
    /// A world with no past.
    pub fn new(seed: u64, realisation: u32, climate: Climate, rules: NightRules) -> Self {
        World {
            seed,
            realisation,
            climate,
            recorded: None,
            habits: Habits::default(),
            rules,
            poll_ms: POLL_MS,
            clear_before: None,
            broken_until: None,
        }
    }

    /// Draws the night's weather. The sky goes on from the night drawn before.
    pub(super) fn draw_weather(&mut self, bounds: &NightBounds) -> NightWeather {
        let key = (self.seed, self.realisation);
        let (weather, clear) = NightWeather::draw(
            &self.climate,
            &self.rules.weather,
            bounds,
            self.clear_before,
            key,
        );
        self.clear_before = Some(clear);
        if let Some(recorded) = &self.recorded {
            // Its gaps are the outages of its feed.
            return weather.replaying(recorded.clone());
        }
        let feed = stream(key.0, key.1, bounds.night, Purpose::Feed);
        weather.with_outages(
            self.habits.feed_outages_per_hour,
            self.habits.feed_outage_s,
            feed,
        )
    }

    /// Draws when the instrument is broken tonight; a repair may last into the next night.
    pub(super) fn draw_faults(&mut self, bounds: &NightBounds) -> SpanSet {
        let mut rng = stream(self.seed, self.realisation, bounds.night, Purpose::Faults);
        let Some(darkness) = bounds.darkness else {
            return SpanSet::default();
        };
        let rates = (self.climate.faults_per_hour, self.climate.repair_h * 3600.0);
        let mut faults = spells(darkness.start, darkness.length_ms(), rates, &mut rng);
        if let Some(until) = self.broken_until.filter(|until| *until > bounds.span.start) {
            let rest = crate::time::Span::new(bounds.span.start, until);
            faults = faults.union(&rest.into());
        }
        let last = faults.spans().last().map(|span| span.end);
        self.broken_until = last.filter(|end| *end > darkness.end);
        faults
    }
}
