//! Reads the configuration folder from disk and has it checked.

use std::collections::BTreeMap;
use std::fs;
use std::io::{self, Read};
use std::path::Path;

use super::{Exit, Global, Trouble, output};
use crate::ephemeris::RotationQuality;
use crate::settings::{self, Faults, Finding, Settings, Severity, Sources};

/// No file of settings is larger; a device or a core dump in its place is not read to its end.
const LARGEST_FILE: u64 = 64 * 1024 * 1024;

/// The checked settings of the configuration folder. Doubts are mentioned on standard error.
///
/// # Errors
/// [`Trouble`] with every fault of every file: exit code 2, or 3 when a file could not be read.
pub fn settings(global: &Global) -> Result<Settings, Trouble> {
    let sources = sources(&global.config)?;
    let settings = settings::check(&sources).map_err(|faults| trouble_of(&faults))?;
    if !settings.doubts.is_empty() {
        let count = settings.doubts.len();
        let things = if count == 1 { "thing is" } else { "things are" };
        output::complain(&format!(
            "note: {count} {things} doubtful in {}; `nightwright check` tells",
            global.config.display()
        ));
    }
    Ok(settings)
}

/// Says on standard error where the Earth's rotation is not known well enough to go unmentioned.
pub fn mention_rotation(quality: RotationQuality) {
    match quality {
        RotationQuality::Measured | RotationQuality::Predicted => {}
        RotationQuality::Held => output::complain(
            "note: UT1-UTC is held at the last row of the Earth-rotation file; \
             a newer finals2000A file from the IERS makes times good to 0.1 s",
        ),
        RotationQuality::Absent => output::complain(
            "note: UT1 is taken as UTC (up to 13 arcsec of hour angle); \
             name an IERS finals2000A file as site.earth_rotation",
        ),
    }
}

/// The texts of the configuration folder.
///
/// # Errors
/// [`Trouble`] when the folder is missing (exit code 2) or cannot be listed (3). Single files that
/// cannot be read are left for the check to report with everything else.
pub fn sources(folder: &Path) -> Result<Sources, Trouble> {
    let shown = folder.display().to_string();
    let entries = fs::read_dir(folder).map_err(|error| match error.kind() {
        io::ErrorKind::NotFound | io::ErrorKind::NotADirectory => {
            Trouble::misuse(format!("there is no configuration folder {shown}"))
                .because(&error)
                .hint("name it with --config DIR, or make one with `nightwright init DIR`")
        }
        _ => Trouble::machine(format!("the configuration folder {shown} cannot be listed"))
            .because(&error),
    })?;
    let mut sources = Sources {
        folder: shown.clone(),
        files: BTreeMap::new(),
        strays: Vec::new(),
    };
    for entry in entries {
        let entry = entry.map_err(|error| {
            Trouble::machine(format!("the configuration folder {shown} cannot be listed"))
                .because(&error)
        })?;
        let Ok(name) = entry.file_name().into_string() else {
            continue;
        };
        if settings::FILES.contains(&name.as_str()) {
            add(&mut sources, folder, &name);
        } else if name.ends_with(".toml") || name.ends_with(".csv") {
            sources.strays.push(name);
        }
    }
    sources.strays.sort();
    for name in settings::files_named_within(&sources) {
        add(&mut sources, folder, &name);
        sources.strays.retain(|stray| *stray != name);
    }
    Ok(sources)
}

/// Reads a file into the sources; one that does not exist is left out.
fn add(sources: &mut Sources, folder: &Path, name: &str) {
    let path = folder.join(name);
    let read = match content(&path) {
        Err(error) if error.kind() == io::ErrorKind::NotFound => return,
        read => read.map_err(|error| error.to_string()),
    };
    sources.files.insert(name.to_owned(), read);
}

fn content(path: &Path) -> io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    let file = fs::File::open(path)?;
    if !file.metadata()?.is_file() {
        return Err(io::Error::other("it is no ordinary file"));
    }
    file.take(LARGEST_FILE + 1).read_to_end(&mut bytes)?;
    if bytes.len() as u64 > LARGEST_FILE {
        return Err(io::Error::other(format!(
            "it is larger than {} MB",
            LARGEST_FILE / (1024 * 1024)
        )));
    }
    Ok(bytes)
}

/// The faults as a trouble that lists them all.
pub fn trouble_of(faults: &Faults) -> Trouble {
    let exit = if faults.any_unreadable() {
        Exit::Machine
    } else {
        Exit::Misuse
    };
    let mut findings: Vec<&Finding> = faults.findings.iter().collect();
    // What must be mended stands last, next to the message, where a terminal leaves off.
    findings.sort_by_key(|f| f.severity != Severity::Doubtful);
    Trouble::from_error(exit, faults).details(findings.into_iter().map(told).collect())
}

/// A finding as lines for people.
pub fn told(finding: &Finding) -> String {
    let mark = match finding.severity {
        Severity::Doubtful => "doubtful: ",
        Severity::Impossible => "impossible: ",
        Severity::Unreadable | Severity::Wrong => "",
    };
    match &finding.hint {
        Some(hint) => format!("{mark}{finding}\n  hint: {hint}"),
        None => format!("{mark}{finding}"),
    }
}
