//! The target list as a whole: which files, no target twice, what was taken by default.

use super::csv_targets;
use super::defaults;
use super::finding::{Place, Sink};
use super::node::{self, Node, Value};
use super::section::Section;
use super::survey::SurveyPart;
use super::target::{self, Assumed};
use super::{SURVEY_FILE, Sources, TARGETS_CSV, TARGETS_TOML};
use crate::catalogue::{Programme, Survey, Target, TargetId};

/// A target with what its reader must still be told about.
struct Read {
    target: Target,
    assumed: Assumed,
    place: Place,
    key: String,
}

/// Reads all targets; faults go to the sink.
pub(super) fn read(sources: &Sources, survey: Option<&SurveyPart>, sink: &Sink) -> Vec<Target> {
    let programmes = survey.map_or(&[][..], |s| s.programmes.as_slice());
    let mut list: Vec<Read> = Vec::new();
    for name in chosen_files(sources, survey, sink) {
        for node in nodes(sources, &name, sink) {
            add(&node, programmes, sink, &mut list);
        }
    }
    tell_assumed(&list, sink);
    list.into_iter().map(|read| read.target).collect()
}

/// Which of the two files; both only when `survey.targets` names both.
fn chosen_files(sources: &Sources, survey: Option<&SurveyPart>, sink: &Sink) -> Vec<String> {
    let both = [TARGETS_TOML, TARGETS_CSV];
    let there: Vec<String> = both
        .into_iter()
        .filter(|name| sources.files.contains_key(*name))
        .map(str::to_owned)
        .collect();
    let asked = survey.map_or(&[][..], |s| s.target_files.as_slice());
    let survey_file = Place::file(&sources.shown(SURVEY_FILE));
    if !asked.is_empty() {
        for name in asked {
            if !both.contains(&name.as_str()) {
                let message = format!("found \"{name}\", must be \"{}\"", both.join("\" or \""));
                sink.wrong(&survey_file, "survey.targets", message, None);
            } else if !there.contains(name) {
                let message = format!("names {name}, which is not in the folder");
                sink.wrong(&survey_file, "survey.targets", message, None);
            }
        }
        let mut files = asked.to_vec();
        files.retain(|name| there.contains(name));
        files.dedup();
        return files;
    }
    if there.len() == 2 {
        let message =
            format!("stands beside {TARGETS_TOML}: which of the two holds the targets is not said");
        let hint = format!(
            "remove one, or say so in {SURVEY_FILE}: [survey] targets = [\"{TARGETS_TOML}\", \
             \"{TARGETS_CSV}\"]"
        );
        let place = Place::file(&sources.shown(TARGETS_CSV));
        sink.wrong(&place, "", message, Some(hint));
    }
    if there.is_empty() {
        let message = format!("there is neither {TARGETS_TOML} nor {TARGETS_CSV}");
        let place = Place::file(&sources.folder);
        sink.wrong(&place, "", message, None);
    }
    there
}

/// The targets of one file, as tables.
fn nodes(sources: &Sources, name: &str, sink: &Sink) -> Vec<Node> {
    let shown = sources.shown(name);
    let Some(text) = sources.text(name, sink) else {
        return Vec::new();
    };
    let errors_before = sink.count();
    let nodes = if name == TARGETS_CSV {
        csv_targets::read(&shown, text, sink)
    } else {
        toml_nodes(&shown, text, sink)
    };
    if nodes.is_empty() && sink.count() == errors_before {
        let message = "holds no target, must hold one at least".to_owned();
        sink.wrong(&Place::file(&shown), "", message, None);
    }
    nodes
}

fn toml_nodes(shown: &str, text: &str, sink: &Sink) -> Vec<Node> {
    let Some(Node {
        value: Value::Table(table),
        ..
    }) = node::from_toml(shown, text, sink)
    else {
        return Vec::new();
    };
    let mut nodes = Vec::new();
    for entry in table.entries {
        match (entry.key.as_str(), entry.node.value) {
            ("target", Value::List(list)) => nodes.extend(list),
            ("target", other) => {
                let message = format!("found {}, must be repeated [[target]]", other.found());
                sink.wrong(&entry.place, "target", message, None);
            }
            (key, _) => {
                let hint = "only [[target]] may stand here".to_owned();
                sink.wrong(&entry.place, key, "unknown key".to_owned(), Some(hint));
            }
        }
    }
    nodes
}

fn add(node: &Node, programmes: &[Programme], sink: &Sink, list: &mut Vec<Read>) {
    let Value::Table(table) = &node.value else {
        let message = format!("found {}, must be a [[target]]", node.value.found());
        sink.wrong(&node.place, "target", message, None);
        return;
    };
    let path = match table.get("id").map(|entry| &entry.node.value) {
        Some(Value::Text(id) | Value::Cell(id)) => format!("target.{}", id.trim()),
        _ => format!("target[{}]", list.len() + 1),
    };
    let section = Section::new(&path, &node.place, table, sink);
    let (target, assumed) = target::read(&section, programmes);
    let twin = list.iter().find(|read| read.target.id == target.id);
    if let Some(twin) = twin
        && !target.id.as_str().is_empty()
    {
        let message = format!(
            "found \"{}\" a second time, must be once (the first is at {})",
            target.id, twin.place
        );
        section.wrong("id", message);
    }
    section.finish();
    list.push(Read {
        target,
        assumed,
        place: node.place.clone(),
        key: path,
    });
}

/// Says once for the whole list what was taken by default and can be felt.
fn tell_assumed(list: &[Read], sink: &Sink) {
    type Test = fn(&Assumed) -> bool;
    let told: [(Test, &str, String); 3] = [
        (
            |a| a.parallax,
            "parallax_mas",
            "taken as zero, as if very far: places are off by up to the parallax".to_owned(),
        ),
        (
            |a| a.radial_velocity,
            "radial_velocity_km_s",
            "taken as zero".to_owned(),
        ),
        (
            |a| a.temperature,
            "temperature_k or spectral_class",
            format!(
                "taken as {} K: exposures to a velocity error rest on it",
                defaults::TEMPERATURE_K
            ),
        ),
    ];
    for (test, key, consequence) in told {
        let without: Vec<&Read> = list.iter().filter(|r| test(&r.assumed)).collect();
        if let Some(first) = without.first() {
            let message = match without.len() {
                1 => format!("no {key}: {consequence}"),
                n => format!("no {key}, here and for {} more: {consequence}", n - 1),
            };
            sink.doubt(&first.place, &first.key, message, None);
        }
    }
}

/// A calibration by standard stars none of which is on the list cannot be done: it is dropped, and
/// said. (An empty list of standards would mean a lamp.) The list may have been exchanged as a
/// whole, so that this is a doubt and no fault.
pub(super) fn drop_calibrations_without_star(survey: &mut Survey, file: &str, sink: &Sink) {
    let Survey {
        targets,
        instrument,
        ..
    } = survey;
    instrument.calibrations.retain_mut(|calibration| {
        if calibration.standards.is_empty() {
            return true;
        }
        let key = format!("instrument.calibration.{}.standards", calibration.id);
        let place = sink.place_of(&key).unwrap_or_else(|| Place::file(file));
        let (kept, missing): (Vec<TargetId>, Vec<TargetId>) = calibration
            .standards
            .drain(..)
            .partition(|standard| targets.iter().any(|t| t.id == *standard));
        calibration.standards = kept;
        let hint = Some("add them to the targets, or remove them here".to_owned());
        let names: Vec<&str> = missing.iter().map(TargetId::as_str).collect();
        let names = names.join(", ");
        if calibration.standards.is_empty() {
            let message = format!(
                "none of {names} is on the target list: {} is left out of every night",
                calibration.id
            );
            sink.doubt(&place, &key, message, hint);
        } else if !names.is_empty() {
            let message = format!("not on the target list: {names}");
            sink.doubt(&place, &key, message, hint);
        }
        !calibration.standards.is_empty()
    });
}
