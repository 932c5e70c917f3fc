//! The planner on the shipped survey: what a plan costs from a cold start, and its parts.

use std::collections::BTreeMap;
use std::hint::black_box;
use std::path::Path;

use criterion::{Criterion, criterion_group, criterion_main};
use nightwright::ephemeris::Observer;
use nightwright::plan::solve::{Settings as Search, solve};
use nightwright::plan::{Ask, Calendar, Desk, History, SkyTable};
use nightwright::settings::{self, Settings, Sources};
use nightwright::time::NightDate;

fn shipped() -> Settings {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("config");
    let read = |name: &str| {
        let bytes = std::fs::read(folder.join(name)).map_err(|error| error.to_string());
        (name.to_owned(), bytes)
    };
    let names = [
        "site.toml",
        "observatory.toml",
        "survey.toml",
        "night.toml",
        "targets.toml",
        "finals2000A.txt",
    ];
    let sources = Sources {
        folder: "config".to_owned(),
        files: names.into_iter().map(read).collect::<BTreeMap<_, _>>(),
        strays: Vec::new(),
    };
    settings::check(&sources).unwrap_or_else(|faults| panic!("{faults}"))
}

fn search(steps: u64, bound_steps: u64) -> Search {
    Search {
        steps,
        bound_steps,
        ..Search::default()
    }
}

fn plan(settings: &Settings, observer: &Observer, search: &Search) -> f64 {
    let night = NightDate::parse("2026-12-01").expect("a date");
    let survey = &settings.survey;
    let sky = SkyTable::compute(survey, observer, night).expect("a sky");
    let history = History::new(survey, observer, &[]).expect("no history");
    let calendar = Calendar::compute(survey, observer, night, night).expect("a calendar");
    let desk = Desk::new(survey, observer, &calendar, &sky, history);
    let ask = Ask::whole_night(sky.instant(0));
    desk.plan(&ask, search, &mut || true).expect("a plan").value
}

fn planner(criterion: &mut Criterion) {
    let settings = shipped();
    let observer = settings.observer();
    let mut group = criterion.benchmark_group("planner");
    group.sample_size(10);
    group.bench_function("first plan, cold, 78 stars", |b| {
        b.iter(|| plan(&settings, &observer, black_box(&search(0, 0))));
    });
    group.bench_function("400 steps with their proof, cold, 78 stars", |b| {
        b.iter(|| plan(&settings, &observer, black_box(&search(400, 300))));
    });
    let night = NightDate::parse("2026-12-01").expect("a date");
    let survey = &settings.survey;
    let sky = SkyTable::compute(survey, &observer, night).expect("a sky");
    let history = History::new(survey, &observer, &[]).expect("no history");
    let calendar = Calendar::compute(survey, &observer, night, night).expect("a calendar");
    let desk = Desk::new(survey, &observer, &calendar, &sky, history);
    let problem = desk
        .problem(&Ask::whole_night(sky.instant(0)))
        .expect("a problem")
        .problem;
    group.bench_function("one step of the bound", |b| {
        b.iter(|| solve(black_box(&problem), &search(1, 1), None, &mut || true));
    });
    group.finish();
}

criterion_group!(benches, planner);
criterion_main!(benches);
