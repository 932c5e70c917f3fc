//! The house keeps its shape: imports run downwards, pure floors stay pure, files stay short.
//!
//! The floors are those of DEVELOPERS.md, "The floors"; change both in the same commit.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

/// Folder and floor. Folders of one floor may import each other in one direction only.
const FLOORS: &[(&str, u8)] = &[
    ("units", 0),
    ("time", 0),
    ("ephemeris", 1),
    ("catalogue", 1),
    ("weather", 1),
    ("record", 1),
    ("page", 1),
    ("score", 2),
    ("plan", 2),
    ("audit", 2),
    ("night", 3),
    ("settings", 3),
    ("ports", 4),
    ("report", 4),
    ("ledger", 5),
    ("devices", 5),
    ("sim", 5),
    ("daemon", 6),
    ("season", 6),
    ("cli", 7),
];

/// Floors up to this one do no I/O and read no clock.
const HIGHEST_PURE_FLOOR: u8 = 3;

/// What a pure floor never says, with the reason.
const FORBIDDEN_IN_PURE: &[(&str, &str)] = &[
    ("tokio", "no runtime"),
    ("rusqlite", "no storage"),
    ("reqwest", "no network"),
    ("std::fs", "no files"),
    ("std::net", "no network"),
    ("std::env", "no environment"),
    ("std::process", "no processes"),
    ("std::thread", "no threads"),
    ("println!", "no printing"),
    ("eprintln!", "no printing"),
    ("print!", "no printing"),
    ("dbg!", "no printing"),
    ("tracing::", "no logging"),
    ("SystemTime", "no clock"),
    ("Instant::now", "no clock"),
    ("Utc::now", "no clock"),
    ("Local::now", "no clock"),
    ("rand::rng", "randomness is passed in"),
    ("thread_rng", "randomness is passed in"),
];

/// Lines that one reads in one sitting, tests apart.
const LONGEST_FILE: usize = 650;

fn source_files(folder: &Path, into: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("src is readable") {
        let path = entry.expect("src is readable").path();
        if path.is_dir() {
            source_files(&path, into);
        } else if path.extension().is_some_and(|e| e == "rs") {
            into.push(path);
        }
    }
}

/// The part of a file before its test module, without comments, as (line number, text).
fn code_lines(text: &str) -> Vec<(usize, String)> {
    let mut lines = Vec::new();
    let mut pending_test_attribute = false;
    for (index, line) in text.lines().enumerate() {
        let bare = line.split("//").next().unwrap_or_default().to_owned();
        if pending_test_attribute && bare.trim_start().starts_with("mod ") {
            break;
        }
        pending_test_attribute = bare.trim() == "#[cfg(test)]";
        lines.push((index + 1, bare));
    }
    lines
}

/// Names of folders that a line of code imports from this crate.
fn imported_folders(line: &str) -> Vec<String> {
    let mut found = Vec::new();
    for (at, _) in line.match_indices("crate::") {
        let rest = &line[at + "crate::".len()..];
        if let Some(group) = rest.strip_prefix('{') {
            let inside = group.split('}').next().unwrap_or_default();
            found.extend(inside.split(',').map(|part| first_word(part.trim())));
        } else {
            found.push(first_word(rest));
        }
    }
    found.retain(|word| !word.is_empty());
    found
}

fn first_word(text: &str) -> String {
    text.chars()
        .take_while(|c| c.is_alphanumeric() || *c == '_')
        .collect()
}

fn folder_of(path: &Path) -> Option<String> {
    let inside = path.strip_prefix(source_root()).ok()?;
    let mut parts = inside.components();
    let first = parts.next()?.as_os_str().to_str()?.to_owned();
    parts.next().map(|_| first)
}

fn source_root() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

fn floors() -> BTreeMap<&'static str, u8> {
    FLOORS.iter().copied().collect()
}

/// A file, its folder, its lines of code.
type File = (PathBuf, String, Vec<(usize, String)>);

/// Every file that stands on a floor.
fn house() -> Vec<File> {
    let mut files = Vec::new();
    source_files(&source_root(), &mut files);
    files.sort();
    files
        .into_iter()
        .filter(|path| {
            !path.ends_with("tests.rs") && !path.components().any(|c| c.as_os_str() == "tests")
        })
        .filter_map(|path| {
            let folder = folder_of(&path)?;
            let text = fs::read_to_string(&path).expect("source is UTF-8");
            Some((path, folder, code_lines(&text)))
        })
        .collect()
}

fn complain(faults: Vec<String>) {
    assert!(
        faults.is_empty(),
        "see DEVELOPERS.md, \"The floors\":\n{}",
        faults.join("\n")
    );
}

#[test]
fn every_folder_has_a_floor() {
    let floors = floors();
    let mut faults = Vec::new();
    for (path, folder, _) in house() {
        if !floors.contains_key(folder.as_str()) {
            faults.push(format!(
                "{}: folder '{folder}' stands on no floor",
                path.display()
            ));
        }
    }
    complain(faults);
}

#[test]
fn imports_run_downwards_and_never_in_a_circle() {
    let floors = floors();
    let mut faults = Vec::new();
    let mut sideways: BTreeMap<(String, String), String> = BTreeMap::new();
    for (path, folder, lines) in house() {
        let Some(own) = floors.get(folder.as_str()) else {
            continue;
        };
        for (number, line) in &lines {
            for other in imported_folders(line) {
                let Some(floor) = floors.get(other.as_str()) else {
                    continue;
                };
                let place = format!("{}:{number}", path.display());
                if floor > own {
                    faults.push(format!(
                        "{place}: '{folder}' (floor {own}) imports '{other}' (floor {floor})"
                    ));
                } else if floor == own && other != folder {
                    sideways.insert((folder.clone(), other), place);
                }
            }
        }
    }
    for ((from, to), place) in &sideways {
        if let Some(back) = sideways.get(&(to.clone(), from.clone())) {
            faults.push(format!(
                "{place} and {back}: '{from}' and '{to}' import each other"
            ));
        }
    }
    complain(faults);
}

#[test]
fn pure_floors_stay_pure() {
    let floors = floors();
    let mut faults = Vec::new();
    for (path, folder, lines) in house() {
        if floors
            .get(folder.as_str())
            .is_none_or(|floor| *floor > HIGHEST_PURE_FLOOR)
        {
            continue;
        }
        for (number, line) in &lines {
            for (word, reason) in FORBIDDEN_IN_PURE {
                if line.contains(word) {
                    faults.push(format!(
                        "{}:{number}: '{word}' in a pure floor: {reason}",
                        path.display()
                    ));
                }
            }
        }
    }
    complain(faults);
}

#[test]
fn files_can_be_read_in_one_sitting() {
    let mut faults = Vec::new();
    for (path, _, lines) in house() {
        if lines.len() > LONGEST_FILE {
            faults.push(format!(
                "{}: {} lines, at most {LONGEST_FILE}",
                path.display(),
                lines.len()
            ));
        }
    }
    complain(faults);
}

#[test]
fn the_map_names_every_folder() {
    let map = fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("DEVELOPERS.md"))
        .expect("DEVELOPERS.md stands beside Cargo.toml");
    let missing: Vec<String> = FLOORS
        .iter()
        .filter(|(folder, _)| {
            source_root().join(folder).exists() && !map.contains(&format!("`{folder}/`"))
        })
        .map(|(folder, _)| format!("DEVELOPERS.md does not name `{folder}/`"))
        .collect();
    complain(missing);
}

#[test]
fn the_reader_of_imports_sees_what_it_should() {
    assert_eq!(imported_folders("use crate::time::Utc;"), ["time"]);
    assert_eq!(
        imported_folders("use crate::{time::Utc, units};"),
        ["time", "units"]
    );
    assert_eq!(
        imported_folders("let x = crate::plan::go(crate::score::y);"),
        ["plan", "score"]
    );
    assert!(code_lines("a\n#[cfg(test)]\nmod tests {\nuse crate::cli;\n}").len() == 2);
}
