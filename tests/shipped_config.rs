//! The shipped configuration is what the documentation says of it.

use std::collections::BTreeMap;

use nightwright::catalogue::{Mount, TargetId, WindowPurpose};
use nightwright::score::Photometer;
use nightwright::settings::{self, Settings, Sources};

fn shipped() -> Settings {
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/config");
    let files = std::fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.is_file())
        .map(|path| {
            let name = path.file_name().unwrap().to_str().unwrap().to_owned();
            (name, Ok(std::fs::read(&path).unwrap()))
        })
        .collect::<BTreeMap<_, _>>();
    let sources = Sources {
        folder: "config".to_owned(),
        files,
        strays: Vec::new(),
    };
    settings::check(&sources).unwrap()
}

#[test]
fn survey_has_the_variety_that_a_planner_meets() {
    let survey = shipped().survey;
    let count = |test: &dyn Fn(&nightwright::catalogue::Target) -> bool| {
        survey.targets.iter().filter(|t| test(t)).count()
    };
    let motion =
        |t: &nightwright::catalogue::Target| t.star.pm_ra_cosdec_mas_yr.hypot(t.star.pm_dec_mas_yr);
    let purposes: Vec<bool> = survey
        .targets
        .iter()
        .flat_map(|t| &t.windows)
        .map(|w| matches!(w.purpose, WindowPurpose::Catch { .. }))
        .collect();
    assert_eq!(survey.programmes.len(), 3);
    assert!(matches!(survey.telescope.mount, Mount::AltAzimuth { .. }));
    assert!(survey.targets.len() >= 60);
    assert!(count(&|t| !t.candidates.is_empty()) * 3 >= 60);
    assert!(count(&|t| t.candidates.iter().any(|c| c.eccentricity > 0.0)) >= 3);
    assert!(count(&|t| motion(t) > 2000.0) >= 5);
    assert!(count(&|t| t.cadence.visits_per_night > 1) >= 10);
    assert_eq!(purposes.iter().filter(|catch| **catch).count(), 2);
    assert_eq!(purposes.iter().filter(|catch| !**catch).count(), 1);
}

#[test]
fn most_visits_take_ten_to_thirty_minutes() {
    let survey = shipped().survey;
    let is_standard = |id: &TargetId| {
        let mut calibrations = survey.instrument.calibrations.iter();
        calibrations.any(|c| c.standards.contains(id))
    };
    let minutes: Vec<f64> = survey
        .targets
        .iter()
        .filter(|target| !is_standard(&target.id))
        .map(|target| {
            let best = Photometer::new(&survey, target).best().unwrap();
            best.duration_s / 60.0
        })
        .collect();
    let within = minutes
        .iter()
        .filter(|m| (10.0..=30.0).contains(*m))
        .count();
    assert!(within * 10 >= minutes.len() * 8, "{minutes:.0?}");
}

/// The words in quotes in a source text that look like a key: lower case with an underscore.
fn keys_of(source: &str) -> Vec<&str> {
    let code = source.split("#[cfg(test)]").next().unwrap_or(source);
    let is_key = |word: &&str| {
        let sound = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '_';
        word.contains('_') && word.chars().all(sound)
    };
    code.split('"').skip(1).step_by(2).filter(is_key).collect()
}

#[test]
fn every_key_is_explained_in_the_files_and_in_the_readme() {
    let root = concat!(env!("CARGO_MANIFEST_DIR"));
    let read = |name: String| std::fs::read_to_string(format!("{root}/{name}")).unwrap();
    let readme = read("README.md".to_owned());
    let files: String = settings::FILES
        .iter()
        .filter(|name| **name != settings::TARGETS_CSV)
        .map(|name| read(format!("config/{name}")))
        .collect();
    let mut count = 0;
    for part in [
        "site",
        "equipment",
        "survey",
        "target",
        "weather",
        "daemon",
        "feed",
    ] {
        let source = read(format!("src/settings/{part}.rs"));
        for key in keys_of(&source) {
            count += 1;
            assert!(files.contains(key), "{key} of {part}.rs is not in config/");
            // What a feed can map is listed in night.toml alone, with the units.
            let listed_there = ["sky_temperature", "air_temperature", "wind_from"].contains(&key);
            assert!(
                readme.contains(key) || listed_there,
                "{key} of {part}.rs is not in README.md"
            );
        }
    }
    assert!(
        count > 150,
        "{count} keys found: are they still written so?"
    );
}
