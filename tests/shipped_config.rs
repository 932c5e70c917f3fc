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
