//! `check`: everything that is wrong or doubtful in the configuration, at once.

use serde_json::{Value, json};

use super::{Exit, Global, Trouble, load, output};
use crate::settings::{self, Faults, Finding, Settings, Severity, doubts};
use crate::time::{NightDate, Utc};

/// Report everything that is wrong, impossible or doubtful in the configuration, with file, line,
/// key and remedy
///
/// Wrong: no settings can be made of it (exit code 2; 3 when a file cannot be read). Impossible: a
/// star that never rises, a cadence or an exposure that can never be had (exit code 1). Doubtful:
/// hardly what was meant, but it can be worked with (exit code 0).
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright check
  nightwright check --config my-survey --json")]
pub struct Args {
    /// Look at the survey as of this night, YYYY-MM-DD [default: tonight]
    #[arg(long, value_name = "DATE", value_parser = NightDate::parse)]
    night: Option<NightDate>,
    /// Print JSON
    #[arg(long)]
    json: bool,
}

/// Runs the command.
pub fn run(args: &Args, global: &Global) -> Result<Exit, Trouble> {
    let sources = load::sources(&global.config)?;
    match settings::check(&sources) {
        Ok(settings) => examined(args, global, &settings),
        Err(faults) if args.json => faulty_json(global, &faults),
        Err(faults) => Err(load::trouble_of(&faults)),
    }
}

fn examined(args: &Args, global: &Global, settings: &Settings) -> Result<Exit, Trouble> {
    let night = args.night.unwrap_or_else(|| {
        let now = Utc::from_unix_ms(chrono::Utc::now().timestamp_millis());
        NightDate::at(now, settings.survey.site.longitude)
    });
    let findings = doubts::examine(settings, night);
    let survey = &settings.survey;
    let (targets, programmes) = (survey.targets.len(), survey.programmes.len());
    if args.json {
        output::print_json(&json!({
            "folder": global.config.display().to_string(),
            "usable": true,
            "survey": survey.name,
            "targets": targets,
            "programmes": programmes,
            "findings": findings.iter().map(as_json).collect::<Vec<Value>>(),
        }))?;
    } else {
        let mut lines: Vec<String> = findings.iter().map(load::told).collect();
        lines.push(format!(
            "{}: {}, {programmes} programmes, {targets} targets: nothing wrong, {} impossible, {} \
             doubtful",
            global.config.display(),
            survey.name,
            count(&findings, Severity::Impossible),
            count(&findings, Severity::Doubtful),
        ));
        output::print(&lines.join("\n"))?;
    }
    Ok(match count(&findings, Severity::Impossible) {
        0 => Exit::Fine,
        _ => Exit::No,
    })
}

fn count(findings: &[Finding], severity: Severity) -> usize {
    findings.iter().filter(|f| f.severity == severity).count()
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
