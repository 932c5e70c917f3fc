//! Any JSON document, with each quantity at its pointer.

use reqwest::Client;
use serde_json::Value;

use super::super::http::{beginning, body};
use crate::night::FeedFault;
use crate::settings::{JsonFeed, Readings};
use crate::time::Utc;
use crate::weather::WeatherSample;

/// Largest answer that is read, bytes: a weather document has a few thousand.
const LARGEST: usize = 256 * 1024;

pub(super) struct Json {
    feed: JsonFeed,
}

impl Json {
    pub(super) fn new(feed: JsonFeed) -> Self {
        Json { feed }
    }

    pub(super) async fn ask(&self, client: &Client) -> Result<WeatherSample, FeedFault> {
        let request = client.get(&self.feed.url);
        let request = request.header("accept", "application/json");
        sample(&self.feed, &body(request, LARGEST).await?)
    }
}

/// The sample in a document. A quantity that is `null` was not measured and is left out; where it
/// has a rule, the rule counts it as bad. Anything else that is no number is a fault of the feed.
pub(super) fn sample(feed: &JsonFeed, document: &[u8]) -> Result<WeatherSample, FeedFault> {
    let document: Value = serde_json::from_slice(document)
        .map_err(|error| malformed(format!("{error}: \"{}\"", beginning(document))))?;
    let at = time(feed, at(&document, &feed.time)?)?;
    let safe = match &feed.safe {
        None => None,
        Some(pointer) => Some(verdict(pointer, self::at(&document, pointer)?)?),
    };
    let mut readings = Readings::default();
    for mapped in &feed.values {
        let value = self::at(&document, &mapped.from)?;
        if value.is_null() {
            continue;
        }
        let number = value
            .as_f64()
            .ok_or_else(|| malformed(format!("{} is {value}, not a number", mapped.from)))?;
        readings
            .take(mapped, number)
            .map_err(|error| malformed(error.to_string()))?;
    }
    Ok(readings.sample(at, safe))
}

fn malformed(detail: String) -> FeedFault {
    const LONGEST: usize = 200;
    FeedFault::Malformed(detail.chars().take(LONGEST).collect())
}

fn at<'a>(document: &'a Value, pointer: &str) -> Result<&'a Value, FeedFault> {
    let found = document.pointer(pointer);
    found.ok_or_else(|| malformed(format!("there is nothing at {pointer}")))
}

fn time(feed: &JsonFeed, written: &Value) -> Result<Utc, FeedFault> {
    let read = match written {
        Value::String(text) => feed.time_format.read(text),
        Value::Number(number) => number
            .as_f64()
            .and_then(|n| feed.time_format.read_number(n)),
        _ => None,
    };
    read.ok_or_else(|| malformed(format!("{} is {written}, no time as agreed", feed.time)))
}

fn verdict(pointer: &str, written: &Value) -> Result<bool, FeedFault> {
    let verdict = written.as_bool();
    verdict.ok_or_else(|| malformed(format!("{pointer} is {written}, not true or false")))
}
