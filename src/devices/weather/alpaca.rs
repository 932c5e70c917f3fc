//! Devices behind the open ASCOM Alpaca standard: ObservingConditions and SafetyMonitor.
//!
//! An answer counts when it is HTTP 200 with `ErrorNumber` 0 and a value of the right type;
//! anything else is a fault. The one exception is error 0x400, "not implemented" (ASCOM Alpaca API
//! reference, "Alpaca Error Numbers"): a station without that sensor. Its quantity is left out, and
//! a rule on it counts it as bad.

use std::sync::atomic::{AtomicU32, Ordering};

use reqwest::Client;
use serde::Deserialize;
use serde_json::Value;

use super::super::http::{beginning, body};
use crate::night::FeedFault;
use crate::ports::Clock;
use crate::settings::{AlpacaFeed, MappedKind, Readings};
use crate::weather::{Quantity, WeatherSample};

/// Largest answer that is read, bytes: one value and its envelope.
const LARGEST: usize = 64 * 1024;
/// "Not implemented", decimal 1024.
const NOT_IMPLEMENTED: i64 = 0x400;
/// Names this client to the server, which may count clients by it.
const CLIENT_ID: &str = "7117";

/// Sensors by their name in the standard, with what they are in the standard's units, which are
/// those of the rules: mm/h, per cent, °C, m/s, degrees, mag/arcsec², arcseconds.
const SENSORS: [(&str, MappedKind); 11] = [
    ("RainRate", MappedKind::Quantity(Quantity::RainMmH)),
    ("Humidity", MappedKind::Quantity(Quantity::HumidityPercent)),
    ("DewPoint", MappedKind::DewPoint),
    ("Temperature", MappedKind::AirTemperature),
    ("WindSpeed", MappedKind::Quantity(Quantity::WindMS)),
    ("WindGust", MappedKind::Quantity(Quantity::GustMS)),
    ("WindDirection", MappedKind::WindFrom),
    ("CloudCover", MappedKind::Quantity(Quantity::CloudPercent)),
    ("SkyTemperature", MappedKind::SkyTemperature),
    (
        "SkyQuality",
        MappedKind::Quantity(Quantity::SkyBrightnessMag),
    ),
    ("StarFWHM", MappedKind::Quantity(Quantity::SeeingArcsec)),
];

pub(super) struct Alpaca {
    feed: AlpacaFeed,
    transaction: AtomicU32,
}

/// The envelope of every answer.
#[derive(Deserialize)]
#[serde(rename_all = "PascalCase")]
struct Envelope {
    value: Option<Value>,
    #[serde(rename = "ClientTransactionID")]
    client_transaction_id: Option<u32>,
    error_number: i64,
    #[serde(default)]
    error_message: String,
}

impl Alpaca {
    pub(super) fn new(feed: AlpacaFeed) -> Self {
        Alpaca {
            feed,
            transaction: AtomicU32::new(1),
        }
    }

    /// Asks the safety monitor first: where it says "unsafe", that is told whatever the station
    /// says. The sample is as old as the oldest of its sensors; a safety monitor has no age.
    pub(super) async fn ask(
        &self,
        client: &Client,
        clock: &(dyn Clock + Sync),
    ) -> Result<WeatherSample, FeedFault> {
        let safe = match self.feed.safety_monitor {
            None => None,
            Some(number) => Some(self.is_safe(client, number).await?),
        };
        let mut readings = Readings::default();
        let mut at = clock.now().utc;
        if let Some(number) = self.feed.observing_conditions {
            for (sensor, kind) in SENSORS {
                let Some(value) = self.reading(client, number, sensor).await? else {
                    continue;
                };
                readings
                    .set(kind, value)
                    .map_err(|error| FeedFault::Malformed(error.to_string()))?;
                let age_s = self.age_s(client, number, sensor).await?;
                at = at.min(clock.now().utc.plus_ms(-(age_s * 1000.0) as i64));
            }
        }
        Ok(readings.sample(at, safe))
    }

    async fn is_safe(&self, client: &Client, number: u32) -> Result<bool, FeedFault> {
        let path = format!("safetymonitor/{number}/issafe");
        let verdict = self.value(client, &path, None).await?;
        verdict
            .as_ref()
            .and_then(Value::as_bool)
            .ok_or_else(|| wrong(&path, verdict.as_ref(), "true or false"))
    }

    /// `None`: the station has no such sensor.
    async fn reading(
        &self,
        client: &Client,
        number: u32,
        sensor: &str,
    ) -> Result<Option<f64>, FeedFault> {
        let path = path(number, sensor);
        let Some(value) = self.value(client, &path, None).await? else {
            return Ok(None);
        };
        let read = value.as_f64();
        read.map(Some)
            .ok_or_else(|| wrong(&path, Some(&value), "a number"))
    }

    async fn age_s(&self, client: &Client, number: u32, sensor: &str) -> Result<f64, FeedFault> {
        let path = path(number, "TimeSinceLastUpdate");
        let value = self.value(client, &path, Some(sensor)).await?;
        let age_s = value.as_ref().and_then(Value::as_f64);
        age_s
            .filter(|age_s| (0.0..1e9).contains(age_s))
            .ok_or_else(|| wrong(&path, value.as_ref(), "seconds, 0 or more"))
    }

    /// `None`: not implemented.
    async fn value(
        &self,
        client: &Client,
        path: &str,
        sensor: Option<&str>,
    ) -> Result<Option<Value>, FeedFault> {
        let transaction = self.transaction.fetch_add(1, Ordering::Relaxed);
        let address = self.feed.address.trim_end_matches('/');
        let mut url = format!(
            "{address}/api/v1/{path}?ClientID={CLIENT_ID}&ClientTransactionID={transaction}"
        );
        if let Some(sensor) = sensor {
            url.push_str("&SensorName=");
            url.push_str(sensor);
        }
        let answer = body(client.get(url), LARGEST)
            .await
            .map_err(|fault| about(path, fault))?;
        let envelope: Envelope = serde_json::from_slice(&answer).map_err(|error| {
            let start = beginning(&answer);
            FeedFault::Malformed(format!("{path}: {error}: \"{start}\""))
        })?;
        open(path, transaction, envelope)
    }
}

fn path(number: u32, member: &str) -> String {
    format!("observingconditions/{number}/{}", member.to_lowercase())
}

fn open(path: &str, asked: u32, envelope: Envelope) -> Result<Option<Value>, FeedFault> {
    // A cache between the two may hand out the answer to an older question; 0 is a server that
    // does not number its answers.
    let answered = envelope.client_transaction_id.filter(|id| *id != 0);
    if answered.is_some_and(|id| id != asked) {
        return Err(FeedFault::Malformed(format!(
            "{path}: an answer to another question"
        )));
    }
    match (envelope.error_number, envelope.value) {
        (0, Some(value)) => Ok(Some(value)),
        (0, None) => Err(FeedFault::Malformed(format!("{path}: no value"))),
        (NOT_IMPLEMENTED, _) => Ok(None),
        (number, _) => {
            let message = beginning(envelope.error_message.as_bytes());
            Err(FeedFault::Malformed(format!(
                "{path}: error {number:#x} {message}"
            )))
        }
    }
}

fn about(path: &str, fault: FeedFault) -> FeedFault {
    match fault {
        FeedFault::Malformed(detail) => FeedFault::Malformed(format!("{path}: {detail}")),
        FeedFault::Unreachable(detail) => FeedFault::Unreachable(format!("{path}: {detail}")),
        other => other,
    }
}

fn wrong(path: &str, found: Option<&Value>, wanted: &str) -> FeedFault {
    let found = found.map_or_else(|| "nothing".to_owned(), Value::to_string);
    FeedFault::Malformed(format!(
        "{path}: {}, must be {wanted}",
        beginning(found.as_bytes())
    ))
}
