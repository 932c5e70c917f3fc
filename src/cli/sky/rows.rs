//! A row per target and instant.

use comfy_table::Table;
use rayon::prelude::*;
use serde::Serialize;

use super::super::{Exit, Trouble, load, output};
use super::{quality_word, rounded};
use crate::catalogue::Target;
use crate::ephemeris::{EphemerisError, Observer, RotationQuality, SkyInstant, StarMotion};
use crate::time::Utc;

/// Instants worked out before their rows are printed: enough for all cores, little memory.
const BATCH: usize = 512;

/// A target at an instant, as printed.
#[derive(Debug, Serialize)]
struct Row<'a> {
    target: &'a str,
    at: String,
    altitude_deg: f64,
    apparent_altitude_deg: f64,
    azimuth_deg: f64,
    /// `null` below the horizon.
    airmass: f64,
    hour_angle_deg: f64,
    moon_separation_deg: f64,
    moon_altitude_deg: f64,
    moon_azimuth_deg: f64,
    moon_illuminated_fraction: f64,
    sun_altitude_deg: f64,
    barycentric_correction_m_s: f64,
    bjd_tdb: String,
    earth_rotation: &'static str,
}

/// Prints the rows, instant by instant, the targets in the order of the list.
pub fn print(
    observer: &Observer,
    targets: &[&Target],
    instants: &[Utc],
    json: bool,
) -> Result<(), Trouble> {
    let stars: Vec<(&str, StarMotion)> = targets
        .iter()
        .map(|target| (target.id.as_str(), StarMotion::of(&target.star)))
        .collect();
    let worst = instants
        .iter()
        .map(|at| observer.earth_rotation.at(*at).quality)
        .max();
    load::mention_rotation(worst.unwrap_or(RotationQuality::Measured));
    let rows = |batch: &[Utc]| -> Result<Vec<Vec<Row<'_>>>, Trouble> {
        batch
            .par_iter()
            .map(|at| rows_at(observer, &stars, *at))
            .collect::<Result<_, _>>()
            .map_err(|error| Trouble::from_error(Exit::Misuse, &error))
    };
    if json {
        print_json(instants, rows)
    } else {
        let mut table = heading();
        for batch in instants.chunks(BATCH) {
            for row in rows(batch)?.iter().flatten() {
                table.add_row(cells(row));
            }
        }
        output::print(&table.to_string())
    }
}

/// One row a line within one array, batch by batch: a year of hours is too much for one text.
fn print_json<'a>(
    instants: &[Utc],
    rows: impl Fn(&[Utc]) -> Result<Vec<Vec<Row<'a>>>, Trouble>,
) -> Result<(), Trouble> {
    let mut separator = "[\n";
    for batch in instants.chunks(BATCH) {
        let rows = rows(batch)?;
        let lines: Vec<String> = rows
            .par_iter()
            .flatten()
            .map(serde_json::to_string)
            .collect::<Result<_, _>>()
            .map_err(|error| Trouble::machine("a row cannot be written as JSON").because(&error))?;
        if lines.is_empty() {
            continue;
        }
        output::print_pieces([separator, &lines.join(",\n")])?;
        separator = ",\n";
    }
    let end = if separator == "[\n" { "[]\n" } else { "\n]\n" };
    output::print(end)
}

fn rows_at<'a>(
    observer: &Observer,
    stars: &[(&'a str, StarMotion)],
    at: Utc,
) -> Result<Vec<Row<'a>>, EphemerisError> {
    let sky = SkyInstant::at(observer, at)?;
    let (sun, moon) = (sky.sun(), sky.moon());
    let row = |(target, star): &(&'a str, StarMotion)| {
        let place = sky.star(star);
        Row {
            target,
            at: at.to_string(),
            altitude_deg: rounded(place.altitude.deg(), 8),
            apparent_altitude_deg: rounded(place.apparent_altitude.deg(), 8),
            azimuth_deg: rounded(place.azimuth.deg(), 8),
            airmass: rounded(place.airmass, 6),
            hour_angle_deg: rounded(place.hour_angle.deg(), 8),
            moon_separation_deg: rounded(place.moon_separation.deg(), 8),
            moon_altitude_deg: rounded(moon.altitude.deg(), 8),
            moon_azimuth_deg: rounded(moon.azimuth.deg(), 8),
            moon_illuminated_fraction: rounded(moon.illuminated_fraction, 6),
            sun_altitude_deg: rounded(sun.altitude.deg(), 8),
            barycentric_correction_m_s: rounded(sky.barycentric_correction_m_s(star), 5),
            bjd_tdb: sky.bjd_tdb(star).to_string(),
            earth_rotation: quality_word(sky.ut1_minus_utc_s().1),
        }
    };
    Ok(stars.iter().map(row).collect())
}

fn heading() -> Table {
    let mut table = Table::new();
    table.load_style(comfy_table::presets::NOTHING);
    table.set_header([
        "target",
        "UTC",
        "alt°",
        "seen°",
        "az°",
        "airmass",
        "HA°",
        "moon°",
        "moon alt°",
        "lit",
        "sun alt°",
        "v_bary m/s",
        "BJD_TDB",
    ]);
    table
}

fn cells(row: &Row<'_>) -> Vec<String> {
    let airmass = if row.airmass.is_finite() {
        format!("{:.3}", row.airmass)
    } else {
        "-".to_owned()
    };
    vec![
        row.target.to_owned(),
        row.at.clone(),
        format!("{:.3}", row.altitude_deg),
        format!("{:.3}", row.apparent_altitude_deg),
        format!("{:.3}", row.azimuth_deg),
        airmass,
        format!("{:.3}", row.hour_angle_deg),
        format!("{:.2}", row.moon_separation_deg),
        format!("{:.2}", row.moon_altitude_deg),
        format!("{:.3}", row.moon_illuminated_fraction),
        format!("{:.2}", row.sun_altitude_deg),
        format!("{:.3}", row.barycentric_correction_m_s),
        row.bjd_tdb.clone(),
    ]
}
