//! The observatory's side: claim, extend, report.

use axum::Json;
use axum::extract::State;
use serde::Deserialize;
use utoipa::ToSchema;

use super::body::{Body, Id};
use super::{Face, Problem, Refusals};
use crate::daemon::board::LeaseView;
use crate::night::{Event, Reply, VisitReport};
use crate::record::{LossCause, Outcome, VisitId};
use crate::time::{Span, Utc};

/// Keys, names and words of others that are kept are no longer, characters.
pub(super) const LONGEST_TEXT: usize = 2000;
const LONGEST_KEY: usize = 200;

/// A claim.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct ClaimBody {
    /// Chosen by the claimer, new for every visit: the same key gets the same visit again.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    key: String,
    /// Who claims, for people.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    holder: String,
}

/// More time for a visit.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct ExtendBody {
    /// Needed from now on, seconds.
    #[schema(exclusive_minimum = 0.0, maximum = 1800.0)]
    seconds: f64,
}

/// How a visit ended.
#[derive(Clone, Copy, Debug, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub(super) enum OutcomeWord {
    /// As planned.
    Done,
    /// Stopped early: credited by what was gathered.
    Short,
    /// Begun and lost: see `cause`.
    Lost,
    /// The observatory said no before it began.
    Refused,
}

/// Why a visit was lost.
#[derive(Clone, Copy, Debug, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub(super) enum CauseWord {
    /// Cloud, wind, rain, humidity.
    Weather,
    /// Telescope, dome, spectrograph.
    Instrument,
    /// A person stopped it.
    Operator,
    /// The star was not found.
    Acquisition,
    /// None of these.
    Other,
}

/// A report.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct ReportBody {
    /// Chosen by the reporter: the same key again changes nothing.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    key: String,
    /// How the visit ended.
    outcome: OutcomeWord,
    /// Why it was lost.
    cause: Option<CauseWord>,
    /// First shutter opening, RFC 3339.
    #[schema(format = DateTime)]
    exposing_start: Option<String>,
    /// Last read-out, RFC 3339.
    #[schema(format = DateTime)]
    exposing_end: Option<String>,
    /// Open-shutter time, seconds.
    #[schema(minimum = 0.0, maximum = 86400.0)]
    exposed_s: Option<f64>,
    /// Signal-to-noise reached.
    #[schema(minimum = 0.0)]
    snr: Option<f64>,
    /// Velocity error, m/s.
    #[schema(minimum = 0.0)]
    rv_error_m_s: Option<f64>,
    /// Anything else.
    #[serde(default)]
    #[schema(max_length = 2000, pattern = r"^[^\x00-\x1F\x7F-\x9F]*$")]
    note: String,
}

/// The end of a lease.
#[derive(Debug, serde::Serialize, ToSchema)]
pub(super) struct Extended {
    /// When the lease runs out now, UTC.
    expires: String,
}

/// A visit as it stands.
#[derive(Debug, serde::Serialize, ToSchema)]
pub(super) struct Reported {
    /// Its name.
    visit: String,
    /// `done`, `short`, `lost`, `refused` or `unreported`.
    outcome: String,
    /// Share of a full visit that it counts for.
    credit: f64,
    /// It was known already and nothing changed.
    again: bool,
}

pub(super) fn short(text: &str, name: &str, longest: usize) -> Result<(), Problem> {
    let length = text.chars().count();
    if length > longest {
        return Err(Problem::invalid(format!(
            "{name}: at most {longest} characters, found {length}"
        )));
    }
    if text
        .chars()
        .any(|c| c.is_control() && c != '\n' && c != '\t')
    {
        return Err(Problem::invalid(format!("{name}: no control characters")));
    }
    Ok(())
}

pub(super) fn needed(text: &str, name: &str, longest: usize) -> Result<(), Problem> {
    if text.trim().is_empty() {
        return Err(Problem::invalid(format!("{name}: must not be empty")));
    }
    short(text, name, longest)
}

/// Claim the next visit
///
/// The visit is the claimer's until it reports it or the lease runs out.
#[utoipa::path(
    post,
    path = "/v1/visits/claim",
    request_body = ClaimBody,
    security(("token" = [])),
    responses(
        (status = 200, description = "The visit to carry out", body = LeaseView),
        Refusals,
    )
)]
pub(super) async fn claim(
    State(face): State<Face>,
    Body(body): Body<ClaimBody>,
) -> Result<Json<LeaseView>, Problem> {
    needed(&body.key, "key", LONGEST_KEY)?;
    needed(&body.holder, "holder", LONGEST_KEY)?;
    let event = Event::Claim {
        key: body.key,
        holder: body.holder,
    };
    match face.ask(event).await? {
        Reply::Lease(lease) => {
            // The board was written before the answer: it shows this lease with its star.
            let shown = face.board.status();
            let view = shown
                .lease
                .clone()
                .filter(|view| view.visit == lease.visit.0);
            let view = view.unwrap_or_else(|| crate::daemon::board::lease_view(&lease, None));
            Ok(Json(view))
        }
        _ => Err(Problem::odd()),
    }
}

/// Ask for more time for a visit
#[utoipa::path(
    post,
    path = "/v1/visits/{id}/extend",
    params(("id" = String, Path, description = "The visit's name")),
    request_body = ExtendBody,
    security(("token" = [])),
    responses(
        (status = 200, description = "The lease's new end", body = Extended),
        Refusals,
    )
)]
pub(super) async fn extend(
    State(face): State<Face>,
    Id(id): Id,
    Body(body): Body<ExtendBody>,
) -> Result<Json<Extended>, Problem> {
    let event = Event::Extend {
        visit: VisitId(id),
        seconds: body.seconds,
    };
    match face.ask(event).await? {
        Reply::Extended(until) => Ok(Json(Extended {
            expires: until.to_string(),
        })),
        _ => Err(Problem::odd()),
    }
}

/// Report how a visit ended
///
/// Once this answers 200, the report is on disk. Reports may come late, and twice: the same key
/// counts once. A report for a visit whose lease ran out settles it, also after its night.
#[utoipa::path(
    post,
    path = "/v1/visits/{id}/report",
    params(("id" = String, Path, description = "The visit's name")),
    request_body = ReportBody,
    security(("token" = [])),
    responses(
        (status = 200, description = "The visit as it stands", body = Reported),
        Refusals,
    )
)]
pub(super) async fn report(
    State(face): State<Face>,
    Id(id): Id,
    Body(body): Body<ReportBody>,
) -> Result<Json<Reported>, Problem> {
    needed(&body.key, "key", LONGEST_KEY)?;
    short(&body.note, "note", LONGEST_TEXT)?;
    let began = std::time::Instant::now();
    let report = VisitReport {
        outcome: outcome(body.outcome, body.cause)?,
        exposing: span(body.exposing_start.as_deref(), body.exposing_end.as_deref())?,
        exposed_s: body.exposed_s,
        snr: body.snr,
        rv_error_m_s: body.rv_error_m_s,
        note: body.note,
    };
    let event = Event::Report {
        visit: VisitId(id),
        key: body.key,
        report,
    };
    match face.ask(event).await? {
        Reply::Reported { visit, again } => {
            face.metrics.acknowledged(began.elapsed());
            Ok(Json(Reported {
                visit: visit.id.0.clone(),
                outcome: word(visit.outcome).to_owned(),
                credit: visit.credit,
                again,
            }))
        }
        _ => Err(Problem::odd()),
    }
}

fn outcome(word: OutcomeWord, cause: Option<CauseWord>) -> Result<Outcome, Problem> {
    match (word, cause) {
        (OutcomeWord::Lost, cause) => Ok(Outcome::Lost(match cause {
            Some(CauseWord::Weather) => LossCause::Weather,
            Some(CauseWord::Instrument) => LossCause::Instrument,
            Some(CauseWord::Operator) => LossCause::Operator,
            Some(CauseWord::Acquisition) => LossCause::Acquisition,
            Some(CauseWord::Other) | None => LossCause::Other,
        })),
        (_, Some(_)) => Err(Problem::invalid("cause: only a lost visit has one")),
        (OutcomeWord::Done, None) => Ok(Outcome::Done),
        (OutcomeWord::Short, None) => Ok(Outcome::Short),
        (OutcomeWord::Refused, None) => Ok(Outcome::Refused),
    }
}

fn span(start: Option<&str>, end: Option<&str>) -> Result<Option<Span>, Problem> {
    let instant = |text: &str, name: &str| {
        Utc::parse(text).map_err(|error| Problem::invalid(format!("{name}: {error}")))
    };
    match (start, end) {
        (None, None) => Ok(None),
        (Some(start), Some(end)) => {
            let start = instant(start, "exposing_start")?;
            let end = instant(end, "exposing_end")?;
            if end < start {
                return Err(Problem::invalid("exposing_end lies before exposing_start"));
            }
            Ok(Some(Span::new(start, end)))
        }
        _ => Err(Problem::invalid(
            "give both exposing_start and exposing_end, or neither",
        )),
    }
}

fn word(outcome: Outcome) -> &'static str {
    match outcome {
        Outcome::Done => "done",
        Outcome::Short => "short",
        Outcome::Lost(_) => "lost",
        Outcome::Refused => "refused",
        Outcome::Unreported => "unreported",
    }
}
