//! Takes keys out of a section one by one, notes everything that is wrong, and at the end every key
//! that nobody asked for.

use std::cell::RefCell;
use std::str::FromStr;

use super::finding::{Place, Sink};
use super::node::{Node, Table, Value};
use super::range::Range;
use super::suggest;
use crate::time::{NightDate, Utc};

/// A section of a file while it is read.
pub(super) struct Section<'a> {
    /// Dotted path, for messages and for the index of places.
    pub(super) path: String,
    pub(super) place: Place,
    pub(super) sink: &'a Sink,
    table: &'a Table,
    asked: RefCell<Vec<&'static str>>,
}

impl<'a> Section<'a> {
    pub(super) fn new(path: &str, place: &Place, table: &'a Table, sink: &'a Sink) -> Self {
        Section {
            path: path.to_owned(),
            place: place.clone(),
            sink,
            table,
            asked: RefCell::default(),
        }
    }

    /// The key with the section's path before it.
    pub(super) fn full(&self, key: &str) -> String {
        if self.path.is_empty() {
            key.to_owned()
        } else {
            format!("{}.{key}", self.path)
        }
    }

    fn ask(&self, key: &'static str) -> Option<&'a Node> {
        self.asked.borrow_mut().push(key);
        self.table.get(key).map(|entry| &entry.node)
    }

    /// Whether the key is there, without taking it.
    pub(super) fn has(&self, key: &str) -> bool {
        self.table.get(key).is_some()
    }

    /// The place of a key, or of the section when it is not there.
    pub(super) fn place_of(&self, key: &str) -> Place {
        self.table
            .get(key)
            .map_or(&self.place, |entry| &entry.node.place)
            .clone()
    }

    /// Notes that a key's value is wrong.
    pub(super) fn wrong(&self, key: &str, message: impl Into<String>) {
        self.wrong_with(key, message, None);
    }

    /// The same, with what to do about it.
    pub(super) fn wrong_with(&self, key: &str, message: impl Into<String>, hint: Option<String>) {
        let place = self.place_of(key);
        self.sink
            .wrong(&place, &self.full(key), message.into(), hint);
    }

    /// Notes that a key's value is doubtful.
    pub(super) fn doubt(&self, key: &str, message: impl Into<String>, hint: Option<&str>) {
        let place = self.place_of(key);
        let hint = hint.map(str::to_owned);
        self.sink
            .doubt(&place, &self.full(key), message.into(), hint);
    }

    fn missing(&self, key: &str, must: &str) {
        self.wrong(key, format!("is missing; it must be {must}"));
    }

    fn mistaken(&self, key: &str, node: &Node, must: &str) {
        let message = format!("found {}, must be {must}", node.value.found());
        self.sink.wrong(&node.place, &self.full(key), message, None);
    }

    /// A number within a range; `None` when it is absent or wrong (which is noted).
    pub(super) fn number(&self, key: &'static str, range: Range) -> Option<f64> {
        let node = self.ask(key)?;
        self.number_in(key, node, range)
    }

    fn number_in(&self, key: &str, node: &Node, range: Range) -> Option<f64> {
        let read = match &node.value {
            Value::Number(_, number) => Some(*number),
            Value::Cell(text) => f64::from_str(text).ok(),
            _ => None,
        };
        match read {
            Some(number) if range.holds(number) => Some(number),
            _ => {
                self.mistaken(key, node, &range.to_string());
                None
            }
        }
    }

    /// A number that has a default.
    pub(super) fn number_or(&self, key: &'static str, default: f64, range: Range) -> f64 {
        self.number(key, range).unwrap_or(default)
    }

    /// A number that must be there. When it is not, the fault is noted and a harmless number stands
    /// in so that the rest can be checked.
    pub(super) fn need_number(&self, key: &'static str, range: Range) -> f64 {
        if !self.has(key) {
            self.asked.borrow_mut().push(key);
            self.missing(key, &range.to_string());
        }
        self.number(key, range).unwrap_or(range.harmless())
    }

    /// A whole number within a range.
    pub(super) fn whole(&self, key: &'static str, range: Range) -> Option<u64> {
        let node = self.ask(key)?;
        let number = self.number_in(key, node, range.whole())?;
        // The range is checked, whole and not negative, so that the cast is exact.
        Some(number as u64)
    }

    /// A text, not empty.
    pub(super) fn text(&self, key: &'static str) -> Option<String> {
        let node = self.ask(key)?;
        match &node.value {
            Value::Text(text) | Value::Cell(text) if !text.trim().is_empty() => {
                Some(text.trim().to_owned())
            }
            _ => {
                self.mistaken(key, node, "a text that is not empty");
                None
            }
        }
    }

    /// A text that must be there.
    pub(super) fn need_text(&self, key: &'static str) -> String {
        if !self.has(key) {
            self.missing(key, "a text");
        }
        self.text(key).unwrap_or_default()
    }

    /// A text that has a default.
    pub(super) fn text_or(&self, key: &'static str, default: &str) -> String {
        self.text(key).unwrap_or_else(|| default.to_owned())
    }

    /// One of a few words.
    pub(super) fn choice<T: Copy>(&self, key: &'static str, words: &[(&str, T)]) -> Option<T> {
        let node = self.ask(key)?;
        let text = match &node.value {
            Value::Text(text) | Value::Cell(text) => text.trim(),
            _ => "",
        };
        let chosen = words.iter().find(|(word, _)| *word == text);
        if chosen.is_none() {
            self.mistaken(key, node, &one_of(words));
        }
        chosen.map(|(_, meaning)| *meaning)
    }

    /// One of a few words that must be there; the first stands in when it is not.
    pub(super) fn need_choice<T: Copy>(&self, key: &'static str, words: &[(&str, T)]) -> Option<T> {
        if !self.has(key) {
            self.missing(key, &one_of(words));
        }
        self.choice(key, words)
    }

    /// True or false, false unless said.
    pub(super) fn flag(&self, key: &'static str) -> bool {
        let Some(node) = self.ask(key) else {
            return false;
        };
        match &node.value {
            Value::Flag(flag) => *flag,
            Value::Cell(cell) if ["true", "yes", "1"].contains(&cell.as_str()) => true,
            Value::Cell(cell) if ["false", "no", "0"].contains(&cell.as_str()) => false,
            _ => {
                self.mistaken(key, node, "true or false");
                false
            }
        }
    }

    /// The date of a night.
    pub(super) fn night(&self, key: &'static str) -> Option<NightDate> {
        let node = self.ask(key)?;
        self.night_in(key, node)
    }

    fn night_in(&self, key: &str, node: &Node) -> Option<NightDate> {
        let read = written(node).and_then(|text| NightDate::parse(text).ok());
        if read.is_none() {
            self.mistaken(key, node, "the date of a night like 2026-12-01");
        }
        read
    }

    /// Pairs of nights: `[["2026-01-01", "2026-06-30"], …]`, each in order.
    pub(super) fn night_pairs(&self, key: &'static str) -> Vec<(NightDate, NightDate)> {
        self.pairs(key, "pairs of first and last night", |node| {
            self.night_in(key, node)
        })
    }

    /// Pairs of instants: `[["2026-12-24T20:00:00Z", "2026-12-25T02:00:00Z"], …]`, each in order.
    pub(super) fn instant_pairs(&self, key: &'static str) -> Vec<(Utc, Utc)> {
        self.pairs(key, "pairs of start and end", |node| {
            let read = written(node).and_then(|text| Utc::parse(text).ok());
            if read.is_none() {
                self.mistaken(key, node, "a UTC instant like 2026-12-01T23:30:00Z");
            }
            read
        })
    }

    fn pairs<T: PartialOrd>(
        &self,
        key: &'static str,
        must: &str,
        read: impl Fn(&Node) -> Option<T>,
    ) -> Vec<(T, T)> {
        let mut pairs = Vec::new();
        for node in self.list(key, must) {
            let Value::List(ends) = &node.value else {
                self.mistaken(key, node, must);
                continue;
            };
            let [first, last] = ends.as_slice() else {
                self.mistaken(key, node, must);
                continue;
            };
            match (read(first), read(last)) {
                (Some(a), Some(b)) if a <= b => pairs.push((a, b)),
                (Some(_), Some(_)) => {
                    let (from, to) = (first.value.found(), last.value.found());
                    let message =
                        format!("found {from} before {to}, must be the earlier one first");
                    self.sink.wrong(&node.place, &self.full(key), message, None);
                }
                _ => {}
            }
        }
        pairs
    }

    /// Pairs of numbers: `[[0, 12], [90, 20.5]]`.
    pub(super) fn number_pairs(
        &self,
        key: &'static str,
        first: Range,
        second: Range,
    ) -> Vec<(f64, f64)> {
        let must = format!("a list of pairs: {first}, then {second}");
        let mut pairs = Vec::new();
        for node in self.list(key, &must) {
            match &node.value {
                Value::List(both) if both.len() == 2 => {
                    let a = self.number_in(key, &both[0], first);
                    let b = self.number_in(key, &both[1], second);
                    pairs.extend(a.zip(b));
                }
                _ => self.mistaken(key, node, &must),
            }
        }
        pairs
    }

    /// So many numbers in a list; `None` when it is absent or wrong.
    pub(super) fn numbers<const N: usize>(
        &self,
        key: &'static str,
        range: Range,
    ) -> Option<[f64; N]> {
        let node = self.ask(key)?;
        let must = format!("a list of {N} numbers, each {range}");
        let Value::List(list) = &node.value else {
            self.mistaken(key, node, &must);
            return None;
        };
        let read: Vec<f64> = list
            .iter()
            .filter_map(|n| self.number_in(key, n, range))
            .collect();
        if list.len() != N {
            let message = format!("found {} numbers, must be {must}", list.len());
            self.sink.wrong(&node.place, &self.full(key), message, None);
        }
        read.try_into().ok()
    }

    /// A list of texts; empty when it is absent.
    pub(super) fn texts(&self, key: &'static str) -> Vec<String> {
        let must = "a list of texts";
        let mut texts = Vec::new();
        for node in self.list(key, must) {
            match &node.value {
                Value::Text(text) if !text.trim().is_empty() => texts.push(text.trim().to_owned()),
                _ => self.mistaken(key, node, must),
            }
        }
        texts
    }

    fn list(&self, key: &'static str, must: &str) -> &'a [Node] {
        match self.ask(key) {
            None => &[],
            Some(node) => match &node.value {
                Value::List(list) => list,
                _ => {
                    self.mistaken(key, node, must);
                    &[]
                }
            },
        }
    }

    /// A section within this one.
    pub(super) fn section(&self, key: &'static str) -> Option<Section<'a>> {
        let node = self.ask(key)?;
        match &node.value {
            Value::Table(table) => {
                let place = self.table.get(key).map_or(&node.place, |e| &e.place);
                Some(Section::new(&self.full(key), place, table, self.sink))
            }
            _ => {
                self.mistaken(key, node, &format!("a section [{}]", self.full(key)));
                None
            }
        }
    }

    /// Repeated sections within this one (`[[key]]`), each named by its `id` where it has one.
    pub(super) fn sections(&self, key: &'static str) -> Vec<Section<'a>> {
        let must = format!("repeated sections [[{}]]", self.full(key));
        let mut sections = Vec::new();
        for (index, node) in self.list(key, &must).iter().enumerate() {
            let Value::Table(table) = &node.value else {
                self.mistaken(key, node, &must);
                continue;
            };
            let path = match table.get("id").map(|entry| &entry.node.value) {
                Some(Value::Text(id) | Value::Cell(id)) => format!("{}.{id}", self.full(key)),
                _ => format!("{}[{}]", self.full(key), index + 1),
            };
            sections.push(Section::new(&path, &node.place, table, self.sink));
        }
        sections
    }

    /// Notes every key that nobody asked for, and remembers where the others stand.
    pub(super) fn finish(self) {
        let asked = self.asked.borrow();
        self.sink.remember(self.path.clone(), self.place.clone());
        for entry in &self.table.entries {
            let full = self.full(&entry.key);
            if asked.contains(&entry.key.as_str()) {
                self.sink.remember(full, entry.place.clone());
            } else {
                let hint = suggest::for_unknown(&entry.key, &asked);
                let message = "unknown key".to_owned();
                self.sink.wrong(&entry.place, &full, message, Some(hint));
            }
        }
    }
}

fn written(node: &Node) -> Option<&str> {
    match &node.value {
        Value::Text(text) | Value::Cell(text) | Value::Date(text) => Some(text.trim()),
        _ => None,
    }
}

fn one_of<T>(words: &[(&str, T)]) -> String {
    let quoted: Vec<String> = words.iter().map(|(w, _)| format!("\"{w}\"")).collect();
    format!("one of {}", quoted.join(", "))
}
