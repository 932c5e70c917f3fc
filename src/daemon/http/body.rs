//! Bodies in and out, and what a refusal looks like.

use std::collections::BTreeMap;

use axum::Json;
use axum::extract::rejection::JsonRejection;
use axum::extract::{FromRequest, FromRequestParts, Path, Request};
use axum::http::request::Parts;
use axum::http::{HeaderValue, StatusCode, header};
use axum::response::{IntoResponse, Response};
use serde::Serialize;
use serde::de::DeserializeOwned;
use utoipa::openapi::{Content, Ref, RefOr, ResponseBuilder};
use utoipa::{IntoResponses, ToSchema};

use crate::night::Refusal;

/// Why a request was not done.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct Problem {
    #[serde(skip)]
    #[schema(ignore)]
    status: u16,
    /// In one word, for programs.
    pub code: &'static str,
    /// In words, for people.
    pub error: String,
    /// When to ask again, UTC, where that is known.
    #[serde(skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>)]
    pub again_at: Option<Box<str>>,
    /// Who holds the visit under way, where that is the reason.
    #[serde(skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>)]
    pub holder: Option<Box<str>>,
    /// The visit that it is about, where there is one.
    #[serde(skip_serializing_if = "Option::is_none")]
    #[schema(value_type = Option<String>)]
    pub visit: Option<Box<str>>,
}

impl Problem {
    fn new(status: StatusCode, code: &'static str, error: impl Into<String>) -> Self {
        Problem {
            status: status.as_u16(),
            code,
            error: error.into(),
            again_at: None,
            holder: None,
            visit: None,
        }
    }

    pub(super) fn busy() -> Self {
        let error = "too much is waiting for the night keeper: try again";
        Problem::new(StatusCode::TOO_MANY_REQUESTS, "busy", error)
    }

    pub(super) fn too_many() -> Self {
        let error = "too many requests at once: try again";
        Problem::new(StatusCode::TOO_MANY_REQUESTS, "too_many", error)
    }

    pub(super) fn too_slow() -> Self {
        let error = "the request took too long; if it was a report, send it again with its key";
        Problem::new(StatusCode::REQUEST_TIMEOUT, "too_slow", error)
    }

    pub(super) fn stopping() -> Self {
        Problem::new(
            StatusCode::SERVICE_UNAVAILABLE,
            "stopping",
            "the night keeper is stopping: send it again when it is back",
        )
    }

    pub(super) fn unauthorised(error: &str) -> Self {
        Problem::new(StatusCode::UNAUTHORIZED, "unauthorised", error)
    }

    pub(super) fn nowhere() -> Self {
        Problem::new(
            StatusCode::NOT_FOUND,
            "nowhere",
            "there is nothing here: see /v1/openapi.json",
        )
    }

    pub(super) fn not_so() -> Self {
        let error = "this method is not for this address: see /v1/openapi.json";
        Problem::new(StatusCode::METHOD_NOT_ALLOWED, "method", error)
    }

    pub(super) fn no_queue() -> Self {
        Problem::new(
            StatusCode::NOT_FOUND,
            "no_queue",
            "no queue has been made yet",
        )
    }

    pub(super) fn invalid(error: impl Into<String>) -> Self {
        Problem::new(StatusCode::UNPROCESSABLE_ENTITY, "invalid", error)
    }

    pub(super) fn no_target(id: &str) -> Self {
        Problem::new(
            StatusCode::NOT_FOUND,
            "no_target",
            format!("no target is called {id:?}"),
        )
    }

    /// An answer of the keeper that does not fit the question: a fault of the program.
    pub(super) fn odd() -> Self {
        Problem::new(
            StatusCode::INTERNAL_SERVER_ERROR,
            "odd",
            "the night keeper gave an odd answer",
        )
    }
}

impl From<&Refusal> for Problem {
    fn from(refusal: &Refusal) -> Self {
        let (status, code) = match refusal {
            Refusal::NoNight => (StatusCode::CONFLICT, "no_night"),
            Refusal::NightStillOpen(_) => (StatusCode::CONFLICT, "night_open"),
            Refusal::NightDone(_) => (StatusCode::CONFLICT, "night_done"),
            Refusal::Held { .. } => (StatusCode::CONFLICT, "held"),
            Refusal::WaitingForWeather => (StatusCode::CONFLICT, "waiting_for_weather"),
            Refusal::NotYet { .. } => (StatusCode::CONFLICT, "not_yet"),
            Refusal::NothingLeft => (StatusCode::CONFLICT, "nothing_left"),
            Refusal::Replanning => (StatusCode::CONFLICT, "replanning"),
            Refusal::Leased { .. } => (StatusCode::CONFLICT, "leased"),
            Refusal::Pushing => (StatusCode::CONFLICT, "pushing"),
            Refusal::ClaimSpent { .. } => (StatusCode::CONFLICT, "claim_spent"),
            Refusal::KeyReused { .. } => (StatusCode::CONFLICT, "key_reused"),
            Refusal::UnknownVisit(_) => (StatusCode::NOT_FOUND, "unknown_visit"),
            Refusal::AlreadyReported { .. } => (StatusCode::CONFLICT, "already_reported"),
            Refusal::LeaseOver(_) => (StatusCode::CONFLICT, "lease_over"),
            Refusal::MustStop { .. } => (StatusCode::CONFLICT, "must_stop"),
            Refusal::ExtensionLimit(_) => (StatusCode::CONFLICT, "extension_limit"),
            Refusal::BadRequest(_) => (StatusCode::UNPROCESSABLE_ENTITY, "invalid"),
            Refusal::BadPlan(_) => (StatusCode::CONFLICT, "bad_plan"),
            Refusal::NotHeld(_) => (StatusCode::CONFLICT, "not_held"),
            Refusal::NotPaused(_) => (StatusCode::CONFLICT, "not_paused"),
            Refusal::NoVisit => (StatusCode::CONFLICT, "no_visit"),
            Refusal::LedgerDown => (StatusCode::SERVICE_UNAVAILABLE, "ledger_down"),
            Refusal::Broken(_) => (StatusCode::SERVICE_UNAVAILABLE, "broken"),
        };
        let mut problem = Problem::new(status, code, refusal.to_string());
        match refusal {
            Refusal::NotYet { opens } => problem.again_at = Some(opens.to_string().into()),
            Refusal::Leased {
                visit,
                holder,
                expires,
            } => {
                problem.visit = Some(visit.0.as_str().into());
                problem.holder = Some(holder.as_str().into());
                problem.again_at = Some(expires.to_string().into());
            }
            Refusal::ClaimSpent { visit }
            | Refusal::KeyReused { visit }
            | Refusal::AlreadyReported { visit, .. }
            | Refusal::MustStop { visit, .. }
            | Refusal::UnknownVisit(visit)
            | Refusal::LeaseOver(visit) => problem.visit = Some(visit.0.as_str().into()),
            _ => {}
        }
        problem
    }
}

impl IntoResponse for Problem {
    fn into_response(self) -> Response {
        let status = StatusCode::from_u16(self.status).unwrap_or(StatusCode::INTERNAL_SERVER_ERROR);
        let mut response = (status, Json(self)).into_response();
        if status == StatusCode::UNAUTHORIZED {
            let scheme = HeaderValue::from_static("Bearer");
            response
                .headers_mut()
                .insert(header::WWW_AUTHENTICATE, scheme);
        }
        response
    }
}

/// What every act may be refused with, for the description.
pub(super) struct Refusals;

impl IntoResponses for Refusals {
    fn responses() -> BTreeMap<String, RefOr<utoipa::openapi::Response>> {
        let problem = || Content::new(Some(Ref::from_schema_name("Problem")));
        [
            ("400", "Not JSON, or an address that cannot be read"),
            ("401", "No token, or the wrong one"),
            ("404", "No such visit or target"),
            ("408", "Too slow"),
            ("409", "Not possible now: see code"),
            ("413", "Too long"),
            ("415", "Not JSON"),
            ("422", "Values that cannot be"),
            ("429", "Busy"),
            (
                "503",
                "The ledger cannot be written, or the daemon is stopping: nothing was done",
            ),
        ]
        .into_iter()
        .map(|(status, description)| {
            let response = ResponseBuilder::new()
                .description(description)
                .content("application/json", problem())
                .build();
            (status.to_owned(), RefOr::T(response))
        })
        .collect()
    }
}

/// The name in an address.
pub(super) struct Id(pub String);

impl<S: Send + Sync> FromRequestParts<S> for Id {
    type Rejection = Problem;

    async fn from_request_parts(parts: &mut Parts, state: &S) -> Result<Self, Problem> {
        match Path::<String>::from_request_parts(parts, state).await {
            Ok(Path(id)) => Ok(Id(id)),
            Err(rejection) => Err(Problem::new(
                StatusCode::BAD_REQUEST,
                "address",
                rejection.body_text(),
            )),
        }
    }
}

/// A body in JSON; what is wrong with it is told as a [`Problem`].
pub(super) struct Body<T>(pub T);

impl<S: Send + Sync, T: DeserializeOwned> FromRequest<S> for Body<T> {
    type Rejection = Problem;

    async fn from_request(request: Request, state: &S) -> Result<Self, Problem> {
        match Json::<T>::from_request(request, state).await {
            Ok(Json(body)) => Ok(Body(body)),
            Err(rejection) => Err(Problem::from(&rejection)),
        }
    }
}

impl From<&JsonRejection> for Problem {
    fn from(rejection: &JsonRejection) -> Self {
        let (status, code) = match rejection {
            JsonRejection::JsonDataError(_) => (StatusCode::UNPROCESSABLE_ENTITY, "invalid"),
            JsonRejection::MissingJsonContentType(_) => {
                (StatusCode::UNSUPPORTED_MEDIA_TYPE, "not_json")
            }
            other if other.status() == StatusCode::PAYLOAD_TOO_LARGE => {
                (StatusCode::PAYLOAD_TOO_LARGE, "too_large")
            }
            _ => (StatusCode::BAD_REQUEST, "not_json"),
        };
        Problem::new(status, code, rejection.body_text())
    }
}
