//! `audit` through the real binary, on a real ledger.

use std::path::Path;
use std::process::Output;
use std::sync::OnceLock;

use assert_cmd::Command;
use serde_json::Value;

fn nightwright(args: &[&str]) -> Output {
    Command::cargo_bin("nightwright")
        .expect("the binary is built")
        .args(args)
        .output()
        .expect("the binary runs")
}

fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

fn audit(ledger: &Path, more: &[&str]) -> Output {
    let ledger = ledger.to_str().expect("a path in UTF-8");
    let args: Vec<&str> = ["audit", "--ledger", ledger]
        .into_iter()
        .chain(more.iter().copied())
        .collect();
    nightwright(&args)
}

/// A copy of a ledger with three rehearsed nights, which are rehearsed once for all tests.
fn rehearsed(folder: &Path) -> std::path::PathBuf {
    static NIGHTS: OnceLock<Vec<u8>> = OnceLock::new();
    let ledger = folder.join("nights.sqlite");
    let bytes = NIGHTS.get_or_init(|| {
        let scratch = tempfile::tempdir().expect("a scratch folder");
        let made = scratch.path().join("made.sqlite");
        let made_path = made.to_str().expect("a path in UTF-8");
        let nights = ["--night", "2026-12-01", "--nights", "3", "--seed", "2"];
        let output = nightwright(&[&["rehearse"], &nights[..], &["--ledger", made_path]].concat());
        assert!(output.status.success(), "{}", said(&output));
        std::fs::read(&made).expect("the ledger was made")
    });
    std::fs::write(&ledger, bytes).expect("a scratch file");
    ledger
}

#[test]
fn a_rehearsed_ledger_is_audited() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--json"]);
    assert!(output.status.success(), "{}", said(&output));
    let told: Value = serde_json::from_slice(&output.stdout).expect("it prints JSON");
    assert_eq!(told["until"], "2026-12-03");
    let targets = told["targets"].as_array().expect("targets");
    assert_eq!(targets.len(), 78);
    let mut visits = 0;
    for target in targets {
        let number = |key: &str| target[key].as_f64().expect("a number");
        let owed = (number("wanted") - number("credited")).max(0.0);
        assert!((number("owed") - owed).abs() < 1e-3, "{target}");
        visits += target["visits"].as_u64().expect("a count");
        for candidate in target["candidates"].as_array().expect("candidates") {
            let gap = candidate["largest_phase_gap"].as_f64().expect("a gap");
            assert!((0.0..=1.0).contains(&gap));
        }
    }
    for target in targets {
        let parts = target["owed_by_cause"].as_object().expect("causes");
        let sum: f64 = parts.values().filter_map(Value::as_f64).sum();
        let owed = target["owed"].as_f64().expect("a number");
        assert!((sum - owed).abs() < 1e-9, "{target}");
    }
    let owed = |list: &str| -> f64 {
        let rows = told[list].as_array().expect("a list");
        rows.iter().filter_map(|row| row["owed"].as_f64()).sum()
    };
    assert!((owed("programmes") - owed("targets")).abs() < 1e-2);
    for month in told["darkness"].as_array().expect("months") {
        let parts = month["split_ms"].as_object().expect("parts");
        let sum: i64 = parts.values().filter_map(Value::as_i64).sum();
        assert_eq!(Some(sum), month["darkness_ms"].as_i64());
        assert_eq!(month["nights"], 3);
    }
    let list = nightwright(&[
        "log",
        "list",
        "--json",
        "--ledger",
        ledger.to_str().unwrap(),
    ]);
    let listed: Value = serde_json::from_slice(&list.stdout).expect("it prints JSON");
    let credited = listed
        .as_array()
        .expect("an array")
        .iter()
        .filter(|v| v["kind"] == "science" && v["credit"].as_f64().is_some_and(|c| c > 0.0))
        .count() as u64;
    assert!(credited > 20, "{credited}");
    assert_eq!(visits, credited);
}

#[test]
fn the_table_fits_a_terminal_and_one_star_can_be_asked_for() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--target", "KR0512-21"]);
    assert!(output.status.success(), "{}", said(&output));
    let text = String::from_utf8_lossy(&output.stdout);
    assert!(
        text.lines().all(|line| line.chars().count() <= 100),
        "{text}"
    );
    // One star with two candidates: two lines in its table.
    assert_eq!(text.matches("KR").count(), 1, "{text}");
    assert!(text.contains("21.2157"), "{text}");
}

#[test]
fn what_cannot_be_audited_is_refused_and_left_alone() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let absent = folder.path().join("absent.sqlite");
    let output = audit(&absent, &[]);
    assert_eq!(output.status.code(), Some(2));
    assert!(
        said(&output).contains("there is no ledger"),
        "{}",
        said(&output)
    );
    assert!(!absent.exists());

    let noise = folder.path().join("noise.sqlite");
    std::fs::write(&noise, vec![0x5a; 5000]).expect("a scratch file");
    let output = audit(&noise, &[]);
    assert!(matches!(output.status.code(), Some(2 | 3)), "{output:?}");
    assert_eq!(
        std::fs::read(&noise).expect("still there"),
        vec![0x5a; 5000]
    );

    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--target", "Nowhere"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("no target is called Nowhere"));
    let output = audit(&ledger, &["--until", "next week"]);
    assert_eq!(output.status.code(), Some(2));
}

#[test]
fn a_span_of_nights_csv_and_the_page_tell_the_same() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let one_night = audit(
        &ledger,
        &["--since", "2026-12-03", "--until", "2026-12-03", "--json"],
    );
    let told: Value = serde_json::from_slice(&one_night.stdout).expect("it prints JSON");
    assert_eq!(told["recorded_nights"], 1);
    let visits: u64 = told["targets"]
        .as_array()
        .expect("targets")
        .iter()
        .filter_map(|target| target["visits"].as_u64())
        .sum();
    let text = audit(&ledger, &["--since", "2026-12-03"]);
    let text = String::from_utf8_lossy(&text.stdout).into_owned();
    assert!(
        text.contains("Nights 2026-12-03 to 2026-12-03, 1 of them recorded"),
        "{text}"
    );
    assert!(
        text.lines().all(|line| line.chars().count() <= 100),
        "{text}"
    );

    let rows = audit(&ledger, &["--since", "2026-12-03", "--csv"]);
    let mut reader = csv::Reader::from_reader(rows.stdout.as_slice());
    let mut counted: std::collections::BTreeMap<String, u64> = Default::default();
    for row in reader.records() {
        let row = row.expect("a row as long as the header");
        counted.insert(row[0].to_owned(), row[2].parse().expect("a count"));
    }
    assert_eq!(counted.len(), 78);
    assert_eq!(counted.values().sum::<u64>(), visits);

    let page = folder.path().join("audit.html");
    let output = audit(
        &ledger,
        &["--html", page.to_str().expect("a path in UTF-8")],
    );
    assert!(output.status.success(), "{}", said(&output));
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        let mode = std::fs::metadata(&page)
            .expect("it is there")
            .permissions()
            .mode();
        let plain = std::fs::metadata(&ledger)
            .expect("it is there")
            .permissions()
            .mode();
        assert_eq!(mode, plain, "as any file that is written under this mask");
    }
    let page = std::fs::read_to_string(&page).expect("the page is there");
    for outside in ["http:", "https:", "<script", " style=", "NaN", "inf\""] {
        assert!(!page.contains(outside), "{outside}");
    }
    assert!(page.contains("id=\"star-KR0512-21\""));
}

#[test]
fn spans_that_end_before_they_begin_are_refused() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = rehearsed(folder.path());
    let output = audit(&ledger, &["--since", "2026-12-03", "--until", "2026-12-02"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("comes after the last night counted"));
}

#[test]
fn nights_without_a_record_are_called_so() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = folder.path().join("imported.sqlite");
    let csv = folder.path().join("one.csv");
    let lines = "target,utc_mid,exposure_s,snr,rv_error_m_s\n\
                 KR0512-21,2026-12-02T03:00:00Z,900,80,2.0\n";
    std::fs::write(&csv, lines).expect("a file");
    let file = |path: &Path| path.to_str().expect("a path in UTF-8").to_owned();
    let output = nightwright(&["log", "import", &file(&csv), "--ledger", &file(&ledger)]);
    assert!(output.status.success(), "{}", said(&output));
    let output = audit(&ledger, &["--until", "2026-12-08", "--json"]);
    assert!(output.status.success(), "{}", said(&output));
    let told: Value = serde_json::from_slice(&output.stdout).expect("it prints JSON");
    assert_eq!(told["recorded_nights"], 0);
    let mut unrecorded = 0;
    for target in told["targets"].as_array().expect("targets") {
        let visited = target["target"] == "KR0512-21";
        assert_eq!(target["visits"], u64::from(visited));
        assert_eq!(target["gaps_days"]["median"], Value::Null);
        let causes = target["owed_by_cause"].as_object().expect("causes");
        assert!(
            causes
                .keys()
                .all(|cause| cause == "unrecorded" || cause == "not_due"),
            "{target}"
        );
        unrecorded += usize::from(causes.contains_key("unrecorded"));
    }
    assert!(unrecorded > 20, "{unrecorded}");
    let page = folder.path().join("imported.html");
    let output = audit(&ledger, &["--until", "2026-12-08", "--html", &file(&page)]);
    assert!(output.status.success(), "{}", said(&output));
}

/// A visit on each of 64 even phases of a circular orbit: σ(K) = σ √(2/N) with zero point, amplitude
/// and phase free (the information matrix is then diagonal, N/σ² and twice N/2σ²).
#[test]
fn even_phases_give_the_textbook_error_of_k() {
    let folder = tempfile::tempdir().expect("a scratch folder");
    let ledger = folder.path().join("even.sqlite");
    let csv = folder.path().join("even.csv");
    let (visits, sigma_m_s, period_d) = (64, 1.7, 6.39953);
    let mut lines = "target,mjd_mid,exposure_s,rv_error_m_s\n".to_owned();
    for number in 0..visits {
        // 5 periods and a 64th from each to the next.
        let mjd = 61_375.1 + f64::from(number) * period_d * (5.0 + 1.0 / f64::from(visits));
        lines.push_str(&format!("KR0512-21,{mjd:.6},300,{sigma_m_s}\n"));
    }
    std::fs::write(&csv, lines).expect("a file");
    let file = |path: &Path| path.to_str().expect("a path in UTF-8").to_owned();
    let output = nightwright(&["log", "import", &file(&csv), "--ledger", &file(&ledger)]);
    assert!(output.status.success(), "{}", said(&output));
    let output = audit(&ledger, &["--target", "KR0512-21", "--json"]);
    let told: Value = serde_json::from_slice(&output.stdout).expect("it prints JSON");
    let star = &told["targets"][0];
    let candidate = &star["candidates"][0];
    let period = candidate["period_days"].as_f64().expect("a period");
    assert!((period - period_d).abs() < 1e-3, "{period}");
    let expected = sigma_m_s * (2.0 / f64::from(visits)).sqrt();
    let found = candidate["sigma_k_m_s"].as_f64().expect("an error");
    // The light time to the barycentre, up to 8 minutes of 6 days, makes the phases a little uneven.
    assert!((found / expected - 1.0).abs() < 0.01, "{found} {expected}");
    let with_jitter = candidate["sigma_k_with_jitter_m_s"].as_f64();
    assert!(with_jitter.expect("an error") > found);
    assert!(candidate["largest_phase_gap"].as_f64().expect("a gap") < 0.03);
    // 5 + 1/64 periods from visit to visit, and nothing else.
    let gap = star["gaps_days"]["longest"].as_f64().expect("a gap");
    assert!((gap - 5.015625 * period_d).abs() < 0.02, "{gap}");
}
