//! What may be looked at by anybody who can reach the address.

use std::sync::Arc;
use std::time::Duration;

use axum::Json;
use axum::extract::State;
use axum::http::{HeaderMap, HeaderName, HeaderValue, StatusCode, header};
use axum::response::{Html, IntoResponse, Response};
use maud::html;
use prometheus_client::encoding::EncodeLabelSet;
use prometheus_client::encoding::text::encode;
use prometheus_client::metrics::counter::Counter;
use prometheus_client::metrics::family::Family;
use prometheus_client::metrics::gauge::Gauge;
use prometheus_client::metrics::histogram::Histogram;
use prometheus_client::registry::Registry;

use super::{Face, Problem};
use crate::daemon::board::{CAUTION, StatusView, mode_label};
use crate::daemon::files::queue_json;
use crate::page;

/// The page of the daemon loads itself anew so often, seconds.
const REFRESH_S: u32 = 15;

#[derive(Clone, Debug, Hash, PartialEq, Eq, EncodeLabelSet)]
struct Answered {
    path: String,
    status: u16,
}

#[derive(Clone, Debug, Hash, PartialEq, Eq, EncodeLabelSet)]
struct Cause {
    cause: String,
}

#[derive(Clone, Debug, Hash, PartialEq, Eq, EncodeLabelSet)]
struct Ended {
    outcome: String,
}

/// What is counted.
pub(super) struct Metrics {
    registry: Registry,
    requests: Family<Answered, Counter>,
    request_s: Histogram,
    acknowledged_s: Histogram,
    held: Family<Cause, Gauge>,
    visits: Family<Ended, Gauge>,
    left: Gauge,
    observing: Gauge,
    healthy: Gauge,
}

impl Metrics {
    pub(super) fn new() -> Self {
        let buckets = [0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.5, 2.0, 10.0];
        let metrics = Metrics {
            registry: Registry::with_prefix("nightwright"),
            requests: Family::default(),
            request_s: Histogram::new(buckets),
            acknowledged_s: Histogram::new(buckets),
            held: Family::default(),
            visits: Family::default(),
            left: Gauge::default(),
            observing: Gauge::default(),
            healthy: Gauge::default(),
        };
        metrics.registered()
    }

    fn registered(mut self) -> Self {
        let to = &mut self.registry;
        to.register("http_requests", "Requests answered", self.requests.clone());
        to.register(
            "http_request_seconds",
            "Time to answer a request",
            self.request_s.clone(),
        );
        to.register(
            "report_acknowledged_seconds",
            "Time from a report to its acknowledgement, on disk by then",
            self.acknowledged_s.clone(),
        );
        to.register(
            "held",
            "1 while this cause holds the night",
            self.held.clone(),
        );
        to.register(
            "night_visits",
            "Visits of the night by outcome",
            self.visits.clone(),
        );
        to.register(
            "queue_left",
            "Visits of the queue not handed out",
            self.left.clone(),
        );
        to.register(
            "observing",
            "1 while visits are handed out",
            self.observing.clone(),
        );
        to.register(
            "healthy",
            "1 while the daemon is well",
            self.healthy.clone(),
        );
        self
    }

    pub(super) fn answered(&self, path: &str, status: u16, took: Duration) {
        let label = Answered {
            path: path.to_owned(),
            status,
        };
        self.requests.get_or_create(&label).inc();
        self.request_s.observe(took.as_secs_f64());
    }

    pub(super) fn acknowledged(&self, took: Duration) {
        self.acknowledged_s.observe(took.as_secs_f64());
    }

    fn take(&self, status: &StatusView, healthy: bool) {
        for cause in crate::record::HoldCause::ALL {
            let label = cause.label();
            let on = status.holds.iter().any(|hold| hold.cause == label);
            let cause = Cause {
                cause: label.to_owned(),
            };
            self.held.get_or_create(&cause).set(i64::from(on));
        }
        let counts = status.visits;
        for (outcome, count) in [
            ("done", counts.done),
            ("short", counts.short),
            ("lost", counts.lost),
            ("refused", counts.refused),
            ("unreported", counts.unreported),
        ] {
            let outcome = Ended {
                outcome: outcome.to_owned(),
            };
            self.visits.get_or_create(&outcome).set(i64::from(count));
        }
        self.left
            .set(i64::try_from(status.left).unwrap_or(i64::MAX));
        self.observing.set(i64::from(status.state == "observing"));
        self.healthy.set(i64::from(healthy));
    }
}

/// How the daemon stands
#[utoipa::path(
    get, path = "/v1/status",
    responses(
        (status = 200, description = "How it stands", body = StatusView),
        (status = 429, body = Problem, description = "Busy"),
    )
)]
pub(super) async fn status(State(face): State<Face>) -> Json<StatusView> {
    Json(face.board.status().as_ref().clone())
}

/// The queue in force
#[utoipa::path(
    get, path = "/v1/queue",
    responses(
        (status = 200, description = "Visits in order of time, and who is left out", body = Object),
        (status = 404, body = Problem, description = "No queue has been made yet"),
        (status = 429, body = Problem, description = "Busy"),
    )
)]
pub(super) async fn queue(State(face): State<Face>) -> Result<Json<serde_json::Value>, Problem> {
    let queue = face.board.queue().ok_or_else(Problem::no_queue)?;
    Ok(Json(queue_json(&queue, mode_label(face.mode))))
}

/// Counts for a monitoring system
#[utoipa::path(
    get, path = "/metrics",
    responses(
        (status = 200, description = "OpenMetrics text", content_type = "application/openmetrics-text", body = String),
        (status = 429, body = Problem, description = "Busy"),
    )
)]
pub(super) async fn metrics(State(face): State<Face>) -> Response {
    let healthy = face.board.ill().is_none();
    face.metrics.take(&face.board.status(), healthy);
    let mut text = String::new();
    // Writing into a string cannot fail.
    let _ = encode(&mut text, &face.metrics.registry);
    let kind = "application/openmetrics-text; version=1.0.0; charset=utf-8";
    ([(header::CONTENT_TYPE, kind)], text).into_response()
}

/// Is the daemon well?
#[utoipa::path(
    get, path = "/healthz",
    responses(
        (status = 200, description = "It is well", content_type = "text/plain", body = String),
        (status = 429, body = Problem, description = "Busy"),
        (status = 503, description = "It is not, and why", content_type = "text/plain", body = String),
    )
)]
pub(super) async fn healthz(State(face): State<Face>) -> Response {
    match face.board.ill() {
        None => "well\n".into_response(),
        Some(why) => (StatusCode::SERVICE_UNAVAILABLE, format!("{why}\n")).into_response(),
    }
}

pub(super) async fn description(text: Arc<str>) -> Response {
    let kind = "application/json";
    ([(header::CONTENT_TYPE, kind)], text.to_string()).into_response()
}

pub(super) async fn nowhere() -> Problem {
    Problem::nowhere()
}

pub(super) async fn not_so() -> Problem {
    Problem::not_so()
}

pub(super) async fn style() -> Response {
    (
        [(header::CONTENT_TYPE, "text/css; charset=utf-8")],
        page::STYLE,
    )
        .into_response()
}

/// What every answer says to a browser: nothing is loaded from elsewhere, nothing is guessed.
pub(super) fn guard(headers: &mut HeaderMap) {
    let policy = "default-src 'none'; style-src 'self'; img-src 'self'; base-uri 'none'; \
                  form-action 'none'; frame-ancestors 'none'";
    for (name, value) in [
        ("content-security-policy", policy),
        ("x-content-type-options", "nosniff"),
        ("referrer-policy", "no-referrer"),
        ("cache-control", "no-store"),
    ] {
        headers.insert(
            HeaderName::from_static(name),
            HeaderValue::from_static(value),
        );
    }
}

/// The page for people.
pub(super) async fn page(State(face): State<Face>) -> Html<String> {
    let status = face.board.status();
    let queue = face.board.queue();
    let entries = queue.as_ref().map_or(&[][..], |queue| &queue.entries);
    let clock = |at: crate::time::Utc| at.to_string().get(11..16).unwrap_or("").to_owned();
    let body = html! {
        h1 { "nightwright" }
        @if status.mode == "invented_clock" {
            p { strong { "Rehearsal in invented time: nothing here happens at a telescope." } }
        }
        p { strong { (status.state) } " · night " (status.night.as_deref().unwrap_or("–"))
            " · " (status.now) }
        @for hold in &status.holds {
            p { "Held by " strong { (hold.cause) } ": " (hold.detail) " (since " (hold.since) ")" }
        }
        @if let Some(fault) = &status.settings_refused {
            p { strong { "The settings on disk are refused: " } (fault) }
        }
        h2 { "Now" }
        @match &status.lease {
            Some(lease) => p { strong { (lease.target) } " until " (lease.end) ", held by " (lease.holder) },
            None => p { "No visit is under way." },
        }
        p { "Tonight: " (status.visits.done) " done, " (status.visits.short) " short, "
            (status.visits.lost) " lost, " (status.visits.refused) " refused, "
            (status.visits.unreported) " unreported; " (status.left) " left in the queue." }
        h2 { "Queue" }
        table {
            thead { tr { th { "start" } th { "end" } th { "target" } th { "exposures" } th { "because" } } }
            tbody {
                @for entry in entries {
                    tr {
                        td { (clock(entry.start)) }
                        td { (clock(entry.end)) }
                        td { (entry.subject) }
                        td { (entry.exposures.count) " × " (format!("{:.0}", entry.exposures.seconds)) " s" }
                        td { (entry.because) }
                    }
                }
            }
        }
        p { small { (CAUTION) } }
    };
    Html(page::linked_document(
        "nightwright",
        "/style.css",
        Some(REFRESH_S),
        &body,
    ))
}
