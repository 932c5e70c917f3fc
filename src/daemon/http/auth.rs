//! Who may change anything.

use axum::extract::{Request, State};
use axum::http::header;
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};

use super::{Face, Problem};

/// Lets a request through that carries the token.
pub(super) async fn need_token(State(face): State<Face>, request: Request, next: Next) -> Response {
    let Some(token) = &face.token else {
        return Problem::unauthorised(
            "this daemon has no token, so that nothing can be changed over HTTP: \
             start it with token_file or NIGHTWRIGHT_TOKEN",
        )
        .into_response();
    };
    let given = request
        .headers()
        .get(header::AUTHORIZATION)
        .and_then(|value| value.to_str().ok())
        .and_then(|value| value.split_once(' '))
        .filter(|(scheme, _)| scheme.eq_ignore_ascii_case("bearer"))
        .map(|(_, token)| token.trim());
    match given {
        Some(given) if token.is(given) => next.run(request).await,
        Some(_) => Problem::unauthorised("the token is wrong").into_response(),
        None => Problem::unauthorised("give the token: Authorization: Bearer …").into_response(),
    }
}
