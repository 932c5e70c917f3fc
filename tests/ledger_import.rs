//! `log import` through the real program: records from CSV and from FITS headers that another
//! library wrote.

mod keeper;

use std::fs;
use std::path::Path;

use keeper::{Scratch, nightwright};
use nightwright::catalogue::TargetId;
use nightwright::ledger::SqliteLedger;
use nightwright::night::{Fact, Lease};
use nightwright::ports::Ledger;
use nightwright::record::{EntryKind, Exposures, Outcome, QueueEntry, ValueParts, Visit, VisitId};
use nightwright::time::{NightDate, Span, Utc};
use serde_json::Value;

/// A star of the shipped configuration.
const STAR: &str = "KR0016-56";

const HISTORY: &str = "target,utc_mid,exposure_s,snr,rv_error_m_s
KR0016-56,2026-11-01T23:30:00Z,900,80,1.2
KR0030-02,2026-11-01T23:50:00.250Z,600.5,,
KR0016-56,2026-11-02T22:10:00Z,900,75,
NO-SUCH-STAR,2026-11-02T22:10:00Z,900,75,
KR0016-56,2026-11-02T22:10:00Z,900,75,
";

fn import(scratch: &Scratch, from: &Path, more: &[&str]) -> Value {
    let from = from.to_str().unwrap();
    let mut args = vec![
        "log",
        "import",
        from,
        "--json",
        "--ledger",
        scratch.ledger(),
    ];
    args.extend(more);
    let answer = nightwright(&args);
    assert!(answer.code < 2, "{}", answer.err);
    serde_json::from_str(&answer.out).unwrap()
}

fn counts(report: &Value) -> (u64, u64, u64) {
    let count = |key: &str| report[key].as_u64().unwrap();
    (count("taken"), count("already_known"), count("refused"))
}

fn visits(scratch: &Scratch) -> Vec<Value> {
    let answer = nightwright(&["log", "list", "--json", "--ledger", scratch.ledger()]);
    assert_eq!(answer.code, 0, "{}", answer.err);
    serde_json::from_str(&answer.out).unwrap()
}

#[test]
fn a_record_counts_once_however_its_file_is_written() {
    let scratch = Scratch::new();
    let file = scratch.file("history.csv", HISTORY);
    let dry = import(&scratch, &file, &["--dry-run"]);
    assert_eq!(counts(&dry), (3, 1, 1));
    assert!(!Path::new(scratch.ledger()).exists());
    let first = import(&scratch, &file, &[]);
    assert_eq!(counts(&first), (3, 1, 1));
    let refusal = &first["refusals"][0];
    assert_eq!(refusal["at"], "line 5");
    assert!(refusal["reason"].as_str().unwrap().contains("NO-SUCH-STAR"));
    let before = visits(&scratch);
    assert_eq!(counts(&import(&scratch, &file, &[])), (0, 4, 1));

    let windows = format!("\u{feff}{}", HISTORY.replace('\n', "\r\n"));
    let windows = scratch.file("windows.csv", &windows);
    assert_eq!(counts(&import(&scratch, &windows, &[])), (0, 4, 1));
    // The same instants, under other names and as modified Julian dates: MJD 61345 is 2026-11-01
    // (MJD 51544.5 is J2000.0).
    let other = "when,star,t\n61345.97916666667,KR0016-56,900\n61346.92361111111,KR0016-56,900\n";
    let other = scratch.file("other.csv", other);
    let mapping = ["target=star", "mjd_mid=when", "exposure_s=t"];
    let mapping: Vec<&str> = mapping.iter().flat_map(|m| ["--column", *m]).collect();
    assert_eq!(counts(&import(&scratch, &other, &mapping)), (0, 2, 0));
    assert_eq!(visits(&scratch), before);
}

#[test]
fn an_amended_record_does_not_come_back() {
    let scratch = Scratch::new();
    let file = scratch.file("history.csv", HISTORY);
    import(&scratch, &file, &[]);
    let id = visits(&scratch)[0]["visit"].as_str().unwrap().to_owned();
    let moved = "2026-11-01T21:00:00Z";
    let args = [
        "log",
        "amend",
        &id,
        "--at",
        moved,
        "--why",
        "clock",
        "--ledger",
        scratch.ledger(),
    ];
    assert_eq!(nightwright(&args).code, 0);
    assert_eq!(counts(&import(&scratch, &file, &[])), (0, 4, 1));
}

#[test]
fn imported_times_are_carried_to_the_barycentre() {
    // The light-time between the Earth and the barycentre is at most 499 s plus the Sun's own
    // distance from it (common practice, no source), and TDB − UTC is 69.184 s in 2026 (TT − TAI
    // 32.184 s, TAI − UTC 37 s).
    let scratch = Scratch::new();
    import(&scratch, &scratch.file("history.csv", HISTORY), &[]);
    let bjd: f64 = visits(&scratch)[0]["bjd_tdb"]
        .as_str()
        .unwrap()
        .parse()
        .unwrap();
    let jd_utc = 2_461_345.5 + 23.5 / 24.0;
    let light_time_s = (bjd - jd_utc) * 86_400.0 - 69.184;
    assert!(
        light_time_s.abs() < 510.0 && light_time_s != 0.0,
        "{light_time_s}"
    );
}

#[test]
fn nothing_is_kept_of_a_file_that_is_no_table() {
    let scratch = Scratch::new();
    let check = |text: &str, word: &str| {
        let file = scratch.file("bad.csv", text);
        let args = [
            "log",
            "import",
            file.to_str().unwrap(),
            "--ledger",
            scratch.ledger(),
        ];
        let answer = nightwright(&args);
        assert_eq!(answer.code, 2, "{text}: {}", answer.err);
        assert!(answer.err.contains(word), "{}", answer.err);
        assert!(!Path::new(scratch.ledger()).exists());
    };
    check("", "header");
    check("target,exposure_s\nA,1\n", "utc_mid");
    check("target,utc_mid\nA,1\n", "exposure_s");
    check("utc_mid,exposure_s\nA,1\n", "target");
    check("target;target;utc_mid;exposure_s\n", "twice");
    let missing = ["log", "import", "nowhere.csv", "--ledger", scratch.ledger()];
    assert_eq!(nightwright(&missing).code, 2);
}

fn leased(outcome: Option<Outcome>, scratch: &Scratch) {
    let night = NightDate::parse("2026-11-03").unwrap();
    let at = |text: &str| Utc::parse(text).unwrap();
    let (start, end) = (at("2026-11-03T22:00:00Z"), at("2026-11-03T22:20:00Z"));
    let id = VisitId::of(night, 1);
    let exposures = Exposures {
        count: 2,
        seconds: 500.0,
    };
    let entry = QueueEntry {
        kind: EntryKind::Science,
        subject: TargetId::new(STAR),
        start,
        end,
        setup_s: 60.0,
        exposures,
        predicted_rv_error_m_s: Some(1.1),
        airmass: None,
        altitude_deg: None,
        azimuth_deg: None,
        moon_separation_deg: None,
        value: ValueParts::default(),
        because: String::new(),
    };
    let visit = Visit {
        id: id.clone(),
        night,
        kind: EntryKind::Science,
        subject: entry.subject.clone(),
        began: start,
        exposing: Span::new(start, start),
        exposed_s: 0.0,
        planned: exposures,
        outcome: outcome.unwrap_or(Outcome::Done),
        credit: 0.0,
        airmass: None,
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: Some(1.1),
        mid_bjd_tdb: None,
        note: String::new(),
    };
    let lease = Lease {
        visit: id,
        entry,
        revision: 1,
        claim_key: "claim".to_owned(),
        holder: "dome".to_owned(),
        granted: start.plus_ms(-60_000),
        expires: end.plus_ms(600_000),
    };
    let mut facts = vec![Fact::LeaseGranted(lease)];
    if outcome.is_some() {
        facts.push(Fact::VisitEnded {
            at: end.plus_ms(600_000),
            report_key: "expiry".to_owned(),
            visit,
        });
    }
    let mut ledger = SqliteLedger::open(Path::new(scratch.ledger())).unwrap();
    ledger.append(night, &facts).unwrap();
}

const LATE: &str = "target,utc_mid,exposure_s,snr,rv_error_m_s
KR0016-56,2026-11-03T22:10:00Z,750,60,1.9
";

#[test]
fn a_record_settles_the_lease_on_which_no_word_came() {
    let scratch = Scratch::new();
    leased(Some(Outcome::Unreported), &scratch);
    let file = scratch.file("late.csv", LATE);
    let report = import(&scratch, &file, &[]);
    assert_eq!(counts(&report), (1, 0, 0));
    assert_eq!(report["settled"][0], "2026-11-03-0001");
    assert_eq!(counts(&import(&scratch, &file, &[])), (0, 1, 0));
    let standing = visits(&scratch);
    assert_eq!(standing.len(), 1);
    let visit = &standing[0];
    // 750 s of the 2 × 500 s planned.
    assert_eq!(
        (visit["outcome"].as_str(), visit["credit"].as_f64()),
        (Some("short"), Some(0.75))
    );
    assert_eq!(visit["predicted_rv_error_m_s"], 1.1);
    assert_eq!(visit["mid"], "2026-11-03T22:10:00.000Z");
}

#[test]
fn a_record_of_a_visit_under_way_waits() {
    let scratch = Scratch::new();
    leased(None, &scratch);
    let report = import(&scratch, &scratch.file("late.csv", LATE), &[]);
    assert_eq!(counts(&report), (0, 0, 1));
    assert_eq!(visits(&scratch).len(), 0);
}

/// The headers of `tests/spectra`, written by astropy 8.0.2; see `make_spectra.py` there.
fn spectra(scratch: &Scratch) -> std::path::PathBuf {
    let folder = scratch.path("spectra");
    fs::create_dir(&folder).unwrap();
    let shipped = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/spectra");
    for entry in fs::read_dir(shipped).unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_some_and(|e| e == "fits") {
            fs::copy(&path, folder.join(path.file_name().unwrap())).unwrap();
        }
    }
    folder
}

#[test]
fn headers_of_another_library_are_read() {
    let scratch = Scratch::new();
    let folder = spectra(&scratch);
    let whole = fs::read(folder.join("with_data.fits")).unwrap();
    fs::write(folder.join("cut_in_data.fits"), &whole[..3000]).unwrap();
    fs::write(folder.join("cut_in_header.fits"), &whole[..1000]).unwrap();
    fs::write(folder.join("empty.fits"), "").unwrap();
    fs::write(folder.join("text.fits"), "no such thing\n".repeat(500)).unwrap();
    let more = [
        "--radius-arcsec",
        "3",
        "--column",
        "mjd_mid=SPEC.MID.MJD",
        "--column",
        "rv_error_m_s=SPEC.RV.ERR",
    ];
    let report = import(&scratch, &folder, &more);
    let mids: Vec<String> = visits(&scratch)
        .iter()
        .map(|visit| {
            assert_eq!(visit["target"], STAR);
            visit["mid"].as_str().unwrap().to_owned()
        })
        .collect();
    assert_eq!(
        mids,
        [
            "2026-10-01T23:30:00.000Z",
            // MJD 61315 is 2026-10-02 (MJD 51544.5 is J2000.0).
            "2026-10-02T00:00:00.000Z",
            // TAI − UTC = 37 s.
            "2026-10-03T23:30:00.000Z",
            "2026-10-04T12:07:30.000Z",
            "2026-10-05T23:30:00.000Z",
            "2026-10-08T23:30:00.000Z",
            "2026-10-10T23:30:00.000Z",
        ]
    );
    let refusals = report["refusals"].as_array().unwrap();
    let refused: Vec<&str> = refusals
        .iter()
        .map(|refusal| refusal["at"].as_str().unwrap())
        .map(|at| at.rsplit('/').next().unwrap())
        .collect();
    assert_eq!(
        refused,
        [
            "cut_in_data.fits",
            "cut_in_header.fits",
            "empty.fits",
            "no_date.fits",
            "other_scale.fits",
            "place_of_2016.fits",
            "stranger.fits",
            "text.fits"
        ]
    );
    assert_eq!(counts(&import(&scratch, &folder, &more)), (0, 7, 8));
}
