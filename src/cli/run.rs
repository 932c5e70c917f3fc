//! `run`: the daemon.

use std::hash::{DefaultHasher, Hash, Hasher};
use std::net::SocketAddr;
use std::path::{Path, PathBuf};

use tracing_subscriber::EnvFilter;

use crate::daemon::{self, DaemonError, Options, Weather};
use crate::settings::{self, Settings};
use crate::time::Utc;

use super::{Exit, Global, Trouble, load, output};

/// Fastest invented clock: a night in a second is more than any observatory can follow.
const FASTEST: f64 = 100_000.0;

/// Keep the nights: plan, hand out visits, hold for weather, remember everything. Runs until SIGTERM
/// or SIGINT; SIGHUP or a changed file brings new settings in.
#[derive(Debug, clap::Args)]
#[command(after_help = "\
This program chooses observations. It does not protect people, the dome or the optics: rain, wind,
sun and motion interlocks are the observatory's own, in hardware, tested by qualified people, and
they win. Telescope and dome move without warning under robotic control: lock them out before
anybody goes near. Local rules come first.

The token for everything that changes state is the first line of daemon.token_file, or the variable
NIGHTWRIGHT_TOKEN. It is never an argument, since arguments can be seen by others.

Example:
  NIGHTWRIGHT_TOKEN=$(cat token) nightwright run --config /etc/nightwright
  nightwright run --clock 2026-12-01T17:00:00Z,60 --ledger rehearsal.sqlite   # invented time")]
pub struct Args {
    /// Ledger, instead of the configured one
    #[arg(long, value_name = "FILE")]
    ledger: Option<PathBuf>,
    /// Address to listen on, instead of the configured one (127.0.0.1:7117 unless it says otherwise)
    #[arg(long, value_name = "ADDR")]
    listen: Option<SocketAddr>,
    /// Rehearse in invented time: from START on, SPEED times as fast as real time (left out: 1).
    /// The weather is drawn from the climate. After a restart it goes on where the record ends
    #[arg(long, value_name = "START[,SPEED]", value_parser = clock)]
    clock: Option<(Utc, f64)>,
    /// With --clock: ask the configured weather feed instead of drawing weather
    #[arg(long, requires = "clock")]
    live_weather: bool,
    /// With --clock: seed of the drawn weather
    #[arg(long, value_name = "N", default_value_t = 1)]
    seed: u64,
}

fn clock(text: &str) -> Result<(Utc, f64), String> {
    let (start, speed) = text.split_once(',').unwrap_or((text, "1"));
    let start = Utc::parse(start).map_err(|error| error.to_string())?;
    let speed: f64 = speed
        .trim()
        .parse()
        .map_err(|_| format!("the speed {speed:?} is no number"))?;
    if speed > 0.0 && speed <= FASTEST {
        Ok((start, speed))
    } else {
        Err(format!("the speed must be above 0 and at most {FASTEST}"))
    }
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    log_to_stderr();
    let settings = load::settings(global)?;
    let listen = args.listen.unwrap_or(settings.daemon.listen);
    let ledger = args
        .ledger
        .clone()
        .unwrap_or_else(|| PathBuf::from(&settings.daemon.ledger));
    let (to_load, to_look) = (global.config.clone(), global.config.clone());
    let options = Options {
        settings,
        load: Box::new(move || reloaded(&to_load)),
        fingerprint: Box::new(move || fingerprint(&to_look)),
        ledger,
        listen,
        clock: args.clock,
        weather: match (args.clock, args.live_weather) {
            (Some(_), false) => Weather::Invented(args.seed),
            _ => Weather::Feed,
        },
        ready: Box::new(|address| {
            // Nobody may be there to read it: the log says so too.
            let _ = output::print(&format!("listening on http://{address}"));
        }),
    };
    daemon::run(options)?;
    Ok(Exit::Fine)
}

fn log_to_stderr() {
    let filter =
        EnvFilter::try_from_env("NIGHTWRIGHT_LOG").unwrap_or_else(|_| EnvFilter::new("info"));
    let logger = tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_writer(std::io::stderr)
        .with_ansi(false)
        .with_target(false);
    // A logger that is there already, as in a test, does as well.
    let _ = logger.try_init();
}

fn reloaded(folder: &Path) -> Result<Settings, String> {
    let sources = load::sources(folder).map_err(|trouble| trouble.to_string())?;
    settings::check(&sources).map_err(|faults| load::trouble_of(&faults).to_string())
}

/// Changes when a file of the folder is written, added or taken away.
fn fingerprint(folder: &Path) -> u64 {
    let mut seen = Vec::new();
    for entry in std::fs::read_dir(folder).into_iter().flatten().flatten() {
        let Ok(data) = entry.metadata() else { continue };
        seen.push((entry.file_name(), data.len(), data.modified().ok()));
    }
    seen.sort();
    let mut hasher = DefaultHasher::new();
    seen.hash(&mut hasher);
    hasher.finish()
}

impl From<DaemonError> for Trouble {
    fn from(error: DaemonError) -> Self {
        match error {
            DaemonError::Ledger(error) => error.into(),
            DaemonError::Reading(fault) => fault.into(),
            DaemonError::Token(error) => Trouble::from_error(Exit::Misuse, &error),
            error @ DaemonError::Open(_) => Trouble::from_error(Exit::Misuse, &error).hint(
                "give a token (daemon.token_file or NIGHTWRIGHT_TOKEN), or listen on 127.0.0.1",
            ),
            error @ DaemonError::Listen { .. } => Trouble::from_error(Exit::Machine, &error)
                .hint("is another daemon running there? `nightwright status` asks it"),
            other => Trouble::from_error(Exit::Machine, &other),
        }
    }
}
