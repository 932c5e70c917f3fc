//! `log`: visits added, listed, amended and imported by hand.

mod change;
mod import;
mod list;

use clap::{Subcommand, ValueEnum};

use super::{Exit, Global, Trouble};
use crate::record::{LossCause, Outcome};
use crate::time::Utc;

/// Add, list, amend or import visits by hand. Nothing is ever overwritten: an amendment is a new
/// word on a visit that stands in place of the one before, with who said it and why.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright log add KR0016-56 --at 2026-12-01T23:30:00Z --exposure-s 900 --snr 85
  nightwright log list --target KR0016-56 --since 2026-11-01
  nightwright log amend 2026-12-01-0003 --outcome lost --cause weather --why 'cloud in the spectrum'
  nightwright log import history.csv --dry-run")]
pub struct Args {
    #[command(subcommand)]
    action: Action,
}

#[derive(Debug, Subcommand)]
enum Action {
    Add(change::AddArgs),
    Amend(change::AmendArgs),
    List(list::ListArgs),
    Import(import::ImportArgs),
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    match &args.action {
        Action::Add(args) => change::add(args, global),
        Action::Amend(args) => change::amend(args, global),
        Action::List(args) => list::list(args, global),
        Action::Import(args) => import::import(args, global),
    }
}

/// Who says it.
#[derive(Debug, clap::Args)]
struct Person {
    /// Who says so
    #[arg(long, value_name = "NAME", env = "USER", default_value = "unknown")]
    by: String,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
enum OutcomeWord {
    Done,
    Short,
    Lost,
    Refused,
    Unreported,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
enum CauseWord {
    Weather,
    Instrument,
    Operator,
    Acquisition,
    Other,
}

impl OutcomeWord {
    /// With the cause, which only a loss has.
    fn with(self, cause: Option<CauseWord>) -> Result<Outcome, Trouble> {
        let cause = cause.map(|cause| match cause {
            CauseWord::Weather => LossCause::Weather,
            CauseWord::Instrument => LossCause::Instrument,
            CauseWord::Operator => LossCause::Operator,
            CauseWord::Acquisition => LossCause::Acquisition,
            CauseWord::Other => LossCause::Other,
        });
        match (self, cause) {
            (OutcomeWord::Lost, cause) => Ok(Outcome::Lost(cause.unwrap_or(LossCause::Other))),
            (_, Some(_)) => Err(Trouble::misuse("--cause goes with --outcome lost alone")),
            (OutcomeWord::Done, None) => Ok(Outcome::Done),
            (OutcomeWord::Short, None) => Ok(Outcome::Short),
            (OutcomeWord::Refused, None) => Ok(Outcome::Refused),
            (OutcomeWord::Unreported, None) => Ok(Outcome::Unreported),
        }
    }
}

/// An instant in an argument.
fn instant(text: &str) -> Result<Utc, String> {
    Utc::parse(text).map_err(|error| error.to_string())
}

/// A finite number above zero in an argument.
fn positive(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.is_finite() && value > 0.0 => Ok(value),
        _ => Err(format!("'{text}' must be a number above 0")),
    }
}

/// A number from 0 to 1 in an argument.
fn share(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if (0.0..=1.0).contains(&value) => Ok(value),
        _ => Err(format!("'{text}' must be a number from 0 to 1")),
    }
}
