//! `check`: everything that is wrong or doubtful in the configuration, at once.

use serde_json::{Value, json};

use super::{Exit, Global, Trouble, load, output};
use crate::settings::{self, Faults, Finding, Settings};

/// Report everything that is wrong or doubtful in the configuration, with file, line, key and
/// remedy. Faults end with exit code 2 (3 when a file cannot be read); doubts alone with 0.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright check
  nightwright check --config my-survey --json")]
pub struct Args {
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let sources = load::sources(&global.config)?;
    match settings::check(&sources) {
        Ok(settings) => sound(args, global, &settings),
        Err(faults) if args.json => faulty_json(global, &faults),
        Err(faults) => Err(load::trouble_of(&faults)),
    }
}

fn sound(args: &Args, global: &Global, settings: &Settings) -> Result<Exit, Trouble> {
    let doubts = &settings.doubts;
    let survey = &settings.survey;
    let (targets, programmes) = (survey.targets.len(), survey.programmes.len());
    if args.json {
        output::print_json(&json!({
            "folder": global.config.display().to_string(),
            "usable": true,
            "survey": survey.name,
            "targets": targets,
            "programmes": programmes,
            "findings": doubts.iter().map(as_json).collect::<Vec<Value>>(),
        }))?;
        return Ok(Exit::Fine);
    }
    let mut lines: Vec<String> = doubts.iter().map(load::told).collect();
    let doubtful = match doubts.len() {
        0 => "nothing doubtful".to_owned(),
        1 => "1 doubt".to_owned(),
        n => format!("{n} doubts"),
    };
    lines.push(format!(
        "{}: {}, {programmes} programmes, {targets} targets; no fault, {doubtful}",
        global.config.display(),
        survey.name
    ));
    output::print(&lines.join("\n"))?;
    Ok(Exit::Fine)
}

fn faulty_json(global: &Global, faults: &Faults) -> Result<Exit, Trouble> {
    output::print_json(&json!({
        "folder": global.config.display().to_string(),
        "usable": false,
        "findings": faults.findings.iter().map(as_json).collect::<Vec<Value>>(),
    }))?;
    Ok(load::trouble_of(faults).exit)
}

fn as_json(finding: &Finding) -> Value {
    json!({
        "severity": finding.severity.label(),
        "file": finding.place.file,
        "line": finding.place.line,
        "column": finding.place.column,
        "key": finding.key,
        "message": finding.message,
        "hint": finding.hint,
    })
}
