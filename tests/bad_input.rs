//! Bad configurations through the real program: a clear message with file, line and key, exit code
//! 2 or 3, nothing overwritten, no panic.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use tempfile::TempDir;

/// A configuration folder written by `init`, to be spoilt.
struct Folder {
    _root: TempDir,
    path: PathBuf,
}

struct Answer {
    code: i32,
    out: String,
    err: String,
}

fn nightwright(args: &[&str]) -> Answer {
    let output = Command::cargo_bin("nightwright")
        .unwrap()
        .env_remove("NIGHTWRIGHT_CONFIG")
        .args(args)
        .output()
        .unwrap();
    Answer {
        code: output.status.code().expect("an exit code, no signal"),
        out: String::from_utf8_lossy(&output.stdout).into_owned(),
        err: String::from_utf8_lossy(&output.stderr).into_owned(),
    }
}

impl Folder {
    fn new() -> Self {
        let root = TempDir::new().unwrap();
        let path = root.path().join("survey");
        let answer = nightwright(&["init", path.to_str().unwrap()]);
        assert_eq!(answer.code, 0, "{}", answer.err);
        Folder { _root: root, path }
    }

    fn file(&self, name: &str) -> PathBuf {
        self.path.join(name)
    }

    fn replace(&self, name: &str, from: &str, to: &str) -> &Self {
        let text = fs::read_to_string(self.file(name)).unwrap();
        assert!(text.contains(from), "{name} holds no {from}");
        fs::write(self.file(name), text.replacen(from, to, 1)).unwrap();
        self
    }

    fn csv(&self, bytes: impl AsRef<[u8]>) -> &Self {
        let _ = fs::remove_file(self.file("targets.toml"));
        fs::write(self.file("targets.csv"), bytes).unwrap();
        self
    }

    fn line_of(&self, name: &str, part: &str) -> usize {
        let text = fs::read_to_string(self.file(name)).unwrap();
        1 + text.lines().position(|l| l.contains(part)).unwrap()
    }

    fn check(&self) -> Answer {
        let before = contents(&self.path);
        // As of a fixed night: ephemerides and Earth rotation age with the calendar.
        let folder = self.path.to_str().unwrap();
        let answer = nightwright(&["check", "--night", "2026-12-01", "--config", folder]);
        assert_eq!(before, contents(&self.path), "check changes nothing");
        assert!(!answer.err.contains("panicked"), "{}", answer.err);
        answer
    }

    /// The check ends with the code, and its words hold every part.
    fn refused(&self, code: i32, parts: &[&str]) {
        let answer = self.check();
        assert_eq!(answer.code, code, "{}{}", answer.out, answer.err);
        for part in parts {
            assert!(answer.err.contains(part), "no '{part}' in:\n{}", answer.err);
        }
    }

    /// The check ends with the code, and standard output holds every part.
    fn told(&self, code: i32, parts: &[&str]) {
        let answer = self.check();
        assert_eq!(answer.code, code, "{}{}", answer.out, answer.err);
        for part in parts {
            assert!(answer.out.contains(part), "no '{part}' in:\n{}", answer.out);
        }
    }
}

fn contents(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .filter(|path| path.is_file())
        .map(|path| (path.clone(), fs::read(&path).unwrap()))
        .collect()
}

const HEADER: &str = "id,ra_deg,dec_deg,epoch,pm_ra_mas_yr,pm_dec_mas_yr,parallax_mas,radial_velocity_km_s,magnitude";
const ROW: &str = "A-1,10.5,-45.25,2016.0,120.5,-80.25,95.1,12.5,8.4";

#[test]
fn the_starter_is_sound() {
    Folder::new().told(0, &["78 targets: nothing wrong, 0 impossible, 0 doubtful"]);
}

#[test]
fn every_fault_of_every_file_is_told_at_once() {
    let folder = Folder::new();
    folder
        .replace("site.toml", "latitude_deg = -29.412", "latitude_deg = 123")
        .replace("observatory.toml", "throughput = 0.05", "throughput = nan")
        .replace("survey.toml", "share = 0.45", "share = 45")
        .replace("night.toml", "release_at = 82.0", "release_at = 95.0")
        .replace(
            "targets.toml",
            "epoch = 2016.0\npm_ra",
            "epoch = 16 \npm_ra",
        );
    let at = |name: &str, part: &str| format!("{name}:{}: ", folder.line_of(name, part));
    folder.refused(
        2,
        &[
            &format!(
                "{}site.latitude_deg: found 123, must be a number from -90 to 90 degrees",
                at("site.toml", "latitude_deg = 123")
            ),
            &format!(
                "{}instrument.throughput: found nan, must be a number above 0 to 1",
                at("observatory.toml", "throughput = nan")
            ),
            &format!(
                "{}programme.temperate.share: found 45",
                at("survey.toml", "share = 45")
            ),
            &format!(
                "{}weather.rule[2].release_at: found 95, must be at or below hold_at",
                at("night.toml", "release_at = 95.0")
            ),
            &format!(
                "{}target.KR0016-56.epoch: found 16, must be a number from 1900 to 2100",
                at("targets.toml", "epoch = 16 ")
            ),
            "error: 5 faults in the settings",
        ],
    );
}

#[test]
fn a_broken_file_does_not_hide_the_others() {
    let folder = Folder::new();
    folder.replace("site.toml", "[site]", "[site").replace(
        "observatory.toml",
        "settle_s = 8.0",
        "settle_s = -8.0",
    );
    let line = folder.line_of("site.toml", "[site");
    folder.refused(
        2,
        &[
            &format!("site.toml:{line}: this is no TOML"),
            "telescope.settle_s: found -8.0, must be a number from 0 to 3600 seconds",
        ],
    );
}

#[test]
fn unknown_keys_and_other_units_get_a_hint() {
    let folder = Folder::new();
    folder
        .replace(
            "site.toml",
            "height_m = 1480.0",
            "height_m = 1480.0\nheigth_m = 5",
        )
        .replace("observatory.toml", "aperture_m = 0.8 ", "aperture_cm = 80 ")
        .replace("targets.toml", "\njitter_m_s = ", "\njitter_km_s = ")
        .replace("survey.toml", "[allocation]", "[alocation]");
    folder.refused(
        2,
        &[
            "site.heigth_m: unknown key\n  hint: did you mean height_m?",
            "telescope.aperture_m: is missing; it must be a number above 0 to 12 metres",
            "telescope.aperture_cm: unknown key\n  hint: this is in centimetres, but aperture_m in metres is wanted",
            "jitter_km_s: unknown key\n  hint: this is in kilometres per second, but jitter_m_s",
            "alocation: unknown key\n  hint: did you mean allocation?",
        ],
    );
}

#[test]
fn values_of_the_wrong_kind_are_named() {
    let folder = Folder::new();
    folder
        .replace(
            "site.toml",
            "longitude_deg = 18.734",
            "longitude_deg = \"18:44:02\"",
        )
        .replace(
            "observatory.toml",
            "mount = \"alt-azimuth\"",
            "mount = \"dobson\"",
        )
        .replace(
            "observatory.toml",
            "slew_rate_deg_s = [4.0, 3.0]",
            "slew_rate_deg_s = 4.0",
        )
        .replace(
            "night.toml",
            "listen = \"127.0.0.1:7117\"",
            "listen = \"localhost\"",
        )
        .replace(
            "survey.toml",
            "# first_night = \"2026-12-01\"",
            "first_night = \"1 Nov\"",
        )
        .replace("targets.toml", "\nmagnitude = ", "\nmagnitude = inf #");
    folder.refused(
        2,
        &[
            "site.longitude_deg: found \"18:44:02\", must be a number from -180 to 180 degrees, east positive",
            "telescope.mount: found \"dobson\", must be one of \"alt-azimuth\", \"equatorial\"",
            "telescope.slew_rate_deg_s: found 4.0, must be a list of 2 numbers",
            "daemon.listen: found \"localhost\", must be address and port like 127.0.0.1:7117",
            "survey.first_night: found \"1 Nov\", must be the date of a night like 2026-12-01",
            "magnitude: found inf, must be a number from -2 to 25 magnitudes",
        ],
    );
}

#[test]
fn a_target_twice_is_refused_with_both_places() {
    let folder = Folder::new();
    folder.replace("targets.toml", "id = \"KR0030-02\"", "id = \"KR0016-56\"");
    let first = folder.line_of("targets.toml", "id = \"KR0016-56\"") - 1;
    folder.refused(
        2,
        &[
            "target.KR0016-56.id: found \"KR0016-56\" a second time, must be once",
            &format!("targets.toml:{first})"),
        ],
    );
}

#[test]
fn csv_in_any_dress_is_read() {
    let plain = format!("{HEADER}\n{ROW}\n");
    let check = |dressed: Vec<u8>| {
        let folder = Folder::new();
        folder.csv(dressed);
        folder.told(0, &["1 targets: nothing wrong"]);
    };
    check(plain.clone().into_bytes());
    check(plain.replace('\n', "\r\n").into_bytes());
    check(format!("\u{feff}{plain}").into_bytes());
    check(format!("\u{feff}{}", plain.replace('\n', "\r\n")).into_bytes());
    check(plain.trim_end().replace(',', " , ").into_bytes());
}

#[test]
fn toml_in_any_dress_is_read() {
    let folder = Folder::new();
    for name in ["site.toml", "targets.toml"] {
        let text = fs::read_to_string(folder.file(name)).unwrap();
        let dressed = format!("\u{feff}{}", text.replace('\n', "\r\n"));
        fs::write(folder.file(name), dressed).unwrap();
    }
    folder.told(0, &["78 targets: nothing wrong"]);
}

#[test]
fn csv_without_a_column_names_it() {
    let header = HEADER.replace("pm_dec_mas_yr,", "");
    let row = ROW.replace("-80.25,", "");
    let folder = Folder::new();
    folder.csv(format!("{header}\n{row}\n"));
    folder.refused(
        2,
        &["targets.csv:1: pm_dec_mas_yr: this column is missing from the header"],
    );
}

#[test]
fn csv_faults_carry_line_and_column() {
    let folder = Folder::new();
    folder.csv(format!(
        "{HEADER},colour\r\n{ROW},red\r\n\
         A-2,360.0,-45,2016,1,1,1,1,8,blue\r\n\
         A-1,12h30m,-95,2016,1,1,1,NaN,,blue\r\n\
         A-4,1,2\r\n"
    ));
    folder.refused(
        2,
        &[
            "targets.csv:1: colour (column 10): unknown column",
            "targets.csv:3: target.A-2.ra_deg (column 2): found \"360.0\", must be a number from 0 to below 360 degrees",
            "targets.csv:4: target.A-1.ra_deg (column 2): found \"12h30m\"",
            "targets.csv:4: target.A-1.dec_deg (column 3): found \"-95\"",
            "targets.csv:4: target.A-1.radial_velocity_km_s (column 8): found \"NaN\"",
            "targets.csv:4: target.A-1.magnitude: is missing",
            "targets.csv:4: target.A-1.id (column 1): found \"A-1\" a second time",
            "targets.csv:5: found 3 cells, must be 10 as in the header",
        ],
    );
}

#[test]
fn csv_columns_reach_candidates_and_windows() {
    let folder = Folder::new();
    folder.csv(format!(
        "{HEADER},candidate_period_d,candidate_conjunction_bjd_tdb,window_transit_h,window_purpose\n\
         {ROW},3.2,2461100.5,1.5,catch\n\
         B-2,200.5,-45.25,2016.0,120.5,-80.25,95.1,12.5,8.4,-3.2,2461100.5,1.5,watch\n"
    ));
    folder.refused(
        2,
        &[
            "targets.csv:3: target.B-2.candidate[1].period_d (column 10): found \"-3.2\"",
            "targets.csv:3: target.B-2.window[1].purpose (column 13): found \"watch\", must be one of \"catch\", \"avoid\"",
            "error: 2 faults",
        ],
    );
}

#[test]
fn csv_by_semicolons_is_explained() {
    let folder = Folder::new();
    folder.csv(format!("{HEADER}\n{ROW}\n").replace(',', ";"));
    folder.refused(
        2,
        &["targets.csv:1: the columns are separated by semicolons"],
    );
}

#[test]
fn empty_lists_are_refused() {
    let folder = Folder::new();
    fs::write(folder.file("targets.toml"), "# nobody\n").unwrap();
    folder.refused(2, &["targets.toml: holds no target"]);
    folder.csv(format!("{HEADER}\n"));
    folder.refused(2, &["targets.csv: holds no target"]);
    folder.csv("");
    folder.refused(
        2,
        &["targets.csv: is empty; must start with the header id,ra_deg"],
    );
    fs::remove_file(folder.file("targets.csv")).unwrap();
    folder.refused(2, &["there is neither targets.toml nor targets.csv"]);
}

#[test]
fn both_lists_need_a_word() {
    let folder = Folder::new();
    let csv = format!("{HEADER}\n{ROW}\n");
    fs::write(folder.file("targets.csv"), csv).unwrap();
    folder.refused(
        2,
        &[
            "targets.csv: stands beside targets.toml",
            "[survey] targets =",
        ],
    );
    let both = "# targets = [\"targets.toml\"]";
    folder.replace(
        "survey.toml",
        both,
        "targets = [\"targets.toml\", \"targets.csv\"]",
    );
    folder.told(0, &["79 targets: nothing wrong"]);
    folder.replace(
        "survey.toml",
        "[\"targets.toml\", \"targets.csv\"]",
        "[\"targets.csv\"]",
    );
    folder.told(0, &["1 targets: nothing wrong"]);
    folder.replace("survey.toml", "[\"targets.csv\"]", "[\"stars.csv\"]");
    folder.refused(2, &["survey.targets: found \"stars.csv\", must be"]);
}

#[test]
fn other_encodings_are_refused_with_their_line() {
    let folder = Folder::new();
    let mut bytes = format!("{HEADER}\n").into_bytes();
    bytes.extend(b"\xc4-1,1,2,2016,0,0,1,0,8\n");
    folder.csv(bytes);
    folder.refused(
        2,
        &["targets.csv:2: found the byte 0xc4, must be UTF-8 text"],
    );
    let folder = Folder::new();
    fs::write(folder.file("night.toml"), b"\xff\xfe[\0w\0").unwrap();
    folder.refused(2, &["night.toml:1: found the byte 0xff"]);
}

#[test]
fn missing_files_and_folders_are_named() {
    let folder = Folder::new();
    fs::remove_file(folder.file("site.toml")).unwrap();
    folder.refused(
        2,
        &[
            "site.toml: this file is missing",
            "hint: `nightwright init DIR`",
        ],
    );
    let folder = Folder::new();
    fs::remove_file(folder.file("finals2000A.txt")).unwrap();
    folder.refused(
        2,
        &["finals2000A.txt: this file is missing, though site.earth_rotation names it"],
    );
    let nowhere = folder.path.join("nowhere");
    let answer = nightwright(&["check", "--config", nowhere.to_str().unwrap()]);
    assert_eq!(answer.code, 2);
    assert!(
        answer.err.contains("there is no configuration folder"),
        "{}",
        answer.err
    );
    assert!(answer.err.contains("because: "), "{}", answer.err);
}

#[test]
fn earth_rotation_is_read_as_well() {
    let folder = Folder::new();
    fs::write(folder.file("finals2000A.txt"), "no such thing\n").unwrap();
    folder.refused(2, &["finals2000A.txt: line 1: "]);
    let folder = Folder::new();
    let answer = nightwright(&[
        "check",
        "--night",
        "2029-01-01",
        "--config",
        folder.path.to_str().unwrap(),
    ]);
    assert_eq!(answer.code, 0, "{}", answer.err);
    let doubt = "site.earth_rotation: ";
    assert!(answer.out.contains(doubt), "{}", answer.out);
    assert!(answer.out.contains("not to 2029-01-01"), "{}", answer.out);
}

#[test]
fn what_cannot_be_read_is_the_machines_fault() {
    // A folder in the place of a file: unreadable for every user, root included.
    let folder = Folder::new();
    fs::remove_file(folder.file("survey.toml")).unwrap();
    fs::create_dir(folder.file("survey.toml")).unwrap();
    folder.refused(3, &["survey.toml: cannot be read: "]);
}

#[test]
fn secrets_have_no_place_in_the_files() {
    let folder = Folder::new();
    folder.replace("night.toml", "token_env", "token = \"hunter2\"\ntoken_env");
    let answer = folder.check();
    assert_eq!(answer.code, 2);
    assert!(
        answer.err.contains("daemon.token: a token has no place"),
        "{}",
        answer.err
    );
    assert!(!answer.err.contains("hunter2"), "{}", answer.err);
}

#[test]
fn a_stray_file_is_doubted() {
    let folder = Folder::new();
    fs::write(folder.file("target.toml"), "").unwrap();
    folder.told(
        0,
        &[
            "doubtful: ",
            "target.toml: nothing reads this file",
            "1 doubtful",
        ],
    );
}

#[test]
fn init_never_overwrites() {
    let folder = Folder::new();
    let before = contents(&folder.path);
    let answer = nightwright(&["init", folder.path.to_str().unwrap()]);
    assert_eq!(answer.code, 2);
    assert!(
        answer
            .err
            .contains("is not empty, and nothing is overwritten"),
        "{}",
        answer.err
    );
    assert_eq!(before, contents(&folder.path));
    let file = folder.file("site.toml");
    let answer = nightwright(&["init", file.to_str().unwrap()]);
    assert_eq!(answer.code, 2);
    assert!(
        answer.err.contains("is a file, not a folder"),
        "{}",
        answer.err
    );
    let answer = nightwright(&["init", "/proc/nightwright-cannot-be-made"]);
    assert_eq!(answer.code, 3, "{}", answer.err);
}

#[test]
fn findings_as_json_carry_their_places() {
    let folder = Folder::new();
    folder.replace(
        "site.toml",
        "latitude_deg = -29.412",
        "latitude_deg = -129.412",
    );
    let line = folder.line_of("site.toml", "latitude_deg = -129");
    let answer = nightwright(&["check", "--json", "--config", folder.path.to_str().unwrap()]);
    assert_eq!(answer.code, 2);
    let read: serde_json::Value = serde_json::from_str(&answer.out).unwrap();
    assert_eq!(read["usable"], false);
    let finding = &read["findings"][0];
    assert_eq!(finding["severity"], "wrong");
    assert_eq!(finding["line"], line);
    assert_eq!(finding["column"], 16);
    assert_eq!(finding["key"], "site.latitude_deg");
}

#[test]
fn what_astronomy_forbids_is_told_with_exit_code_one() {
    let folder = Folder::new();
    folder.csv(format!(
        "{HEADER},exposure_s,visits_per_night,separation_min,first_night,last_night,total_visits\n\
         NORTH,10,75.0,2016,0,0,90,0,8.5,900,,,,,\n\
         BRIGHT,20,-40,2016,0,0,90,0,-1.9,900,,,,,\n\
         FAINT,25,-40,2016,0,0,90,0,8.5,43000,,,,,\n\
         LONG,30,29.5,2016,0,0,90,0,8.5,12000,,,,,\n\
         OFTEN,40,-40,2016,0,0,90,0,8.5,900,10,120,,,\n\
         GONE,180,-5,2016,0,0,90,0,8.5,900,,,2027-09-10,2027-09-25,\n\
         MANY,60,-40,2016,0,0,90,0,8.5,900,,,2027-01-01,2027-02-01,500\n"
    ));
    folder.told(
        1,
        &[
            "impossible: ",
            "targets.csv:2: target.NORTH.dec_deg (column 3): never rises above -14.4 degrees, but its limit is 28.0",
            "targets.csv:3: target.BRIGHT.magnitude (column 9): saturates after",
            "targets.csv:4: target.FAINT.exposure_s (column 10): needs 43000 s of open shutter",
            "targets.csv:5: target.LONG.exposure_s (column 10): a visit takes 3.4 h, longer than the",
            "targets.csv:6: target.OFTEN.visits_per_night (column 11): 10 visits a night take 18.3 h",
            "targets.csv:7: target.GONE.last_night (column 14): there is no night from 2027-09-10 to 2027-09-25",
            "targets.csv:8: target.MANY.total_visits (column 15): found 500, but its cadence over the 32 nights",
            "7 impossible",
        ],
    );
}

#[test]
fn what_was_hardly_meant_is_doubted() {
    let folder = Folder::new();
    folder
        .replace(
            "site.toml",
            "longitude_deg = 18.734",
            "longitude_deg = -18.734",
        )
        .replace(
            "observatory.toml",
            "min_moon_separation_deg = 20.0",
            "min_moon_separation_deg = 120.0",
        )
        .replace(
            "observatory.toml",
            "min_sun_separation_deg = 40.0",
            "min_sun_separation_deg = 140.0",
        )
        .replace("survey.toml", "share = 0.45", "share = 0.95")
        .csv(format!(
            "{HEADER},candidate_period_d,candidate_period_error_d,candidate_conjunction_bjd_tdb\n\
             A,10,-40,2016,3000,0,90,0,8.5,3.0,0.1,2459000.5\n\
             B,10.0119,-40,2026.5,0,0,,,8.5,3.0,0.001,2461000.5\n"
        ));
    folder.told(
        0,
        &[
            "site.longitude_deg: found -18.734, where the sun's time is 3.2 h from the civil time",
            "is the sign wrong?",
            "telescope.min_moon_separation_deg: found 120",
            "telescope.min_sun_separation_deg: found 140",
            "programme: the shares add up to 1.50",
            "target.A.candidate[1].period_error_d (column 11): by ",
            "by 2026-12-01 the ephemeris",
            "the phase is lost",
            "the same star twice?",
            "no parallax_mas: taken as zero",
            "no temperature_k or spectral_class, here and for 1 more: taken as 3300 K",
            "KR2150-52 is on the target list: standard is left out of every night",
        ],
    );
}
