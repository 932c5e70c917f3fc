//! `sky` as a program: the sites and stars of `tests/reference/` through the command line, and bad
//! input.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use assert_cmd::Command;
use nightwright::ephemeris::{EarthRotation, HorizonProfile, Observer, Site, SkyInstant};
use nightwright::time::Utc;
use nightwright::units::Angle;
use nightwright::units::vector::{from_spherical, separation_rad};
use serde_json::Value;

type Row = BTreeMap<String, String>;

fn reference(name: &str) -> String {
    format!("{}/tests/reference/{name}", env!("CARGO_MANIFEST_DIR"))
}

fn table(name: &str) -> Vec<Row> {
    let mut reader = csv::Reader::from_path(reference(name)).unwrap();
    reader.deserialize().map(Result::unwrap).collect()
}

fn number(row: &Row, column: &str) -> f64 {
    row[column].parse().unwrap()
}

/// A folder made by `init`, with a reference site and the reference stars in it.
fn folder(site: &str) -> tempfile::TempDir {
    let home = tempfile::tempdir().unwrap();
    let folder = home.path().join("survey");
    let init = Command::cargo_bin("nightwright")
        .unwrap()
        .arg("init")
        .arg(&folder)
        .output()
        .unwrap();
    assert!(
        init.status.success(),
        "{}",
        String::from_utf8_lossy(&init.stderr)
    );
    let sites = table("sites.csv");
    let row = sites.iter().find(|row| row["site"] == site).unwrap();
    let text = format!(
        "[site]\nname = \"{site}\"\nlatitude_deg = {}\nlongitude_deg = {}\nheight_m = {}\n\
         earth_rotation = \"finals.txt\"\n",
        row["lat_deg"], row["lon_deg"], row["height_m"]
    );
    fs::write(folder.join("site.toml"), text).unwrap();
    fs::copy(
        reference("finals2000A.2024-2027"),
        folder.join("finals.txt"),
    )
    .unwrap();
    fs::remove_file(folder.join("targets.toml")).unwrap();
    let mut list = "id,ra_deg,dec_deg,epoch,pm_ra_mas_yr,pm_dec_mas_yr,parallax_mas,\
                    radial_velocity_km_s,magnitude\n"
        .to_owned();
    for star in table("stars.csv") {
        let columns = [
            "star",
            "ra_deg",
            "dec_deg",
            "epoch_jyear",
            "pmra_masyr",
            "pmdec_masyr",
            "plx_mas",
            "rv_kms",
        ];
        let values: Vec<&str> = columns
            .iter()
            .map(|column| star[*column].as_str())
            .collect();
        list.push_str(&format!("{},8.0\n", values.join(",")));
    }
    fs::write(folder.join("targets.csv"), list).unwrap();
    home
}

fn sky(home: &tempfile::TempDir, arguments: &[&str]) -> std::process::Output {
    Command::cargo_bin("nightwright")
        .unwrap()
        .current_dir(home.path())
        .args(["sky", "--config", "survey"])
        .args(arguments)
        .output()
        .unwrap()
}

fn json(home: &tempfile::TempDir, arguments: &[&str]) -> Value {
    let output = sky(home, arguments);
    let told = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{told}");
    serde_json::from_slice(&output.stdout).unwrap()
}

fn check_close(found: &Value, expected: &str, allowed_ms: i64, row: &Row) {
    match expected {
        "none" => assert!(found.is_null(), "{found} {row:?}"),
        text => {
            let found = Utc::parse(found.as_str().unwrap()).unwrap();
            let off = found - Utc::parse(text).unwrap();
            assert!(off.abs() <= allowed_ms, "{off} ms {row:?}");
        }
    }
}

/// Against skyfield's almanac (see `tests/reference/README.md`). The events are printed to 0.1 s;
/// 2 s leaves room for slow arctic twilights and for the analytical Moon, whose exact tolerances
/// `sky_reference.rs` holds.
#[test]
fn nights_agree_with_the_almanac() {
    for site in ["basin_n", "arctic"] {
        let home = folder(site);
        let suns: Vec<Row> = table("sun_events.csv")
            .into_iter()
            .filter(|r| r["site"] == site)
            .collect();
        for row in suns.iter().step_by(7) {
            let night = json(
                &home,
                &["--night", &row["night"], "--json", "--target", "P01"],
            );
            assert_eq!(night["night"], row["night"].as_str());
            let pairs = [
                ("set", "sunset"),
                ("rise", "sunrise"),
                ("civil_dusk", "civil_dusk"),
                ("civil_dawn", "civil_dawn"),
                ("nautical_dusk", "naut_dusk"),
                ("nautical_dawn", "naut_dawn"),
                ("astronomical_dusk", "astro_dusk"),
                ("astronomical_dawn", "astro_dawn"),
            ];
            for (key, column) in pairs {
                check_close(
                    &night["sun"][key],
                    &row[&format!("{column}_utc")],
                    2000,
                    row,
                );
            }
            // The shipped darkness is nautical: what is printed is one and the same event.
            if row["naut_dusk_utc"] != "none" && row["naut_dawn_utc"] != "none" {
                assert_eq!(night["darkness"]["start"], night["sun"]["nautical_dusk"]);
                assert_eq!(night["darkness"]["end"], night["sun"]["nautical_dawn"]);
            }
        }
        let moons: Vec<Row> = table("moon_events.csv")
            .into_iter()
            .filter(|r| r["site"] == site)
            .collect();
        for row in moons.iter().step_by(9) {
            let night = json(
                &home,
                &["--night", &row["night"], "--json", "--target", "P01"],
            );
            check_close(&night["moon"]["rise"], &row["moonrise_utc"], 8000, row);
            check_close(&night["moon"]["set"], &row["moonset_utc"], 8000, row);
            check_close(&night["moon"]["transit"], &row["transit_utc"], 2000, row);
        }
    }
}

/// The rows against ERFA through pyerfa (vacuum altitude and azimuth) and astropy's velocities.
#[test]
fn rows_agree_with_outside_figures() {
    let home = folder("basin_n");
    let here = |row: &&Row| row["site"] == "basin_n";
    let (altaz, velocities) = (table("star_altaz.csv"), table("barycentric.csv"));
    let altaz: Vec<&Row> = altaz.iter().filter(here).step_by(5).collect();
    let velocities: Vec<&Row> = velocities.iter().filter(here).collect();
    let all = altaz.iter().chain(&velocities);
    let times: String = all
        .clone()
        .map(|row| format!("{}\r\n", row["utc"]))
        .collect();
    fs::write(home.path().join("times.txt"), format!("\u{feff}{times}\n")).unwrap();
    let rows = json(&home, &["--times", "times.txt", "--json"]);
    let rows = rows.as_array().unwrap();
    assert_eq!(rows.len(), 20 * all.clone().count());
    let find = |expected: &Row| {
        rows.iter()
            .find(|r| {
                r["target"] == expected["star"].as_str() && r["at"] == expected["utc"].as_str()
            })
            .unwrap()
    };
    for expected in altaz {
        let row = find(expected);
        let point = |az: f64, alt: f64| from_spherical(az.to_radians(), alt.to_radians());
        let found = point(
            row["azimuth_deg"].as_f64().unwrap(),
            row["altitude_deg"].as_f64().unwrap(),
        );
        let there = point(number(expected, "az_deg"), number(expected, "alt_deg"));
        let off = Angle::from_rad(separation_rad(found, there)).arcsec();
        assert!(off < 0.02, "{off} {expected:?}");
        assert_eq!(row["airmass"].is_null(), number(expected, "alt_deg") < 0.0);
        let seen = row["apparent_altitude_deg"].as_f64().unwrap();
        assert!(seen > row["altitude_deg"].as_f64().unwrap());
    }
    for expected in velocities {
        let row = find(expected);
        let off =
            row["barycentric_correction_m_s"].as_f64().unwrap() - number(expected, "vcorr_mps");
        assert!(off.abs() < 0.01, "{off} {expected:?}");
        let fraction = |text: &str| {
            format!("0.{}", text.split_once('.').unwrap().1)
                .parse::<f64>()
                .unwrap()
        };
        let bjd = row["bjd_tdb"].as_str().unwrap();
        assert_eq!(
            bjd.split_once('.').unwrap().0,
            expected["bjd_tdb"].split_once('.').unwrap().0
        );
        let off_s = (fraction(bjd) - fraction(&expected["bjd_tdb"])) * 86_400.0;
        assert!(off_s.abs() < 1e-3, "{off_s} {expected:?}");
    }
}

#[test]
fn windows_lie_in_the_dark_above_the_limit() {
    let home = folder("plateau_s");
    let night = json(&home, &["--night", "2026-08-15", "--json"]);
    let targets = night["targets"].as_array().unwrap();
    assert_eq!(targets.len(), 20);
    let dark = (
        night["darkness"]["start"].as_str().unwrap(),
        night["darkness"]["end"].as_str().unwrap(),
    );
    let mut windows = 0;
    for target in targets {
        for up in target["up"].as_array().unwrap() {
            let (start, end) = (up["start"].as_str().unwrap(), up["end"].as_str().unwrap());
            // RFC 3339 of one form sorts as text.
            assert!(dark.0 <= start && start < end && end <= dark.1, "{target}");
            windows += 1;
        }
        let up = !target["up"].as_array().unwrap().is_empty();
        assert_eq!(target["best_airmass"].is_number(), up, "{target}");
        assert_eq!(target["moon_separation_deg"].is_number(), up, "{target}");
        assert!(target["transit"].is_string());
    }
    assert!(windows > 5);
    let text = sky(&home, &["--night", "2026-08-15"]);
    let text = String::from_utf8(text.stdout).unwrap();
    for word in ["sets", "dusk", "darkness", "moon", "P20", "not up"] {
        assert!(text.contains(word), "{word}: {text}");
    }
}

#[test]
fn a_night_without_darkness_is_told() {
    let home = folder("arctic");
    let night = json(&home, &["--night", "2026-06-21", "--json"]);
    assert!(night["darkness"].is_null());
    assert!(night["sun"]["set"].is_null());
    let text = sky(&home, &["--night", "2026-06-21"]);
    let text = String::from_utf8(text.stdout).unwrap();
    assert!(
        text.contains("above all night") && text.contains("darkness      none"),
        "{text}"
    );
}

/// UT1 taken as UTC is said, and changes what is printed by as much as it should.
#[test]
fn a_missing_earth_rotation_is_said() {
    let home = folder("basin_n");
    let path = home.path().join("survey/site.toml");
    let text = fs::read_to_string(&path)
        .unwrap()
        .replace("earth_rotation", "# earth_rotation");
    fs::write(&path, text).unwrap();
    let at = "2026-02-03T04:05:06.789Z";
    let output = sky(&home, &["--at", at, "--target", "P13", "--json"]);
    assert!(String::from_utf8_lossy(&output.stderr).contains("UT1 is taken as UTC"));
    let rows: Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(rows[0]["earth_rotation"], "absent");
    let site = Site {
        name: String::new(),
        latitude: Angle::from_deg(39.4),
        longitude: Angle::from_deg(-116.3),
        height_m: 1950.0,
        pressure_hpa: 0.0,
        temperature_c: 0.0,
        relative_humidity: 0.0,
        horizon: HorizonProfile::default(),
    };
    let observer = Observer::new(site, EarthRotation::absent());
    let sun = SkyInstant::at(&observer, Utc::parse(at).unwrap())
        .unwrap()
        .sun();
    let printed = rows[0]["sun_altitude_deg"].as_f64().unwrap();
    assert!((printed - sun.altitude.deg()).abs() < 1e-7);
}

fn refused(home: &tempfile::TempDir, arguments: &[&str], said: &str) {
    let output = sky(home, arguments);
    let told = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{arguments:?}: {told}");
    assert!(told.contains(said), "{arguments:?}: {told}");
    assert!(!told.contains("panicked"), "{told}");
}

#[test]
fn bad_input_is_refused_plainly() {
    let home = folder("basin_n");
    let write = |name: &str, bytes: &[u8]| fs::write(home.path().join(name), bytes).unwrap();
    write("wrong.txt", b"2026-01-01T00:00:00Z\nnoon\n");
    write("empty.txt", b"\n\n");
    write("binary.txt", &[0xff, 0xfe, 0x00, 0x80]);
    refused(&home, &["--night", "2026-02-30"], "2026-02-30");
    refused(&home, &["--night", "2150-01-01"], "1900 to 2100");
    refused(&home, &["--at", "2026-01-01T00:00:00"], "no UTC instant");
    refused(&home, &["--at", "2150-01-01T00:00:00Z"], "1900 to 2100");
    refused(&home, &["--night", "2026-01-01", "--target", "P99"], "P99");
    refused(
        &home,
        &["--night", "2026-01-01", "--at", "2026-01-01T00:00:00Z"],
        "--at",
    );
    refused(&home, &["--times", "missing.txt"], "missing.txt");
    refused(&home, &["--times", "wrong.txt"], "wrong.txt:2");
    refused(&home, &["--times", "empty.txt"], "no instant");
    refused(&home, &["--times", "binary.txt"], "binary.txt");
    let finals = Path::new("survey/finals.txt");
    let path = home.path().join(finals);
    let text = fs::read_to_string(&path).unwrap();
    let broken: Vec<String> = text
        .lines()
        .enumerate()
        .map(|(i, line)| {
            if i == 6 {
                line.replace('I', "X")
            } else {
                line.to_owned()
            }
        })
        .collect();
    fs::write(&path, broken.join("\n")).unwrap();
    refused(&home, &["--night", "2026-01-01"], "line 7");
    fs::write(&path, "").unwrap();
    refused(&home, &["--night", "2026-01-01"], "finals.txt");
}
