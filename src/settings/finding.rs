//! What is wrong or doubtful in the settings, and where.

use std::cell::RefCell;
use std::collections::BTreeMap;
use std::fmt;

use thiserror::Error;

/// A place in a file of the configuration folder.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Default)]
pub struct Place {
    /// The file as the person knows it: the folder as it was given, and the name.
    pub file: String,
    /// Line, from 1; `None` when it is about the file as a whole.
    pub line: Option<usize>,
    /// Column: of a TOML file in characters from 1, of a CSV file the number of the cell from 1.
    pub column: Option<usize>,
}

impl Place {
    /// The file as a whole.
    pub fn file(file: &str) -> Self {
        Place {
            file: file.to_owned(),
            line: None,
            column: None,
        }
    }

    fn is_csv(&self) -> bool {
        self.file.ends_with(".csv")
    }
}

impl fmt::Display for Place {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.line {
            Some(line) => write!(f, "{}:{line}", self.file),
            None => f.write_str(&self.file),
        }
    }
}

/// How bad a finding is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Severity {
    /// The machine could not give the file: nothing can be said of what is in it.
    Unreadable,
    /// Wrong: no settings can be made of it.
    Wrong,
    /// Sound as a text, but what it asks for can never be had: the answer of a check is no.
    Impossible,
    /// It can be worked with, but it is probably not what was meant.
    Doubtful,
}

impl Severity {
    /// The label in output.
    pub const fn label(self) -> &'static str {
        match self {
            Severity::Unreadable => "unreadable",
            Severity::Wrong => "wrong",
            Severity::Impossible => "impossible",
            Severity::Doubtful => "doubtful",
        }
    }
}

/// One thing that is wrong or doubtful.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Finding {
    /// How bad.
    pub severity: Severity,
    /// Where.
    pub place: Place,
    /// The key (`site.latitude_deg`) or the CSV column with its target; empty for a file as a whole.
    pub key: String,
    /// What was found, and what would do.
    pub message: String,
    /// What to do about it, where there is more to say.
    pub hint: Option<String>,
}

impl fmt::Display for Finding {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: ", self.place)?;
        if !self.key.is_empty() {
            f.write_str(&self.key)?;
            // A line of CSV is hard to count along; in TOML the key says enough.
            if let Some(column) = self.place.column.filter(|_| self.place.is_csv()) {
                write!(f, " (column {column})")?;
            }
            f.write_str(": ")?;
        }
        f.write_str(&self.message)
    }
}

/// Everything that is wrong with the settings, in the order of files and lines. Doubts that were
/// noticed on the way are among them.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("{}", summary(.findings))]
pub struct Faults {
    /// At least one finding that is not merely doubtful.
    pub findings: Vec<Finding>,
}

impl Faults {
    /// Whether the machine, not the writer of the settings, is to blame for any of them.
    pub fn any_unreadable(&self) -> bool {
        self.findings
            .iter()
            .any(|f| f.severity == Severity::Unreadable)
    }
}

fn summary(findings: &[Finding]) -> String {
    let wrong = findings
        .iter()
        .filter(|f| f.severity != Severity::Doubtful)
        .count();
    match wrong {
        1 => "one fault in the settings".to_owned(),
        n => format!("{n} faults in the settings"),
    }
}

/// Where findings gather while everything is read, so that the first does not hide the rest.
#[derive(Debug, Default)]
pub(super) struct Sink {
    findings: RefCell<Vec<Finding>>,
    places: RefCell<BTreeMap<String, Place>>,
}

impl Sink {
    pub(super) fn add(&self, finding: Finding) {
        self.findings.borrow_mut().push(finding);
    }

    pub(super) fn wrong(&self, place: &Place, key: &str, message: String, hint: Option<String>) {
        self.add(Finding {
            severity: Severity::Wrong,
            place: place.clone(),
            key: key.to_owned(),
            message,
            hint,
        });
    }

    pub(super) fn doubt(&self, place: &Place, key: &str, message: String, hint: Option<String>) {
        self.add(Finding {
            severity: Severity::Doubtful,
            place: place.clone(),
            key: key.to_owned(),
            message,
            hint,
        });
    }

    pub(super) fn remember(&self, key: String, place: Place) {
        self.places.borrow_mut().insert(key, place);
    }

    /// How many findings there are so far.
    pub(super) fn count(&self) -> usize {
        self.findings.borrow().len()
    }

    /// Where a key stands, as far as it was read.
    pub(super) fn place_of(&self, key: &str) -> Option<Place> {
        self.places.borrow().get(key).cloned()
    }

    /// The findings in the order of files and lines, and the places of all keys.
    pub(super) fn into_parts(self) -> (Vec<Finding>, Places) {
        let mut findings = self.findings.into_inner();
        findings.sort_by(|a, b| a.place.cmp(&b.place));
        (findings, Places(self.places.into_inner()))
    }
}

/// Where each key stands (`site.latitude_deg`, `target.A-1.magnitude`).
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct Places(BTreeMap<String, Place>);

impl Places {
    /// The place of a key; where it was not written, of the nearest section above it.
    pub fn of(&self, key: &str) -> Place {
        let mut path = key;
        loop {
            if let Some(place) = self.0.get(path) {
                return place.clone();
            }
            match path.rfind('.') {
                Some(dot) => path = &path[..dot],
                None => return Place::default(),
            }
        }
    }
}
