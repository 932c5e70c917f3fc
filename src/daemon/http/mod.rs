//! The daemon's face over HTTP: `/v1/…` in JSON, a page for people, `/metrics`, `/healthz`.

mod acts;
mod auth;
mod body;
mod looks;
mod visits;

use std::future::Future;
use std::sync::Arc;
use std::sync::mpsc::{SyncSender, TrySendError};
use std::time::Duration;

use axum::Router;
use axum::extract::DefaultBodyLimit;
use axum::middleware;
use axum::response::Response;
use tokio::net::TcpListener;
use tokio::sync::{Semaphore, oneshot};
use utoipa::OpenApi;
use utoipa::openapi::security::{HttpAuthScheme, HttpBuilder, SecurityScheme};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::board::Board;
use super::message::Message;
use super::token::Token;
use crate::night::{Event, Refusal, Reply, RunMode};
pub use body::Problem;
use body::Refusals;

/// Nothing that is said to the daemon is longer.
const LONGEST_BODY: usize = 16 * 1024;
/// A request is answered in this time or not at all.
const TIME_LIMIT: Duration = Duration::from_secs(10);
/// Requests answered at the same time; further ones are turned away.
const AT_ONCE: usize = 512;

/// What every handler gets.
#[derive(Clone)]
pub(super) struct Face {
    inbox: SyncSender<Message>,
    pub(super) board: Arc<Board>,
    token: Option<Token>,
    mode: RunMode,
    gate: Arc<Semaphore>,
    metrics: Arc<looks::Metrics>,
}

impl Face {
    pub(super) fn new(
        inbox: SyncSender<Message>,
        board: Arc<Board>,
        token: Option<Token>,
        mode: RunMode,
    ) -> Self {
        Face {
            inbox,
            metrics: Arc::new(looks::Metrics::new()),
            board,
            token,
            mode,
            gate: Arc::new(Semaphore::new(AT_ONCE)),
        }
    }

    /// Asks the keeper and waits for its answer: what it says it did is on disk.
    async fn ask(&self, event: Event) -> Result<Reply, Problem> {
        let (answer, told) = oneshot::channel();
        match self.inbox.try_send(Message::Ask(event, answer)) {
            Ok(()) => {}
            Err(TrySendError::Full(_)) => return Err(Problem::busy()),
            Err(TrySendError::Disconnected(_)) => return Err(Problem::stopping()),
        }
        match told.await {
            Ok(Ok(reply)) => Ok(reply),
            Ok(Err(refusal)) => Err(refused(&refusal)),
            Err(_) => Err(Problem::stopping()),
        }
    }
}

/// What a refusal is over HTTP.
fn refused(refusal: &Refusal) -> Problem {
    Problem::from(refusal)
}

#[derive(OpenApi)]
#[openapi(
    info(
        title = "nightwright",
        description = "Choosing and recording the visits of a night. This program chooses \
observations; it does not protect people, the dome or the optics."
    ),
    components(schemas(Problem)),
    modifiers(&BearerToken)
)]
struct Description;

struct BearerToken;

impl utoipa::Modify for BearerToken {
    fn modify(&self, openapi: &mut utoipa::openapi::OpenApi) {
        let scheme = HttpBuilder::new().scheme(HttpAuthScheme::Bearer).build();
        let components = openapi.components.get_or_insert_with(Default::default);
        components.add_security_scheme("token", SecurityScheme::Http(scheme));
    }
}

fn router(face: Face) -> Router {
    let acting = OpenApiRouter::new()
        .routes(routes!(visits::claim))
        .routes(routes!(visits::extend))
        .routes(routes!(visits::report))
        .routes(routes!(acts::hold))
        .routes(routes!(acts::release))
        .routes(routes!(acts::skip))
        .routes(routes!(acts::pause))
        .routes(routes!(acts::resume))
        .routes(routes!(acts::urgent))
        .routes(routes!(acts::note))
        .route_layer(middleware::from_fn_with_state(
            face.clone(),
            auth::need_token,
        ));
    let looking = OpenApiRouter::new()
        .routes(routes!(looks::status))
        .routes(routes!(looks::queue))
        .routes(routes!(looks::metrics))
        .routes(routes!(looks::healthz));
    let (routes, description) = OpenApiRouter::with_openapi(Description::openapi())
        .merge(acting)
        .merge(looking)
        .split_for_parts();
    let description: Arc<str> = description
        .to_pretty_json()
        .unwrap_or_else(|_| "{}".to_owned())
        .into();
    routes
        .route("/", axum::routing::get(looks::page))
        .route("/style.css", axum::routing::get(looks::style))
        .route(
            "/v1/openapi.json",
            axum::routing::get(move || looks::description(Arc::clone(&description))),
        )
        .fallback(looks::nowhere)
        .method_not_allowed_fallback(looks::not_so)
        .layer(middleware::from_fn_with_state(face.clone(), limits))
        .layer(DefaultBodyLimit::max(LONGEST_BODY))
        .with_state(face)
}

/// Turns requests away beyond a number, ends those that take too long, counts them all.
async fn limits(
    axum::extract::State(face): axum::extract::State<Face>,
    request: axum::extract::Request,
    next: middleware::Next,
) -> Response {
    use axum::response::IntoResponse;
    let Ok(_permit) = face.gate.clone().try_acquire_owned() else {
        return Problem::too_many().into_response();
    };
    let path = request
        .extensions()
        .get::<axum::extract::MatchedPath>()
        .map_or_else(|| "other".to_owned(), |path| path.as_str().to_owned());
    let began = std::time::Instant::now();
    let mut response = match tokio::time::timeout(TIME_LIMIT, next.run(request)).await {
        Ok(response) => response,
        Err(_) => Problem::too_slow().into_response(),
    };
    face.metrics
        .answered(&path, response.status().as_u16(), began.elapsed());
    looks::guard(response.headers_mut());
    response
}

/// Serves until `closing` is over.
pub(super) async fn serve(
    listener: TcpListener,
    face: Face,
    closing: impl Future<Output = ()> + Send + 'static,
) {
    let served = axum::serve(listener, router(face)).with_graceful_shutdown(closing);
    if let Err(error) = served.await {
        tracing::error!(%error, "the HTTP face has ended");
    }
}
