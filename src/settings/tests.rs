//! Properties of the whole reading: whatever the texts hold, there is an answer and no panic.

use proptest::prelude::*;

use super::*;
use crate::time::NightDate;

const SHIPPED: [(&str, &str); 6] = [
    (SITE_FILE, include_str!("../../config/site.toml")),
    (
        OBSERVATORY_FILE,
        include_str!("../../config/observatory.toml"),
    ),
    (SURVEY_FILE, include_str!("../../config/survey.toml")),
    (NIGHT_FILE, include_str!("../../config/night.toml")),
    (TARGETS_TOML, include_str!("../../config/targets.toml")),
    (
        "finals2000A.txt",
        include_str!("../../config/finals2000A.txt"),
    ),
];

/// Two rows that use every kind of column.
const CSV: &str = "\
id,ra_deg,dec_deg,epoch,pm_ra_mas_yr,pm_dec_mas_yr,parallax_mas,radial_velocity_km_s,magnitude,\
programme,spectral_class,every_nights,visits_per_night,last_night,signal_to_noise,\
candidate_period_d,candidate_period_error_d,candidate_conjunction_bjd_tdb,window_phase_from,\
window_phase_to,window_purpose,paused
A-1,10.5,-45.25,2016.0,120.5,-80.25,95.1,12.5,8.4,rapid,M3 V,2,2,2027-03-01,80,3.1,0.01,\
2461100.5,0.9,0.1,catch,no
A-2,200.5,5.25,2016.0,-20.5,8.25,,,9.1,,,,,,,,,,,,,yes
";

fn shipped() -> Sources {
    Sources {
        folder: "config".to_owned(),
        files: SHIPPED
            .iter()
            .map(|(name, text)| ((*name).to_owned(), Ok(text.as_bytes().to_vec())))
            .collect(),
        strays: Vec::new(),
    }
}

/// Reads, and examines what can be read; faults must say something and stand somewhere.
fn answer(sources: &Sources) -> Result<(), TestCaseError> {
    files_named_within(sources);
    match check(sources) {
        Ok(settings) => {
            doubts::examine(&settings, NightDate::parse("2026-12-01").unwrap());
        }
        Err(faults) => {
            let any = faults
                .findings
                .iter()
                .any(|f| f.severity != Severity::Doubtful);
            prop_assert!(any);
            for finding in &faults.findings {
                prop_assert!(!finding.place.file.is_empty(), "{finding}");
                prop_assert!(!finding.message.contains('\n'), "{finding:?}");
            }
        }
    }
    Ok(())
}

/// A line of a text replaced by another line of it, by nothing, or by something else.
fn mutate(text: &str, line: usize, other: usize, kind: u8, junk: &str) -> String {
    let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
    let count = lines.len();
    let (at, from) = (line % count, other % count);
    match kind {
        0 => {
            lines.remove(at);
        }
        1 => lines[at] = lines[from].clone(),
        2 => lines.insert(at, junk.to_owned()),
        3 => {
            let key = lines[at].split('=').next().unwrap_or("").to_owned();
            lines[at] = format!("{key} = {junk}");
        }
        _ => {
            let cut = junk.len() % (lines[at].chars().count() + 1);
            lines[at] = lines[at].chars().take(cut).collect();
        }
    }
    lines.join("\n")
}

fn junk() -> impl Strategy<Value = String> {
    prop_oneof![
        Just("nan".to_owned()),
        Just("-inf".to_owned()),
        Just("1e308".to_owned()),
        Just("9223372036854775807".to_owned()),
        Just("0".to_owned()),
        Just("[[], [1], {a = 1}]".to_owned()),
        Just("2026-02-30".to_owned()),
        Just("\"é\u{0}\"".to_owned()),
        any::<f64>().prop_map(|x| format!("{x:?}")),
        "[ -~]{0,20}",
        any::<String>(),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(96))]

    #[test]
    fn any_text_gets_an_answer(text in any::<String>(), file in 0usize..6) {
        let mut sources = shipped();
        let name = FILES[file];
        sources.files.remove(TARGETS_TOML);
        sources.files.insert(TARGETS_CSV.to_owned(), Ok(CSV.as_bytes().to_vec()));
        sources.files.insert(name.to_owned(), Ok(text.into_bytes()));
        answer(&sources)?;
    }

    #[test]
    fn any_bytes_get_an_answer(bytes in any::<Vec<u8>>(), file in 0usize..6) {
        let mut sources = shipped();
        sources.files.insert(FILES[file].to_owned(), Ok(bytes));
        answer(&sources)?;
    }

    #[test]
    fn any_slip_in_a_sound_file_gets_an_answer(
        file in 0usize..6, line: usize, other: usize, kind in 0u8..5, junk in junk(),
    ) {
        let mut sources = shipped();
        if file == 5 {
            sources.files.remove(TARGETS_TOML);
            let spoilt = mutate(CSV, line, other, kind, &junk);
            sources.files.insert(TARGETS_CSV.to_owned(), Ok(spoilt.into_bytes()));
        } else {
            let (name, text) = SHIPPED[file];
            let spoilt = mutate(text, line, other, kind, &junk);
            sources.files.insert(name.to_owned(), Ok(spoilt.into_bytes()));
        }
        answer(&sources)?;
    }
}

#[test]
fn csv_gives_what_toml_gives() {
    let toml = r#"
[[target]]
id = "A-1"
ra_deg = 10.5
dec_deg = -45.25
epoch = 2016.0
pm_ra_mas_yr = 120.5
pm_dec_mas_yr = -80.25
parallax_mas = 95.1
radial_velocity_km_s = 12.5
magnitude = 8.4
programme = "rapid"
spectral_class = "M3 V"
every_nights = 2
visits_per_night = 2
last_night = "2027-03-01"
signal_to_noise = 80
[[target.candidate]]
period_d = 3.1
period_error_d = 0.01
conjunction_bjd_tdb = 2461100.5
[[target.window]]
phase_from = 0.9
phase_to = 0.1
purpose = "catch"

[[target]]
id = "A-2"
ra_deg = 200.5
dec_deg = 5.25
epoch = 2016.0
pm_ra_mas_yr = -20.5
pm_dec_mas_yr = 8.25
magnitude = 9.1
paused = true
"#;
    let targets = |name: &str, text: &str| {
        let mut sources = shipped();
        sources.files.remove(TARGETS_TOML);
        sources
            .files
            .insert(name.to_owned(), Ok(text.as_bytes().to_vec()));
        check(&sources).unwrap().survey.targets
    };
    assert_eq!(targets(TARGETS_CSV, CSV), targets(TARGETS_TOML, toml));
}

#[test]
fn documented_defaults_are_the_ones_taken() {
    let mut sources = shipped();
    let without = |name: &str, keys: &[&str]| {
        let (_, text) = SHIPPED.iter().find(|(file, _)| *file == name).unwrap();
        let kept: Vec<&str> = text
            .lines()
            .filter(|line| {
                !keys
                    .iter()
                    .any(|key| line.starts_with(&format!("{key} = ")))
            })
            .collect();
        Ok(kept.join("\n").into_bytes())
    };
    // Every key whose comment says "left out: this" or names the value that is written there.
    let night = without(
        NIGHT_FILE,
        &[
            "stale_after_s",
            "opening_dwell_s",
            "require_safe_flag",
            "ledger",
            "reports",
            "queue",
            "listen",
            "token_env",
            "lease_margin_s",
            "poll_s",
            "timeout_s",
            "time_format",
            "utc_offset_h",
        ],
    );
    let survey = without(
        SURVEY_FILE,
        &[
            "darkness_sun_altitude_deg",
            "coverage_share",
            "season_boost",
            "share_pull",
            "repeat_worth",
            "barycentric_spread_km_s",
            "typical_seeing_arcsec",
            "budget_ms",
            "seed",
        ],
    );
    let observatory = without(
        OBSERVATORY_FILE,
        &[
            "min_moon_separation_deg",
            "min_sun_separation_deg",
            "reference_seeing_arcsec",
            "zenith_hole_deg",
        ],
    );
    let full = check(&sources).unwrap();
    sources.files.insert(NIGHT_FILE.to_owned(), night);
    sources.files.insert(SURVEY_FILE.to_owned(), survey);
    sources
        .files
        .insert(OBSERVATORY_FILE.to_owned(), observatory);
    let bare = check(&sources).unwrap();
    assert_eq!(bare.survey, full.survey);
    assert_eq!(bare.weather, full.weather);
    assert_eq!(bare.daemon, full.daemon);
}
