//! Commands that talk to the running daemon: `status`, and the operator's hand.

use std::net::SocketAddr;
use std::time::Duration;

use serde_json::{Value, json};

use crate::daemon::Token;
use crate::daemon::board::StatusView;
use crate::devices::{chain, client};

use super::{Exit, Global, Trouble, load, output};

/// The daemon answers at once or is in trouble.
const TIMEOUT: Duration = Duration::from_secs(10);

/// Where the daemon is.
#[derive(Debug, clap::Args)]
pub struct Where {
    /// Address of the daemon, instead of the configured one
    #[arg(long, value_name = "ADDR")]
    address: Option<SocketAddr>,
}

/// Ask the running daemon how it stands.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright status
  nightwright status --address 127.0.0.1:7117 --json

Exit code 0: it is well; 1: it holds the night or is unwell; 3: it does not answer.")]
pub struct StatusArgs {
    #[command(flatten)]
    place: Where,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Act on the running daemon: hold, release, skip, pause, resume, urgent, note. Every act is kept in
/// the ledger with who and when.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright tell hold --reason 'visitors in the dome'
  nightwright tell release
  nightwright tell urgent KR0016-56 --until 2026-12-02T02:00:00Z --reason 'flare reported'

A hold stops the handing out of visits; it is no interlock. A release never overrules an unsafe or
silent weather feed.")]
pub struct TellArgs {
    #[command(flatten)]
    place: Where,
    /// Who says so
    #[arg(
        long,
        global = true,
        value_name = "NAME",
        env = "USER",
        default_value = "unknown"
    )]
    by: String,
    #[command(subcommand)]
    act: Act,
}

/// What to do.
#[derive(Debug, clap::Subcommand)]
enum Act {
    /// Hold the night: nothing is handed out, the visit under way is ended
    Hold {
        /// Why
        #[arg(long)]
        reason: String,
    },
    /// End the operator's hold
    Release,
    /// End the visit that runs
    Skip,
    /// Stop a target until it is resumed
    Pause {
        /// The target
        target: String,
        /// Why
        #[arg(long)]
        reason: String,
    },
    /// Let a paused target go on
    Resume {
        /// The target
        target: String,
    },
    /// Want a target observed before an instant
    Urgent {
        /// The target
        target: String,
        /// Until when, UTC like 2026-12-02T02:00:00Z
        #[arg(long, value_name = "UTC")]
        until: String,
        /// Why
        #[arg(long)]
        reason: String,
    },
    /// Leave a remark for the night
    Note {
        /// What
        text: String,
    },
}

impl Act {
    /// Path and body of the request.
    fn request(&self, by: &str) -> (String, Value) {
        match self {
            Act::Hold { reason } => ("/v1/hold".to_owned(), json!({"by": by, "reason": reason})),
            Act::Release => ("/v1/release".to_owned(), json!({"by": by})),
            Act::Skip => ("/v1/skip".to_owned(), json!({"by": by})),
            Act::Pause { target, reason } => (
                format!("/v1/targets/{target}/pause"),
                json!({"by": by, "reason": reason}),
            ),
            Act::Resume { target } => (format!("/v1/targets/{target}/resume"), json!({"by": by})),
            Act::Urgent {
                target,
                until,
                reason,
            } => (
                format!("/v1/targets/{target}/urgent"),
                json!({"by": by, "until": until, "reason": reason}),
            ),
            Act::Note { text } => ("/v1/notes".to_owned(), json!({"by": by, "text": text})),
        }
    }
}

/// Runs `status`.
pub fn status(args: &StatusArgs, global: &Global) -> Result<Exit, Trouble> {
    let daemon = Daemon::find(&args.place, global)?;
    let answer = daemon.send("/v1/status", None)?;
    let status: StatusView = serde_json::from_value(answer.body.clone()).map_err(|error| {
        Trouble::machine(format!(
            "what answers on {} is no such daemon",
            daemon.address
        ))
        .because(&error)
    })?;
    if args.json {
        output::print_json(&answer.body)?;
    } else {
        output::print(&text_of(&status))?;
    }
    let well = status.holds.is_empty() && status.settings_refused.is_none();
    Ok(if well { Exit::Fine } else { Exit::No })
}

/// Runs `tell`.
pub fn tell(args: &TellArgs, global: &Global) -> Result<Exit, Trouble> {
    let daemon = Daemon::find(&args.place, global)?;
    let (path, body) = args.act.request(&args.by);
    let answer = daemon.send(&path, Some(body))?;
    let text = |key: &str| answer.body[key].as_str().unwrap_or_default().to_owned();
    if !answer.accepted {
        let why = text("error");
        return Err(match answer.status {
            401 => Trouble::misuse(why),
            429 | 503 => Trouble::machine(why),
            _ => Trouble::new(Exit::No, why),
        });
    }
    output::print(&text("done"))?;
    let holds: Vec<&str> = answer.body["holds"]
        .as_array()
        .into_iter()
        .flatten()
        .filter_map(Value::as_str)
        .collect();
    if !holds.is_empty() {
        output::print(&format!("held by: {}", holds.join(", ")))?;
    }
    Ok(Exit::Fine)
}

/// The running daemon.
struct Daemon {
    address: SocketAddr,
    token: Option<Token>,
}

struct Answer {
    accepted: bool,
    status: u16,
    body: Value,
}

impl Daemon {
    fn find(place: &Where, global: &Global) -> Result<Self, Trouble> {
        let settings = load::settings(global)?;
        let daemon = &settings.daemon;
        let token = Token::find(&daemon.token_env, daemon.token_file.as_deref())
            .map_err(|error| Trouble::from_error(Exit::Misuse, &error))?;
        Ok(Daemon {
            address: place.address.unwrap_or(daemon.listen),
            token,
        })
    }

    /// Gets, or posts when there is a body.
    fn send(&self, path: &str, body: Option<Value>) -> Result<Answer, Trouble> {
        let url = format!("http://{}{path}", self.address);
        let silent = |error: &dyn std::error::Error| {
            Trouble::machine(format!("no daemon answers on {}", self.address))
                .because(&std::io::Error::other(chain(error)))
                .hint("is `nightwright run` running? --address names another place")
        };
        let client = client(&url, TIMEOUT).map_err(|error| silent(&error))?;
        let request = match body {
            None => client.get(&url),
            Some(body) => {
                let request = client.post(&url).json(&body);
                match &self.token {
                    Some(token) => request.bearer_auth(token.reveal()),
                    None => request,
                }
            }
        };
        let runtime = tokio::runtime::Builder::new_current_thread()
            .enable_all()
            .build()
            .map_err(|error| silent(&error))?;
        runtime.block_on(async {
            let response = request.send().await.map_err(|error| silent(&error))?;
            let status = response.status();
            let body = response.json().await.map_err(|error| silent(&error))?;
            Ok(Answer {
                accepted: status.is_success(),
                status: status.as_u16(),
                body,
            })
        })
    }
}

fn text_of(status: &StatusView) -> String {
    let mut text = String::new();
    if status.mode != "real" {
        text.push_str("rehearsal in invented time\n");
    }
    let night = status.night.as_deref().unwrap_or("–");
    text.push_str(&format!(
        "{} · night {night} · {}\n",
        status.state, status.now
    ));
    if let Some(dark) = &status.darkness {
        text.push_str(&format!("dark from {} to {}\n", dark.start, dark.end));
    }
    for hold in &status.holds {
        let line = format!(
            "held by {} since {}: {}",
            hold.cause, hold.since, hold.detail
        );
        text.push_str(&output::wrapped(&line, 0));
    }
    if let Some(lease) = &status.lease {
        text.push_str(&format!(
            "under way: {} ({}) until {}, held by {}\n",
            lease.target, lease.visit, lease.end, lease.holder
        ));
    }
    if let Some(next) = &status.next {
        text.push_str(&format!("next: {} at {}\n", next.target, next.start));
    }
    let v = status.visits;
    text.push_str(&format!(
        "tonight: {} done, {} short, {} lost, {} refused, {} unreported; {} left in the queue\n",
        v.done, v.short, v.lost, v.refused, v.unreported, status.left
    ));
    for (what, names) in [("paused", &status.paused), ("urgent", &status.urgent)] {
        if !names.is_empty() {
            text.push_str(&output::wrapped(
                &format!("{what}: {}", names.join(", ")),
                0,
            ));
        }
    }
    if let Some(fault) = &status.settings_refused {
        text.push_str(&format!(
            "the settings on disk are refused, the old ones stay: {fault}\n"
        ));
    }
    text
}
