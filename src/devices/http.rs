//! Requests that end: in time, within a size, and with nothing followed elsewhere.

use std::error::Error;
use std::time::Duration;

use reqwest::{Client, RequestBuilder, Response, StatusCode, redirect};
use thiserror::Error;

use crate::night::FeedFault;

/// A client could not be made: the system's store of certificates cannot be read.
#[derive(Debug, Error)]
#[error("cannot prepare requests to {url}: {detail}")]
pub struct ClientFault {
    /// Where to.
    pub url: String,
    /// What went wrong, with its causes.
    pub detail: String,
}

/// A client for one address, whose requests take so long at most, from connecting to the last byte.
///
/// No redirect is followed: a loop cannot catch the night keeper, and a settings file names the
/// place that is really asked. Plain HTTP goes straight to its host and needs no certificates, so
/// that a weather station in the same rack works on a machine without a certificate store; HTTPS
/// uses the system's certificates and the environment's proxy.
///
/// # Errors
/// [`ClientFault`].
pub fn client(url: &str, timeout: Duration) -> Result<Client, ClientFault> {
    // The first caller installs it; where another part of the program did, theirs is as good.
    let _ = rustls::crypto::ring::default_provider().install_default();
    let builder = Client::builder()
        .redirect(redirect::Policy::none())
        .connect_timeout(timeout)
        .timeout(timeout)
        .pool_max_idle_per_host(1)
        .user_agent(concat!("nightwright/", env!("CARGO_PKG_VERSION")));
    let builder = if url.starts_with("https:") {
        builder
    } else {
        builder.no_proxy().tls_certs_only([])
    };
    builder.build().map_err(|error| ClientFault {
        url: url.to_owned(),
        detail: chain(&error),
    })
}

/// An error with its causes on one line.
pub fn chain(error: &dyn Error) -> String {
    let mut text = error.to_string();
    let mut next = error.source();
    while let Some(cause) = next {
        text.push_str(": ");
        text.push_str(&cause.to_string());
        next = cause.source();
    }
    text
}

/// Sends a request and reads its answer, which must be HTTP 200 and at most so many bytes.
///
/// # Errors
/// [`FeedFault::Unreachable`] when no whole answer came in time, [`FeedFault::Malformed`] when it
/// was none of a feed.
pub(super) async fn body(request: RequestBuilder, most: usize) -> Result<Vec<u8>, FeedFault> {
    let mut response = request.send().await.map_err(unreachable)?;
    accept(&response)?;
    let mut body = Vec::new();
    while let Some(piece) = response.chunk().await.map_err(unreachable)? {
        if body.len() + piece.len() > most {
            return Err(FeedFault::Malformed(format!("more than {most} bytes")));
        }
        body.extend_from_slice(&piece);
    }
    Ok(body)
}

fn accept(response: &Response) -> Result<(), FeedFault> {
    let status = response.status();
    if status == StatusCode::OK {
        return Ok(());
    }
    Err(FeedFault::Malformed(if status.is_redirection() {
        format!("HTTP {status} sends elsewhere, which is not followed: name the final address")
    } else {
        format!("HTTP {status}")
    }))
}

fn unreachable(error: reqwest::Error) -> FeedFault {
    // The address may hold a key, and the settings name it already.
    let error = error.without_url();
    FeedFault::Unreachable(if error.is_timeout() {
        "no whole answer in time".to_owned()
    } else {
        chain(&error)
    })
}

/// The beginning of an answer, for a message: printable and short.
pub(super) fn beginning(body: &[u8]) -> String {
    const SHOWN: usize = 40;
    let text = String::from_utf8_lossy(body.get(..4 * SHOWN).unwrap_or(body));
    text.chars()
        .filter(|c| !c.is_control())
        .take(SHOWN)
        .collect()
}
