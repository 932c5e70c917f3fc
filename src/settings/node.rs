//! The files as trees of values that know their places: one form for TOML and CSV.
//!
//! Serde's derived readers stop at the first fault of a file, and `deny_unknown_fields` at the first
//! unknown key. A person who sets up a survey wants the whole list, so the tree that the TOML parser
//! gives is walked by hand (see `section.rs`).

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::finding::{Place, Sink};

/// A value with its place.
#[derive(Clone, Debug)]
pub(super) struct Node {
    pub(super) place: Place,
    pub(super) value: Value,
}

/// What a value is.
#[derive(Clone, Debug)]
pub(super) enum Value {
    /// A TOML string.
    Text(String),
    /// A TOML number: as written, and as read.
    Number(String, f64),
    /// A TOML boolean.
    Flag(bool),
    /// A TOML date or time, as written.
    Date(String),
    /// A cell of a CSV file: whatever its reader wants it to be.
    Cell(String),
    /// An array.
    List(Vec<Node>),
    /// A table.
    Table(Table),
}

impl Value {
    /// What stands there, for messages.
    pub(super) fn found(&self) -> String {
        match self {
            Value::Text(text) | Value::Cell(text) => format!("\"{}\"", shortened(text)),
            Value::Number(written, _) => shortened(written),
            Value::Flag(flag) => flag.to_string(),
            Value::Date(date) => date.clone(),
            Value::List(_) => "a list".to_owned(),
            Value::Table(_) => "a section".to_owned(),
        }
    }
}

/// Long values are cut: a message must stay a line.
fn shortened(text: &str) -> String {
    const LONGEST: usize = 60;
    let clean: String = text
        .chars()
        .map(|c| if c.is_control() { '\u{fffd}' } else { c })
        .collect();
    if clean.chars().count() <= LONGEST {
        return clean;
    }
    let head: String = clean.chars().take(LONGEST).collect();
    format!("{head}…")
}

/// Keys with their values in the order of the file.
#[derive(Clone, Debug, Default)]
pub(super) struct Table {
    pub(super) entries: Vec<Entry>,
}

/// A key with its value.
#[derive(Clone, Debug)]
pub(super) struct Entry {
    pub(super) key: String,
    pub(super) place: Place,
    pub(super) node: Node,
}

impl Table {
    pub(super) fn get(&self, key: &str) -> Option<&Entry> {
        self.entries.iter().find(|e| e.key == key)
    }
}

/// Turns byte offsets into lines and columns.
struct Lines<'a> {
    file: &'a str,
    text: &'a str,
    starts: Vec<usize>,
}

impl<'a> Lines<'a> {
    fn new(file: &'a str, text: &'a str) -> Self {
        let after_breaks = text.match_indices('\n').map(|(at, _)| at + 1);
        Lines {
            file,
            text,
            starts: std::iter::once(0).chain(after_breaks).collect(),
        }
    }

    fn place(&self, offset: usize) -> Place {
        let line = self.starts.partition_point(|start| *start <= offset).max(1);
        let start = self.starts[line - 1];
        let before = self.text.get(start..offset).unwrap_or("");
        Place {
            file: self.file.to_owned(),
            line: Some(line),
            column: Some(before.chars().count() + 1),
        }
    }
}

/// Reads a TOML text; faults of syntax go to the sink, all of them. What could be understood beside
/// them is returned only when there was none, so that a lost quote does not bring a flood of others.
pub(super) fn from_toml(file: &str, text: &str, sink: &Sink) -> Option<Node> {
    let lines = Lines::new(file, text);
    let (table, errors) = DeTable::parse_recoverable(text);
    for error in &errors {
        let offset = error.span().map_or(0, |span| span.start);
        let message = format!("this is no TOML: {}", error.message());
        sink.wrong(&lines.place(offset), "", message, None);
    }
    errors.is_empty().then(|| Node {
        place: Place::file(file),
        value: Value::Table(table_of(table.get_ref(), &lines)),
    })
}

fn table_of(table: &DeTable<'_>, lines: &Lines<'_>) -> Table {
    let mut entries: Vec<(usize, Entry)> = table
        .iter()
        .map(|(key, value)| {
            let entry = Entry {
                key: key.get_ref().to_string(),
                place: lines.place(key.span().start),
                node: node_of(value, lines),
            };
            (key.span().start, entry)
        })
        .collect();
    entries.sort_by_key(|(offset, _)| *offset);
    Table {
        entries: entries.into_iter().map(|(_, entry)| entry).collect(),
    }
}

fn node_of(value: &Spanned<DeValue<'_>>, lines: &Lines<'_>) -> Node {
    let read = match value.get_ref() {
        DeValue::String(text) => Value::Text(text.to_string()),
        DeValue::Integer(integer) => {
            let read = i64::from_str_radix(integer.as_str(), integer.radix());
            Value::Number(integer.to_string(), read.map_or(f64::NAN, |n| n as f64))
        }
        DeValue::Float(float) => {
            let read = float.as_str().parse().unwrap_or(f64::NAN);
            Value::Number(float.to_string(), read)
        }
        DeValue::Boolean(flag) => Value::Flag(*flag),
        DeValue::Datetime(date) => Value::Date(date.to_string()),
        DeValue::Array(list) => Value::List(list.iter().map(|v| node_of(v, lines)).collect()),
        DeValue::Table(table) => Value::Table(table_of(table, lines)),
    };
    Node {
        place: lines.place(value.span().start),
        value: read,
    }
}
