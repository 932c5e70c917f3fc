//! Floor 7: the command line.
//!
//! # Adding a command
//!
//! One file, `cli/<command>.rs`, with
//!
//! - `pub struct Args` (derives [`clap::Args`]; its doc comment is the help, with an example under
//!   `after_help`), and
//! - `pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble>`.
//!
//! Then three short lines here: `mod <command>;`, a variant of `Command` and an arm in
//! `dispatch`. A command loads the settings with [`load::settings`], prints through
//! [`output::print`], and says what went wrong with a [`Trouble`], which knows its exit code.

mod audit;
mod check;
mod init;
mod ledger;
pub mod load;
mod log;
pub mod output;
mod pace;
mod plan;
mod rehearse;
mod remote;
mod replay;
mod run;
mod season;
mod sky;
mod stage;
pub mod storage;
mod trouble;

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use clap::{Parser, Subcommand};

pub use trouble::{Exit, Trouble};

/// What is said at the foot of the help of the whole program.
const AFTER_HELP: &str = "\
Exit codes: 0 fine · 1 the answer is no · 2 misuse or bad input · 3 the machine let us down

This program chooses observations. It does not protect people, the dome or the optics: rain, wind,
sun and motion interlocks are the observatory's own, and they win.

Example:
  nightwright init my-survey
  nightwright check --config my-survey";

/// Decides, night after night, which star a small robotic spectroscopic telescope observes, and
/// keeps the record.
#[derive(Debug, Parser)]
#[command(name = "nightwright", version, after_help = AFTER_HELP)]
struct Cli {
    #[command(flatten)]
    global: Global,
    #[command(subcommand)]
    command: Command,
}

/// What every command takes.
#[derive(Debug, clap::Args)]
pub struct Global {
    /// Configuration folder
    #[arg(
        long,
        global = true,
        value_name = "DIR",
        env = "NIGHTWRIGHT_CONFIG",
        default_value = "config"
    )]
    pub config: PathBuf,
}

/// The commands.
#[derive(Debug, Subcommand)]
enum Command {
    Audit(audit::Args),
    Check(check::Args),
    Init(init::Args),
    Ledger(ledger::Args),
    Log(log::Args),
    Plan(plan::Args),
    Rehearse(rehearse::Args),
    Run(run::Args),
    Season(season::Args),
    Sky(sky::Args),
    Status(remote::StatusArgs),
    Tell(remote::TellArgs),
}

fn dispatch(command: &Command, global: &Global) -> Result<Exit, Trouble> {
    match command {
        Command::Audit(args) => audit::run(args, global),
        Command::Check(args) => check::run(args, global),
        Command::Init(args) => init::run(args, global),
        Command::Ledger(args) => ledger::run(args, global),
        Command::Log(args) => log::run(args, global),
        Command::Plan(args) => plan::run(args, global),
        Command::Rehearse(args) => rehearse::run(args, global),
        Command::Run(args) => run::run(args, global),
        Command::Season(args) => season::run(args, global),
        Command::Sky(args) => sky::run(args, global),
        Command::Status(args) => remote::status(args, global),
        Command::Tell(args) => remote::tell(args, global),
    }
}

/// The signal of a file that grows past the limit of its process (POSIX; this number on Linux and the
/// BSDs).
const SIGXFSZ: i32 = 25;

/// A file-size limit must be a full disk, which is an error with a remedy, and not the death of the
/// program in the middle of a write: with a handler in place the write fails instead.
fn take_a_size_limit_for_a_full_disk() {
    // Where the system knows no such signal there is nothing to hold off either.
    let _ = signal_hook::flag::register(SIGXFSZ, Arc::new(AtomicBool::new(false)));
}

/// Reads the arguments, runs the command, tells what went wrong, and gives the exit code.
pub fn main() -> ExitCode {
    take_a_size_limit_for_a_full_disk();
    let cli = Cli::parse();
    match dispatch(&cli.command, &cli.global) {
        Ok(exit) => exit.into(),
        Err(trouble) => {
            output::complain(&trouble.to_string());
            trouble.exit.into()
        }
    }
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    use super::*;

    #[test]
    fn every_command_shows_an_example() {
        let mut cli = Cli::command();
        cli.build();
        cli.clone().debug_assert();
        for command in cli.get_subcommands().filter(|c| c.get_name() != "help") {
            let help = command.clone().render_long_help().to_string();
            assert!(
                help.contains("Example"),
                "{}: no example",
                command.get_name()
            );
        }
    }
}
