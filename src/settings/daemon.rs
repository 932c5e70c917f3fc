//! `night.toml`: the daemon.

// The address as a plain value; nothing here opens a socket.
use core::net::SocketAddr;

use super::defaults;
use super::feed::{self, Feed, RecordedWeather};
use super::range::Range;
use super::section::Section;

/// How the daemon works. Relative paths start from the working directory, not from the
/// configuration folder, which a service may not write to.
#[derive(Clone, Debug, PartialEq)]
pub struct DaemonSettings {
    /// File of the ledger.
    pub ledger: String,
    /// Folder of the night reports.
    pub reports: String,
    /// Folder in which the queue of the night is published.
    pub queue: String,
    /// Address to listen on.
    pub listen: SocketAddr,
    /// File that holds the bearer token; `None`: the environment alone.
    pub token_file: Option<String>,
    /// Name of the environment variable that holds it.
    pub token_env: String,
    /// Address told of holds, releases, closed nights and trouble.
    pub webhook: Option<String>,
    /// A lease runs out so long after the planned end of its visit, seconds.
    pub lease_margin_s: f64,
    /// Where the weather comes from; `None`: nowhere, so that the daemon stays held.
    pub feed: Option<Feed>,
    /// How a recorded weather file is read; `None`: none can be.
    pub recorded_weather: Option<RecordedWeather>,
    /// Program that carries out each visit; `None`: the observatory claims visits over HTTP.
    pub push: Option<Push>,
}

/// A program run once per visit: the visit as JSON on its input, the outcome on its output.
#[derive(Clone, Debug, PartialEq)]
pub struct Push {
    /// Program and arguments; no shell is involved.
    pub command: Vec<String>,
    /// How long it may run beyond the planned length of its visit, seconds.
    pub margin_s: f64,
    /// Time from being asked to stop to being killed, seconds.
    pub grace_s: f64,
}

pub(super) fn read(root: &Section<'_>) -> Option<DaemonSettings> {
    let feed = feed::read_feed(root);
    let recorded_weather = feed::read_recorded(root);
    let push = root.section("push").map(push);
    let Some(section) = root.section("daemon") else {
        if !root.has("daemon") {
            root.wrong("daemon", "the section [daemon] is missing");
        }
        return None;
    };
    let daemon = DaemonSettings {
        ledger: section.text_or("ledger", defaults::LEDGER),
        reports: section.text_or("reports", defaults::REPORTS),
        queue: section.text_or("queue", defaults::QUEUE),
        listen: listen(&section),
        token_file: section.text("token_file"),
        token_env: token_env(&section),
        webhook: section
            .has("webhook")
            .then(|| feed::need_url(&section, "webhook")),
        lease_margin_s: section.number_or(
            "lease_margin_s",
            defaults::LEASE_MARGIN_S,
            Range::of(1.0, 14_400.0, "seconds"),
        ),
        feed,
        recorded_weather,
        push,
    };
    if section.has("token") {
        section.wrong_with(
            "token",
            "a token has no place in a file that is shown around",
            Some("put it into a file of its own, named by token_file".to_owned()),
        );
    }
    section.finish();
    Some(daemon)
}

fn listen(section: &Section<'_>) -> SocketAddr {
    let fallback = SocketAddr::from(([127, 0, 0, 1], 7117));
    let text = section.text_or("listen", defaults::LISTEN);
    text.parse().unwrap_or_else(|_| {
        section.wrong(
            "listen",
            format!(
                "found \"{text}\", must be address and port like {}",
                defaults::LISTEN
            ),
        );
        fallback
    })
}

fn token_env(section: &Section<'_>) -> String {
    let name = section.text_or("token_env", defaults::TOKEN_ENV);
    let sound = |c: char| c.is_ascii_alphanumeric() || c == '_';
    if !name.chars().all(sound) {
        section.wrong(
            "token_env",
            format!("found \"{name}\", must be the name of an environment variable"),
        );
    }
    name
}

fn push(section: Section<'_>) -> Push {
    let push = Push {
        command: section.texts("command"),
        margin_s: section.number_or(
            "margin_s",
            defaults::PUSH_MARGIN_S,
            Range::of(0.0, 14_400.0, "seconds"),
        ),
        grace_s: section.number_or(
            "grace_s",
            defaults::PUSH_GRACE_S,
            Range::of(0.0, 600.0, "seconds"),
        ),
    };
    if push.command.is_empty() {
        section.wrong("command", "must be a list: a program, then its arguments");
    }
    section.finish();
    push
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn default_address_is_sound_and_loopback() {
        let address: SocketAddr = defaults::LISTEN.parse().unwrap();
        assert!(address.ip().is_loopback());
    }
}
