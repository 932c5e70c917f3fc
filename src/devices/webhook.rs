//! The webhook: notices as JSON to one address, whether anybody is there or not.

use std::sync::Arc;
use std::time::Duration;

use reqwest::Client;
use serde_json::{Value, json};
use tokio::sync::mpsc;
use tokio::time;

use super::http::{ClientFault, chain, client};
use crate::night::Notice;
use crate::ports::{Clock, Notifier};
use crate::record::NightSummary;
use crate::time::Utc;

/// Notices that may wait. A night has a few dozen; when so many wait, the listener is dead.
const QUEUE: usize = 64;
/// One attempt may take so long.
const TIMEOUT: Duration = Duration::from_secs(10);
/// Waits between attempts; after the last one the notice is given up.
const WAITS: [Duration; 2] = [Duration::from_secs(2), Duration::from_secs(20)];

/// Sends notices to a webhook. Telling costs the night nothing: a notice goes into a bounded queue
/// that a task of its own empties, and is dropped, with a line in the log, when the queue is full.
#[derive(Clone)]
pub struct Webhook {
    waiting: mpsc::Sender<Value>,
    clock: Arc<dyn Clock + Send + Sync>,
    survey: String,
}

impl Webhook {
    /// Prepares to tell `url`. `survey` is the name that each notice carries. Must be called from
    /// within a tokio runtime; the task ends when the last clone is gone and the queue is empty.
    ///
    /// # Errors
    /// [`ClientFault`] when HTTPS is wanted and the system's certificates cannot be read.
    pub fn to(
        url: &str,
        survey: &str,
        clock: Arc<dyn Clock + Send + Sync>,
    ) -> Result<Self, ClientFault> {
        let client = client(url, TIMEOUT)?;
        let (waiting, notices) = mpsc::channel(QUEUE);
        tokio::spawn(send_all(client, url.to_owned(), notices));
        Ok(Webhook {
            waiting,
            clock,
            survey: survey.to_owned(),
        })
    }
}

impl Notifier for Webhook {
    fn tell(&mut self, notice: &Notice) {
        let body = body(notice, self.clock.now().utc, &self.survey);
        if self.waiting.try_send(body).is_err() {
            tracing::warn!(?notice, "the webhook is too slow: a notice is dropped");
        }
    }
}

async fn send_all(client: Client, url: String, mut notices: mpsc::Receiver<Value>) {
    while let Some(body) = notices.recv().await {
        for wait in WAITS.iter().map(Some).chain([None]) {
            let Err(why) = send(&client, &url, &body).await else {
                break;
            };
            match wait {
                Some(wait) => time::sleep(*wait).await,
                // Without its address, which may hold a key.
                None => tracing::warn!(%why, "the webhook did not take a notice"),
            }
        }
    }
}

async fn send(client: &Client, url: &str, body: &Value) -> Result<(), String> {
    let sent = client.post(url).json(body).send().await;
    let response = sent.map_err(|error| chain(&error.without_url()))?;
    if response.status().is_success() {
        Ok(())
    } else {
        Err(format!("HTTP {}", response.status()))
    }
}

/// The notice as the webhook gets it: what it is, when, of which survey, and in words.
fn body(notice: &Notice, at: Utc, survey: &str) -> Value {
    let (kind, text) = match notice {
        Notice::Held { cause, detail } => ("held", format!("held ({}): {detail}", cause.label())),
        Notice::Released => ("released", "nothing holds the night any more".to_owned()),
        Notice::Unreported(visit) => (
            "trouble",
            format!("visit {visit} ended with no word from the observatory"),
        ),
        Notice::ClockStepped { by_ms } => (
            "trouble",
            format!("the wall clock stepped by {:.3} s", *by_ms as f64 / 1000.0),
        ),
        Notice::NightClosed(summary) => ("night_closed", closed(summary)),
        Notice::Trouble(detail) => ("trouble", detail.clone()),
    };
    let mut body = json!({
        "notice": kind,
        "at": at.to_string(),
        "survey": survey,
        "text": text,
    });
    match notice {
        Notice::Held { cause, .. } => body["cause"] = json!(cause.label()),
        Notice::NightClosed(summary) => {
            body["night"] = json!(summary.night.to_string());
            body["split_ms"] = summary.split.parts().into_iter().collect::<Value>();
        }
        _ => {}
    }
    body
}

fn closed(summary: &NightSummary) -> String {
    let hours = |ms: i64| ms as f64 / 3_600_000.0;
    let visits = &summary.visits;
    format!(
        "night {} closed: {:.1} of {:.1} h of darkness exposing; visits: {} done, {} short, {} lost, \
         {} refused, {} unreported",
        summary.night,
        hours(summary.split.exposing_ms),
        hours(summary.split.total_ms()),
        visits.done,
        visits.short,
        visits.lost,
        visits.refused,
        visits.unreported
    )
}

#[cfg(test)]
mod tests {
    use std::time::Instant;

    use tokio::io::{AsyncReadExt, AsyncWriteExt};
    use tokio::net::TcpListener;

    use super::*;
    use crate::record::{DarknessSplit, HoldCause, VisitCounts};
    use crate::sim::SimClock;
    use crate::time::NightDate;

    const START: &str = "2026-12-01T23:00:00Z";

    fn webhook(url: &str) -> Webhook {
        let clock = SimClock::at(Utc::parse(START).unwrap());
        Webhook::to(url, "nearby stars", Arc::new(clock)).unwrap()
    }

    fn held() -> Notice {
        Notice::Held {
            cause: HoldCause::FeedLost,
            detail: "no fresh weather sample for 130 s".to_owned(),
        }
    }

    /// Takes one request and answers with that status.
    async fn heard(listener: &TcpListener, status: &str) -> Value {
        let (mut stream, _) = listener.accept().await.unwrap();
        let mut request = Vec::new();
        let mut piece = [0; 4096];
        loop {
            let read = stream.read(&mut piece).await.unwrap();
            request.extend_from_slice(&piece[..read]);
            let text = String::from_utf8_lossy(&request).into_owned();
            let body = text.split("\r\n\r\n").nth(1).unwrap_or("");
            if let Ok(body) = serde_json::from_str(body) {
                let answer = format!("HTTP/1.1 {status}\r\ncontent-length: 0\r\n\r\n");
                stream.write_all(answer.as_bytes()).await.unwrap();
                return body;
            }
        }
    }

    #[tokio::test]
    async fn notices_arrive_in_order_and_again_after_a_refusal() {
        let listener = TcpListener::bind("127.0.0.1:0").await.unwrap();
        let url = format!("http://{}/hook", listener.local_addr().unwrap());
        let mut webhook = webhook(&url);
        webhook.tell(&held());
        webhook.tell(&Notice::Released);
        let first = heard(&listener, "503 Service Unavailable").await;
        let again = heard(&listener, "204 No Content").await;
        assert_eq!(first, again);
        assert_eq!(first["notice"], "held");
        assert_eq!(first["cause"], "feed_lost");
        assert_eq!(first["at"], "2026-12-01T23:00:00.000Z");
        assert_eq!(first["survey"], "nearby stars");
        assert_eq!(heard(&listener, "200 OK").await["notice"], "released");
    }

    #[tokio::test]
    async fn a_dead_listener_costs_no_time_and_bounded_room() {
        // It accepts connections and never answers.
        let listener = TcpListener::bind("127.0.0.1:0").await.unwrap();
        let url = format!("http://{}/hook", listener.local_addr().unwrap());
        let mut webhook = webhook(&url);
        let began = Instant::now();
        (0..10_000).for_each(|_| webhook.tell(&held()));
        assert!(began.elapsed() < Duration::from_secs(2));
        assert_eq!(webhook.waiting.capacity(), 0);
        assert_eq!(webhook.waiting.max_capacity(), QUEUE);
    }

    #[test]
    fn every_notice_says_what_it_is_in_words() {
        let at = Utc::parse(START).unwrap();
        let closed = Notice::NightClosed(Box::new(NightSummary {
            night: NightDate::parse("2026-12-01").unwrap(),
            darkness: None,
            split: DarknessSplit {
                exposing_ms: 5_400_000,
                overhead_ms: 1_800_000,
                ..DarknessSplit::default()
            },
            visits: VisitCounts {
                done: 3,
                ..VisitCounts::default()
            },
        }));
        let check = |notice: &Notice, kind: &str, words: &str| {
            let body = body(notice, at, "s");
            assert_eq!(body["notice"], kind);
            let text = body["text"].as_str().unwrap();
            assert!(text.contains(words), "{text}");
        };
        check(
            &closed,
            "night_closed",
            "1.5 of 2.0 h of darkness exposing; visits: 3 done",
        );
        assert_eq!(body(&closed, at, "s")["split_ms"]["overhead"], 1_800_000);
        check(
            &Notice::ClockStepped { by_ms: -3_600_000 },
            "trouble",
            "-3600.000 s",
        );
        check(
            &Notice::Trouble("disk full".to_owned()),
            "trouble",
            "disk full",
        );
        check(&held(), "held", "feed_lost");
    }
}
