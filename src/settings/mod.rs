//! Floor 3: the configuration folder as checked values, all faults at once.
//!
//! [`check`] takes texts, not files: reading the folder is the command line's work. It gives either
//! [`Settings`] or every fault of every file with file, line, key, what was found and what would do.
//! What is doubtful but can be worked with travels along in [`Settings::doubts`]; what astronomy
//! says of the survey is told by [`doubts::examine`].
//!
//!
//! | file | holds |
//! | --- | --- |
//! | `site.toml` | `[site]` |
//! | `observatory.toml` | `[telescope]`, `[instrument]` |
//! | `survey.toml` | `[survey]`, `[[programme]]`, `[allocation]`, `[planning]` |
//! | `night.toml` | `[weather]`, `[climate]`, `[daemon]`, `[feed]`, `[push]`, `[recorded_weather]` |
//! | `targets.toml` or `targets.csv` | the targets |

mod csv_targets;
mod daemon;
pub mod defaults;
pub mod doubts;
mod equipment;
mod feed;
mod finding;
mod list;
mod node;
mod range;
mod reading;
mod section;
mod site;
mod spectral;
mod suggest;
mod survey;
mod target;
#[cfg(test)]
mod tests;
mod weather;
mod year;

use std::collections::BTreeMap;

pub use csv_targets::line_of as csv_line_of;
pub use daemon::{DaemonSettings, Push};
pub use feed::{
    AlpacaFeed, Feed, FeedSource, JsonFeed, MappedKind, MappedValue, RecordedWeather, TimeFormat,
};
pub use finding::{Faults, Finding, Place, Places, Severity};
pub use reading::{Implausible, Readings};

use finding::Sink;
use node::{Node, Value};
use section::Section;

use crate::catalogue::Survey;
use crate::ephemeris::{EarthRotation, Observer};
use crate::weather::{Climate, WeatherRules};

/// File of the site.
pub const SITE_FILE: &str = "site.toml";
/// File of telescope and spectrograph.
pub const OBSERVATORY_FILE: &str = "observatory.toml";
/// File of programmes and planning.
pub const SURVEY_FILE: &str = "survey.toml";
/// File of weather rules and daemon.
pub const NIGHT_FILE: &str = "night.toml";
/// Targets in TOML.
pub const TARGETS_TOML: &str = "targets.toml";
/// Targets in CSV.
pub const TARGETS_CSV: &str = "targets.csv";
/// All files that are looked for by name.
pub const FILES: [&str; 6] = [
    SITE_FILE,
    OBSERVATORY_FILE,
    SURVEY_FILE,
    NIGHT_FILE,
    TARGETS_TOML,
    TARGETS_CSV,
];

/// What was found in the configuration folder.
#[derive(Clone, Debug, Default)]
pub struct Sources {
    /// The folder as the person wrote it, for messages.
    pub folder: String,
    /// Name within the folder → content, or why the machine could not give it. A file that does not
    /// exist is not in the map.
    pub files: BTreeMap<String, Result<Vec<u8>, String>>,
    /// Other `.toml` and `.csv` files in the folder: nothing reads them, which may be a slip.
    pub strays: Vec<String>,
}

/// Earth-rotation data as it was found.
#[derive(Clone, Debug, PartialEq)]
pub struct EarthRotationFile {
    /// The file, for messages.
    pub file: String,
    /// Its text, in the IERS finals2000A form.
    pub text: String,
    /// What it says.
    pub rotation: EarthRotation,
}

/// The configuration folder, checked.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// What may and should be observed.
    pub survey: Survey,
    /// Which weather stops the night.
    pub weather: WeatherRules,
    /// The site's weather by month.
    pub climate: Climate,
    /// How the daemon works.
    pub daemon: DaemonSettings,
    /// Earth-rotation data; `None`: UT1 is taken as UTC.
    pub earth_rotation: Option<EarthRotationFile>,
    /// Hours by which the site's civil time (without summer time) runs ahead of UTC, where given.
    pub utc_offset_h: Option<f64>,
    /// What is doubtful in the texts.
    pub doubts: Vec<Finding>,
    /// Where each key stands.
    pub places: Places,
}

impl Settings {
    /// The observer at the site, with the Earth's rotation as far as it is known.
    pub fn observer(&self) -> Observer {
        let file = self.earth_rotation.as_ref();
        let rotation = file.map_or_else(EarthRotation::absent, |f| f.rotation.clone());
        Observer::new(self.survey.site.clone(), rotation)
    }
}

impl Sources {
    fn shown(&self, name: &str) -> String {
        if self.folder.is_empty() {
            name.to_owned()
        } else {
            format!("{}/{name}", self.folder.trim_end_matches('/'))
        }
    }

    /// The text of a file without a byte-order mark; `None` when it is not there or unreadable,
    /// which is noted.
    fn text(&self, name: &str, sink: &Sink) -> Option<&str> {
        let shown = self.shown(name);
        let bytes = match self.files.get(name)? {
            Ok(bytes) => bytes,
            Err(cause) => {
                sink.add(Finding {
                    severity: Severity::Unreadable,
                    place: Place::file(&shown),
                    key: String::new(),
                    message: format!("cannot be read: {cause}"),
                    hint: None,
                });
                return None;
            }
        };
        match std::str::from_utf8(bytes) {
            Ok(text) => Some(text.strip_prefix('\u{feff}').unwrap_or(text)),
            Err(error) => {
                let before = &bytes[..error.valid_up_to()];
                let line = before.iter().filter(|b| **b == b'\n').count() + 1;
                let place = Place {
                    line: Some(line),
                    ..Place::file(&shown)
                };
                let byte = bytes.get(error.valid_up_to()).copied().unwrap_or(0);
                let message = format!("found the byte 0x{byte:02x}, must be UTF-8 text");
                let hint = "save the file in the encoding UTF-8".to_owned();
                sink.wrong(&place, "", message, Some(hint));
                None
            }
        }
    }

    /// A file that must be there, as a tree.
    fn tree(&self, name: &str, sink: &Sink) -> Option<Node> {
        if !self.files.contains_key(name) {
            let hint = "`nightwright init DIR` writes a folder with all files".to_owned();
            let place = Place::file(&self.shown(name));
            sink.wrong(&place, "", "this file is missing".to_owned(), Some(hint));
            return None;
        }
        let text = self.text(name, sink)?;
        node::from_toml(&self.shown(name), text, sink)
    }
}

/// Files beside those of [`FILES`] that the texts name, relative to the folder: to be read into
/// [`Sources::files`] before [`check`].
pub fn files_named_within(sources: &Sources) -> Vec<String> {
    let sink = Sink::default();
    sources
        .tree(SITE_FILE, &sink)
        .and_then(|tree| with_root(&tree, &sink, site::read))
        .and_then(|part| part.earth_rotation)
        .into_iter()
        .collect()
}

/// Reads and checks everything.
///
/// # Errors
/// [`Faults`] with every fault of every file, and the doubts beside them.
pub fn check(sources: &Sources) -> Result<Settings, Faults> {
    let sink = Sink::default();
    let read = |name: &str| sources.tree(name, &sink);
    let site = read(SITE_FILE).and_then(|t| with_root(&t, &sink, site::read));
    let equipment = read(OBSERVATORY_FILE).and_then(|t| with_root(&t, &sink, equipment::read));
    let survey = read(SURVEY_FILE).and_then(|t| with_root(&t, &sink, survey::read));
    let night = read(NIGHT_FILE).map(|t| {
        with_root(&t, &sink, |root| {
            (
                weather::read_rules(root),
                weather::read_climate(root),
                daemon::read(root),
            )
        })
    });
    let targets = list::read(sources, survey.as_ref(), &sink);
    let earth_rotation = site
        .as_ref()
        .and_then(|part| earth_rotation(part, sources, &sink));
    for stray in &sources.strays {
        let place = Place::file(&sources.shown(stray));
        let message = format!("nothing reads this file; read are {}", FILES.join(", "));
        sink.doubt(&place, "", message, None);
    }
    let parts = site.zip(equipment).zip(survey).zip(night);
    let assembled = parts.and_then(|(((site, equipment), survey), night)| {
        let (weather, climate, daemon) = night;
        let utc_offset_h = site.utc_offset_h;
        let (telescope, instrument) = equipment;
        let mut survey = Survey {
            name: survey.name,
            first_night: survey.first_night,
            site: site.site,
            telescope,
            instrument,
            programmes: survey.programmes,
            targets,
            allocation: survey.allocation,
            planning: survey.planning,
        };
        list::drop_calibrations_without_star(&mut survey, &sources.shown(OBSERVATORY_FILE), &sink);
        Some(Settings {
            survey,
            weather: weather?,
            climate: climate?,
            daemon: daemon?,
            earth_rotation,
            utc_offset_h,
            doubts: Vec::new(),
            places: Places::default(),
        })
    });
    let (findings, places) = sink.into_parts();
    let only_doubts = findings.iter().all(|f| f.severity == Severity::Doubtful);
    match assembled {
        Some(settings) if only_doubts => Ok(Settings {
            doubts: findings,
            places,
            ..settings
        }),
        _ => Err(Faults { findings }),
    }
}

/// Hands the top of a file to its reader and then complains about sections nobody asked for.
fn with_root<T>(tree: &Node, sink: &Sink, read: impl FnOnce(&Section<'_>) -> T) -> T {
    let empty = node::Table::default();
    let table = match &tree.value {
        Value::Table(table) => table,
        _ => &empty,
    };
    let root = Section::new("", &tree.place, table, sink);
    let read = read(&root);
    root.finish();
    read
}

fn earth_rotation(
    part: &site::SitePart,
    sources: &Sources,
    sink: &Sink,
) -> Option<EarthRotationFile> {
    let name = part.earth_rotation.as_deref()?;
    let shown = sources.shown(name);
    if !sources.files.contains_key(name) {
        let message = "this file is missing, though site.earth_rotation names it".to_owned();
        let hint = "put an IERS finals2000A file there, or remove the key".to_owned();
        sink.wrong(&Place::file(&shown), "", message, Some(hint));
        return None;
    }
    let text = sources.text(name, sink)?.to_owned();
    match EarthRotation::from_finals2000a(&text) {
        Ok(rotation) => Some(EarthRotationFile {
            file: shown,
            text,
            rotation,
        }),
        Err(error) => {
            sink.wrong(&Place::file(&shown), "", error.to_string(), None);
            None
        }
    }
}
