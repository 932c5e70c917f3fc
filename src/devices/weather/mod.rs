//! The live weather feed: asked again and again, with back-off, until nobody listens.

mod alpaca;
mod json;
#[cfg(test)]
mod tests;

use std::sync::Arc;
use std::time::Duration;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;
use reqwest::Client;
use tokio::sync::mpsc;
use tokio::time;

use super::http::{ClientFault, client};
use crate::night::{Event, FeedFault};
use crate::ports::Clock;
use crate::settings::{Feed, FeedSource};
use crate::weather::WeatherSample;

/// A feed that keeps failing is asked less often, but never less often than this many times its
/// ordinary interval.
const MOST_BACK_OFF: f64 = 8.0;
/// Nor, unless its ordinary interval is longer, less often than this: when it comes back, the dwell
/// times of the rules should begin soon.
const LONGEST_BACK_OFF_S: f64 = 120.0;
/// By this share of itself a wait after a failure is stretched at random, so that many clients of a
/// feed that came back do not all ask at once.
const JITTER: f64 = 0.25;

/// How long to wait between two polls.
#[derive(Clone, Debug)]
pub struct Pacing {
    poll_s: f64,
    failures: u32,
    rng: ChaCha8Rng,
}

impl Pacing {
    /// Polls every `poll_s` seconds while all is well.
    pub fn new(poll_s: f64, rng: ChaCha8Rng) -> Self {
        Pacing {
            poll_s,
            failures: 0,
            rng,
        }
    }

    /// How long to wait after a poll that went well or did not, seconds: `poll_s`, doubled with
    /// each failure in a row up to a limit, and stretched at random after failures.
    pub fn wait_s(&mut self, well: bool) -> f64 {
        if well {
            self.failures = 0;
            return self.poll_s;
        }
        let doubled = self.poll_s * 2_f64.powi(self.failures.min(16) as i32);
        self.failures = self.failures.saturating_add(1);
        let most = (MOST_BACK_OFF * self.poll_s)
            .min(LONGEST_BACK_OFF_S)
            .max(self.poll_s);
        doubled.min(most) * (1.0 + JITTER * self.rng.random::<f64>())
    }
}

enum Source {
    Json(json::Json),
    Alpaca(alpaca::Alpaca),
}

/// A weather feed as the settings describe it.
pub struct LiveFeed {
    client: Client,
    source: Source,
    timeout: Duration,
    pacing: Pacing,
}

impl LiveFeed {
    /// Prepares to ask. `rng` decides the jitter of waits alone.
    ///
    /// # Errors
    /// [`ClientFault`] when HTTPS is wanted and the system's certificates cannot be read.
    pub fn new(feed: &Feed, rng: ChaCha8Rng) -> Result<Self, ClientFault> {
        let url = match &feed.source {
            FeedSource::Json(json) => &json.url,
            FeedSource::Alpaca(alpaca) => &alpaca.address,
        };
        // Checked settings keep it between 0.1 and 600.
        let timeout = Duration::from_secs_f64(feed.timeout_s.clamp(0.001, 3600.0));
        Ok(LiveFeed {
            client: client(url, timeout)?,
            source: match &feed.source {
                FeedSource::Json(json) => Source::Json(json::Json::new(json.clone())),
                FeedSource::Alpaca(alpaca) => Source::Alpaca(alpaca::Alpaca::new(alpaca.clone())),
            },
            timeout,
            pacing: Pacing::new(feed.poll_s, rng),
        })
    }

    /// Asks once. Returns within the feed's time-out, however many requests it takes.
    ///
    /// # Errors
    /// [`FeedFault`], whatever went wrong.
    pub async fn poll(&self, clock: &(dyn Clock + Sync)) -> Result<WeatherSample, FeedFault> {
        let asked = async {
            match &self.source {
                Source::Json(json) => json.ask(&self.client).await,
                Source::Alpaca(alpaca) => alpaca.ask(&self.client, clock).await,
            }
        };
        match time::timeout(self.timeout, asked).await {
            Ok(answer) => answer,
            Err(_) => Err(FeedFault::Unreachable("no whole answer in time".to_owned())),
        }
    }

    /// Asks until the receiver is gone, and tells it each answer. `speed`: invented seconds in a
    /// real one (1 on a real clock), by which the waits shrink.
    pub async fn run(
        mut self,
        clock: Arc<dyn Clock + Send + Sync>,
        speed: f64,
        told: mpsc::Sender<Event>,
    ) {
        loop {
            let answer = self.poll(clock.as_ref()).await;
            let wait_s = self.pacing.wait_s(answer.is_ok()) / speed;
            let event = match answer {
                Ok(sample) => Event::WeatherArrived(sample),
                Err(fault) => {
                    tracing::debug!(%fault, "weather feed");
                    Event::FeedFailed(fault)
                }
            };
            if told.send(event).await.is_err() {
                return;
            }
            let wait = Duration::try_from_secs_f64(wait_s).unwrap_or(self.timeout);
            tokio::select! {
                () = time::sleep(wait) => {}
                () = told.closed() => return,
            }
        }
    }
}
