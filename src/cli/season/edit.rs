//! Small edits of the survey without a second folder.

use std::fs;
use std::path::{Path, PathBuf};

use toml::{Table, Value};

use crate::cli::{Trouble, load};
use crate::settings::{self, Settings, Sources};

/// What is to be different from the configuration.
#[derive(Debug, clap::Args)]
pub struct Edits {
    /// Set a key for this season alone, as target.KR0016-56.weight=2 or programme.ID.share=0.4; may
    /// be given again
    #[arg(long, value_name = "KEY=VALUE")]
    set: Vec<String>,
    /// Leave this star out; may be given again
    #[arg(long, value_name = "NAME")]
    without: Vec<String>,
    /// Add the stars of this file, written as targets.toml; may be given again
    #[arg(long, value_name = "FILE")]
    add: Vec<PathBuf>,
}

impl Edits {
    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.set.is_empty() && self.without.is_empty() && self.add.is_empty()
    }

    /// The settings of a folder, edited and checked as if they stood there.
    ///
    /// # Errors
    /// [`Trouble`] when an edit names nothing, or the edited settings have faults.
    pub fn settings(&self, folder: &Path) -> Result<Settings, Trouble> {
        let mut sources = load::sources(folder)?;
        let mut targets = Lists::read(&sources, settings::TARGETS_TOML)?;
        let mut survey = Lists::read(&sources, settings::SURVEY_FILE)?;
        for path in &self.add {
            let text = fs::read_to_string(path).map_err(|error| {
                Trouble::misuse(format!("{} cannot be read", path.display())).because(&error)
            })?;
            targets.add(&Lists::parse(&path.display().to_string(), &text)?);
        }
        for name in &self.without {
            targets.remove(name)?;
        }
        for edit in &self.set {
            let (kind, name, key, value) = parsed(edit)?;
            match kind {
                "target" => targets.set(("target", name), key, value)?,
                _ => survey.set(("programme", name), key, value)?,
            }
        }
        targets.write(&mut sources, settings::TARGETS_TOML)?;
        survey.write(&mut sources, settings::SURVEY_FILE)?;
        settings::check(&sources).map_err(|faults| load::trouble_of(&faults))
    }
}

/// `target.NAME.KEY=VALUE` in its parts; a name may hold dots, a key holds none.
fn parsed(edit: &str) -> Result<(&str, &str, &str, Value), Trouble> {
    let form = || {
        Trouble::misuse(format!("--set {edit} is no edit"))
            .hint("write target.NAME.KEY=VALUE or programme.ID.KEY=VALUE")
    };
    let (path, value) = edit.split_once('=').ok_or_else(form)?;
    let (kind, rest) = path.trim().split_once('.').ok_or_else(form)?;
    let (name, key) = rest.rsplit_once('.').ok_or_else(form)?;
    if !["target", "programme"].contains(&kind) || name.is_empty() || key.is_empty() {
        return Err(form());
    }
    // A value that is no TOML by itself is a word.
    let read = toml::from_str::<Table>(&format!("value = {}", value.trim()));
    let read = read.ok().and_then(|mut table| table.remove("value"));
    let value = read.unwrap_or_else(|| Value::String(value.trim().to_owned()));
    Ok((kind, name, key, value))
}

/// A file of lists of tables.
struct Lists {
    table: Table,
    touched: bool,
}

impl Lists {
    fn read(sources: &Sources, name: &str) -> Result<Self, Trouble> {
        match sources.files.get(name) {
            Some(Ok(bytes)) => Lists::parse(name, &String::from_utf8_lossy(bytes)),
            // What cannot be read is told by the check of the whole.
            _ => Ok(Lists {
                table: Table::new(),
                touched: false,
            }),
        }
    }

    fn parse(name: &str, text: &str) -> Result<Self, Trouble> {
        let table = toml::from_str(text.trim_start_matches('\u{feff}'))
            .map_err(|error| Trouble::misuse(format!("{name} is no TOML")).because(&error))?;
        Ok(Lists {
            table,
            touched: false,
        })
    }

    /// A list taken out of the file, to be put back changed.
    fn take(&mut self, kind: &str) -> Vec<Value> {
        self.touched = true;
        match self.table.remove(kind) {
            Some(Value::Array(list)) => list,
            _ => Vec::new(),
        }
    }

    fn put(&mut self, kind: &str, list: Vec<Value>) {
        self.table.insert(kind.to_owned(), Value::Array(list));
    }

    fn add(&mut self, other: &Lists) {
        let more = other.table.get("target").and_then(Value::as_array);
        let more = more.cloned().unwrap_or_default();
        let mut list = self.take("target");
        list.extend(more);
        self.put("target", list);
    }

    fn remove(&mut self, name: &str) -> Result<(), Trouble> {
        let mut list = self.take("target");
        let before = list.len();
        list.retain(|target| !is_called(target, name));
        let found = list.len() < before;
        self.put("target", list);
        if found {
            Ok(())
        } else {
            Err(absent("target", name))
        }
    }

    fn set(&mut self, (kind, name): (&str, &str), key: &str, value: Value) -> Result<(), Trouble> {
        let mut list = self.take(kind);
        let found = list.iter_mut().find(|item| is_called(item, name));
        let table = found.and_then(Value::as_table_mut);
        let found = table.map(|table| table.insert(key.to_owned(), value));
        let found = found.is_some();
        self.put(kind, list);
        if found {
            Ok(())
        } else {
            Err(absent(kind, name))
        }
    }

    fn write(self, sources: &mut Sources, name: &str) -> Result<(), Trouble> {
        if self.touched {
            let text = toml::to_string(&self.table).map_err(|error| {
                Trouble::machine("the edited settings cannot be written down").because(&error)
            })?;
            sources.files.insert(name.to_owned(), Ok(text.into_bytes()));
        }
        Ok(())
    }
}

fn is_called(item: &Value, name: &str) -> bool {
    item.get("id").and_then(Value::as_str) == Some(name)
}

fn absent(kind: &str, name: &str) -> Trouble {
    let file = if kind == "target" {
        settings::TARGETS_TOML
    } else {
        settings::SURVEY_FILE
    };
    Trouble::misuse(format!("{file} has no {kind} called {name}"))
        .hint("edits reach the stars of targets.toml, and the programmes of survey.toml")
}
