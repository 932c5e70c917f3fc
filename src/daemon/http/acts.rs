//! The operator's hand. Every act is a fact in the ledger, with who and when.

use axum::Json;
use axum::extract::State;
use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use super::body::{Body, Id};
use super::visits::{LONGEST_TEXT, needed, short};
use super::{Face, Problem, Refusals};
use crate::catalogue::TargetId;
use crate::night::{Event, Reply};
use crate::time::Utc;

const LONGEST_NAME: usize = 200;

/// Who does it, and why.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct WithReason {
    /// Who, for the record.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    by: String,
    /// Why, for the record.
    #[schema(
        min_length = 1,
        max_length = 2000,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    reason: String,
}

/// Who does it.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct ByWhom {
    /// Who, for the record.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    by: String,
}

/// A star that must be observed soon.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct UrgentBody {
    /// Who, for the record.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    by: String,
    /// Why, for the record.
    #[schema(
        min_length = 1,
        max_length = 2000,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    reason: String,
    /// Until when it is urgent, RFC 3339.
    #[schema(format = DateTime)]
    until: String,
}

/// A remark for the night.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub(super) struct NoteBody {
    /// Who, for the record.
    #[schema(
        min_length = 1,
        max_length = 200,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    by: String,
    /// What.
    #[schema(
        min_length = 1,
        max_length = 2000,
        pattern = r"^[^\x00-\x1F\x7F-\x9F]*[!-~][^\x00-\x1F\x7F-\x9F]*$"
    )]
    text: String,
}

/// It was done and is on record.
#[derive(Debug, Serialize, ToSchema)]
pub(super) struct Done {
    /// What was done, in words.
    done: String,
    /// Causes that still hold the night.
    holds: Vec<String>,
}

impl Face {
    async fn act(&self, event: Event, done: &str) -> Result<Json<Done>, Problem> {
        let reply = self.ask(event).await?;
        let done = match reply {
            Reply::Skipped(visit) => format!("visit {visit} will be ended"),
            _ => done.to_owned(),
        };
        let status = self.board.status();
        let holds = status.holds.iter().map(|hold| hold.cause.clone());
        Ok(Json(Done {
            done,
            holds: holds.collect(),
        }))
    }
}

fn known(id: &str) -> Result<TargetId, Problem> {
    let sound = |c: char| c.is_ascii_alphanumeric() || "-_.+".contains(c);
    if id.is_empty() || id.len() > LONGEST_NAME || !id.chars().all(sound) {
        return Err(Problem::no_target(id));
    }
    Ok(TargetId::new(id))
}

/// Hold the night
///
/// Nothing is handed out until it is released; the visit under way is ended.
#[utoipa::path(
    post, path = "/v1/hold", request_body = WithReason, security(("token" = [])),
    responses(
        (status = 200, description = "Held", body = Done),
        Refusals,
    )
)]
pub(super) async fn hold(
    State(face): State<Face>,
    Body(body): Body<WithReason>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    needed(&body.reason, "reason", LONGEST_TEXT)?;
    let event = Event::Hold {
        by: body.by,
        reason: body.reason,
    };
    face.act(event, "held").await
}

/// End the operator's hold
///
/// Other causes stay: an unsafe or silent weather feed cannot be overruled.
#[utoipa::path(
    post, path = "/v1/release", request_body = ByWhom, security(("token" = [])),
    responses(
        (status = 200, description = "The operator holds nothing any more", body = Done),
        Refusals,
    )
)]
pub(super) async fn release(
    State(face): State<Face>,
    Body(body): Body<ByWhom>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    face.act(Event::Release { by: body.by }, "released").await
}

/// End the visit that runs
#[utoipa::path(
    post, path = "/v1/skip", request_body = ByWhom, security(("token" = [])),
    responses(
        (status = 200, description = "It will be ended", body = Done),
        Refusals,
    )
)]
pub(super) async fn skip(
    State(face): State<Face>,
    Body(body): Body<ByWhom>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    face.act(Event::Skip { by: body.by }, "skipped").await
}

/// Stop a target until it is resumed
#[utoipa::path(
    post, path = "/v1/targets/{id}/pause", request_body = WithReason, security(("token" = [])),
    params(("id" = String, Path, description = "The target")),
    responses(
        (status = 200, description = "Paused", body = Done),
        Refusals,
    )
)]
pub(super) async fn pause(
    State(face): State<Face>,
    Id(id): Id,
    Body(body): Body<WithReason>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    needed(&body.reason, "reason", LONGEST_TEXT)?;
    let event = Event::Pause {
        target: face.target(&id)?,
        by: body.by,
        reason: body.reason,
    };
    face.act(event, "paused").await
}

/// Let a paused target go on
#[utoipa::path(
    post, path = "/v1/targets/{id}/resume", request_body = ByWhom, security(("token" = [])),
    params(("id" = String, Path, description = "The target")),
    responses(
        (status = 200, description = "Resumed", body = Done),
        Refusals,
    )
)]
pub(super) async fn resume(
    State(face): State<Face>,
    Id(id): Id,
    Body(body): Body<ByWhom>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    let event = Event::Resume {
        target: known(&id)?,
        by: body.by,
    };
    face.act(event, "resumed").await
}

/// Want a target observed soon
#[utoipa::path(
    post, path = "/v1/targets/{id}/urgent", request_body = UrgentBody, security(("token" = [])),
    params(("id" = String, Path, description = "The target")),
    responses(
        (status = 200, description = "It goes first, where it can be observed", body = Done),
        Refusals,
    )
)]
pub(super) async fn urgent(
    State(face): State<Face>,
    Id(id): Id,
    Body(body): Body<UrgentBody>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    needed(&body.reason, "reason", LONGEST_TEXT)?;
    let until =
        Utc::parse(&body.until).map_err(|error| Problem::invalid(format!("until: {error}")))?;
    let event = Event::Urgent {
        target: face.target(&id)?,
        until,
        by: body.by,
        reason: body.reason,
    };
    face.act(event, "urgent").await
}

/// Leave a remark for the night
#[utoipa::path(
    post, path = "/v1/notes", request_body = NoteBody, security(("token" = [])),
    responses(
        (status = 200, description = "Kept", body = Done),
        Refusals,
    )
)]
pub(super) async fn note(
    State(face): State<Face>,
    Body(body): Body<NoteBody>,
) -> Result<Json<Done>, Problem> {
    needed(&body.by, "by", LONGEST_NAME)?;
    needed(&body.text, "text", LONGEST_TEXT)?;
    short(&body.text, "text", LONGEST_TEXT)?;
    let event = Event::Note {
        by: body.by,
        text: body.text,
    };
    face.act(event, "noted").await
}

impl Face {
    /// A target of the settings in force.
    fn target(&self, id: &str) -> Result<TargetId, Problem> {
        let target = known(id)?;
        if self.board.knows(id) {
            Ok(target)
        } else {
            Err(Problem::no_target(id))
        }
    }
}
