//! `sky`: what stands where, over a night or at instants given.

mod night;
mod rows;

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use super::{Exit, Global, Trouble, load};
use crate::catalogue::Target;
use crate::ephemeris::RotationQuality;
use crate::settings::Settings;
use crate::time::{Night, NightDate, Utc};

/// Show the night (sun, twilights, moon, and when each target is up in the dark), or with --at or
/// --times where each target stands at instants given.
///
/// A target is up while it stands at its lowest altitude or above (the mount's, its own, that of
/// its highest airmass, and the horizon profile, all without refraction). Best airmass and moon
/// separation are those at its highest within that.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright sky --night 2026-12-01
  nightwright sky --at 2026-12-02T03:00:00Z,2026-12-02T04:00:00Z --target KR0016-56
  nightwright sky --times instants.txt --json")]
pub struct Args {
    /// Night by the date of its evening at the site [default: tonight]
    #[arg(long, value_name = "DATE", conflicts_with_all = ["at", "times"])]
    night: Option<String>,
    /// UTC instants instead of a night, separated by commas
    #[arg(
        long,
        value_name = "T",
        value_delimiter = ',',
        conflicts_with = "times"
    )]
    at: Vec<String>,
    /// File with one UTC instant a line, instead of a night
    #[arg(long, value_name = "FILE")]
    times: Option<PathBuf>,
    /// Only this target; may be given several times [default: all]
    #[arg(long, value_name = "ID")]
    target: Vec<String>,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let instants = instants(args)?;
    let date = args
        .night
        .as_deref()
        .map(NightDate::parse)
        .transpose()
        .map_err(|error| Trouble::from_error(Exit::Misuse, &error))?;
    let settings = load::settings(global)?;
    let observer = settings.observer();
    let targets = chosen(&settings, &args.target)?;
    match instants {
        Some(instants) => rows::print(&observer, &targets, &instants, args.json)?,
        None => {
            let longitude = observer.site.longitude;
            let now = Utc::from_unix_ms(chrono::Utc::now().timestamp_millis());
            let date = date.unwrap_or_else(|| NightDate::at(now, longitude));
            let night = Night::of(date, longitude);
            night::print(&settings, &observer, &targets, night, args.json)?;
        }
    }
    Ok(Exit::Fine)
}

/// The instants asked for; `None` when a night is.
fn instants(args: &Args) -> Result<Option<Vec<Utc>>, Trouble> {
    let parsed =
        |text: &str| Utc::parse(text).map_err(|error| Trouble::from_error(Exit::Misuse, &error));
    if !args.at.is_empty() {
        return args
            .at
            .iter()
            .map(|text| parsed(text))
            .collect::<Result<_, _>>()
            .map(Some);
    }
    args.times.as_deref().map(instants_of_file).transpose()
}

fn instants_of_file(path: &Path) -> Result<Vec<Utc>, Trouble> {
    let shown = path.display();
    let text = fs::read_to_string(path).map_err(|error| {
        let message = format!("{shown} cannot be read");
        match error.kind() {
            io::ErrorKind::NotFound | io::ErrorKind::InvalidData => Trouble::misuse(message),
            _ => Trouble::machine(message),
        }
        .because(&error)
    })?;
    let text = text.strip_prefix('\u{feff}').unwrap_or(&text);
    let lines = text.lines().enumerate();
    let instants: Vec<Utc> = lines
        .filter(|(_, line)| !line.trim().is_empty())
        .map(|(index, line)| {
            Utc::parse(line).map_err(|error| {
                Trouble::misuse(format!("{shown}:{}: no instant", index + 1)).because(&error)
            })
        })
        .collect::<Result<_, _>>()?;
    if instants.is_empty() {
        return Err(Trouble::misuse(format!("{shown} holds no instant"))
            .hint("write one UTC instant a line, like 2026-12-01T23:30:00Z"));
    }
    Ok(instants)
}

/// The targets named, in the order of the list; all when none is.
fn chosen<'a>(settings: &'a Settings, ids: &[String]) -> Result<Vec<&'a Target>, Trouble> {
    let targets = &settings.survey.targets;
    for id in ids {
        if !targets.iter().any(|target| target.id.as_str() == id) {
            return Err(
                Trouble::misuse(format!("there is no target '{id}' on the list"))
                    .hint("`nightwright sky` lists all"),
            );
        }
    }
    Ok(targets
        .iter()
        .filter(|target| ids.is_empty() || ids.iter().any(|id| target.id.as_str() == id))
        .collect())
}

/// The word for a quality in JSON and text.
fn quality_word(quality: RotationQuality) -> &'static str {
    match quality {
        RotationQuality::Measured => "measured",
        RotationQuality::Predicted => "predicted",
        RotationQuality::Held => "held",
        RotationQuality::Absent => "absent",
    }
}

/// Rounds for printing, so that no digit is written that means nothing.
fn rounded(value: f64, decimals: i32) -> f64 {
    let scale = 10f64.powi(decimals);
    (value * scale).round() / scale
}
