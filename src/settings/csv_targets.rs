//! `targets.csv` as the same tree that `targets.toml` gives.
//!
//! A column has the name of the key. Those of a candidate planet carry `candidate_` before it
//! (`candidate_period_d`; a second and third planet `candidate2_` and `candidate3_`), those of a
//! special window `window_`. An empty cell is a key left out.

use super::finding::{Place, Sink};
use super::node::{Entry, Node, Table, Value};
use super::suggest;

/// Columns that must be there.
pub(super) const NEEDED: [&str; 9] = [
    "id",
    "ra_deg",
    "dec_deg",
    "epoch",
    "pm_ra_mas_yr",
    "pm_dec_mas_yr",
    "parallax_mas",
    "radial_velocity_km_s",
    "magnitude",
];

/// Columns that may be there.
const OPTIONAL: [&str; 23] = [
    "programme",
    "temperature_k",
    "spectral_class",
    "mass_msun",
    "mass_error_msun",
    "radius_rsun",
    "radius_error_rsun",
    "jitter_m_s",
    "every_nights",
    "visits_per_night",
    "separation_min",
    "total_visits",
    "first_night",
    "last_night",
    "exposure_s",
    "signal_to_noise",
    "velocity_error_m_s",
    "min_altitude_deg",
    "max_airmass",
    "min_moon_separation_deg",
    "weight",
    "paused",
    "note",
];

/// After `candidate_`, `candidate2_`, `candidate3_`.
const CANDIDATE: [&str; 8] = [
    "period_d",
    "period_error_d",
    "conjunction_bjd_tdb",
    "conjunction_error_d",
    "semi_amplitude_m_s",
    "eccentricity",
    "argument_deg",
    "eccentric_terms",
];

/// After `window_`.
const WINDOW: [&str; 7] = [
    "label",
    "candidate",
    "transit_h",
    "phase_from",
    "phase_to",
    "purpose",
    "worth",
];

const CANDIDATE_PREFIXES: [&str; 3] = ["candidate_", "candidate2_", "candidate3_"];
const WINDOW_PREFIX: &str = "window_";

/// Where the cells of a column go.
#[derive(Clone, Debug)]
enum Column {
    Plain(String),
    Candidate(usize, String),
    Window(String),
    /// Already complained about.
    Unknown,
}

/// Reads the rows as tables; faults of form go to the sink.
pub(super) fn read(file: &str, text: &str, sink: &Sink) -> Vec<Node> {
    let mut reader = csv::ReaderBuilder::new()
        .flexible(true)
        .has_headers(false)
        .comment(Some(b'#'))
        .trim(csv::Trim::All)
        .from_reader(text.as_bytes());
    let mut columns: Option<Vec<Column>> = None;
    let mut rows = Vec::new();
    for record in reader.records() {
        let record = match record {
            Ok(record) => record,
            Err(error) => {
                sink.wrong(
                    &Place::file(file),
                    "",
                    format!("this is no CSV: {error}"),
                    None,
                );
                break;
            }
        };
        let line = record.position().map_or(1, |p| line_of(text, p.byte()));
        match &columns {
            None => columns = Some(header(file, line, &record, sink)),
            Some(columns) if record.len() == columns.len() => {
                rows.push(row(file, line, columns, &record));
            }
            Some(columns) => {
                let place = place(file, line, None);
                let (found, wanted) = (record.len(), columns.len());
                let message = format!("found {found} cells, must be {wanted} as in the header");
                sink.wrong(&place, "", message, None);
            }
        }
    }
    if columns.is_none() {
        let message = format!("is empty; must start with the header {}", NEEDED.join(","));
        sink.wrong(&Place::file(file), "", message, None);
    }
    rows
}

/// The line on which a CSV record begins, from its byte position. The reader's own count lags behind where lines end in CRLF,
/// and its position lies before the blank and comment lines that it has skipped.
pub fn line_of(text: &str, position: u64) -> usize {
    let bytes = text.as_bytes();
    let mut at = usize::try_from(position).unwrap_or(0).min(bytes.len());
    while let Some(byte) = bytes.get(at) {
        match byte {
            b'\r' | b'\n' => at += 1,
            b'#' => {
                let rest = &bytes[at..];
                at += rest.iter().position(|b| *b == b'\n').unwrap_or(rest.len());
            }
            _ => break,
        }
    }
    1 + bytes[..at].iter().filter(|b| **b == b'\n').count()
}

fn place(file: &str, line: usize, column: Option<usize>) -> Place {
    Place {
        file: file.to_owned(),
        line: Some(line),
        column,
    }
}

fn header(file: &str, line: usize, record: &csv::StringRecord, sink: &Sink) -> Vec<Column> {
    let names: Vec<&str> = record.iter().collect();
    if names.len() == 1 && names[0].contains(';') {
        let message = "the columns are separated by semicolons".to_owned();
        let hint = "separate them by commas, with points in the numbers".to_owned();
        sink.wrong(&place(file, line, None), "", message, Some(hint));
        return vec![Column::Unknown];
    }
    for needed in NEEDED.iter().filter(|n| !names.contains(n)) {
        let message = "this column is missing from the header".to_owned();
        let hint = format!("the columns that must be there: {}", NEEDED.join(","));
        sink.wrong(&place(file, line, None), needed, message, Some(hint));
    }
    let mut columns = Vec::with_capacity(names.len());
    for (index, name) in names.iter().enumerate() {
        let at = place(file, line, Some(index + 1));
        if names[..index].contains(name) {
            let message = "this column stands twice in the header".to_owned();
            sink.wrong(&at, name, message, None);
            columns.push(Column::Unknown);
            continue;
        }
        let column = column(name);
        if matches!(column, Column::Unknown) {
            let known: Vec<&'static str> = NEEDED.into_iter().chain(OPTIONAL).collect();
            let hint = suggest::for_unknown(name, &known);
            sink.wrong(&at, name, "unknown column".to_owned(), Some(hint));
        }
        columns.push(column);
    }
    columns
}

fn column(name: &str) -> Column {
    if NEEDED.contains(&name) || OPTIONAL.contains(&name) {
        return Column::Plain(name.to_owned());
    }
    for (number, prefix) in CANDIDATE_PREFIXES.iter().enumerate() {
        if let Some(key) = name.strip_prefix(prefix).filter(|k| CANDIDATE.contains(k)) {
            return Column::Candidate(number, key.to_owned());
        }
    }
    match name.strip_prefix(WINDOW_PREFIX) {
        Some(key) if WINDOW.contains(&key) => Column::Window(key.to_owned()),
        _ => Column::Unknown,
    }
}

fn row(file: &str, line: usize, columns: &[Column], record: &csv::StringRecord) -> Node {
    let mut plain = Table::default();
    let mut candidates = vec![Table::default(); CANDIDATE_PREFIXES.len()];
    let mut window = Table::default();
    for (index, (column, cell)) in columns.iter().zip(record).enumerate() {
        if cell.is_empty() {
            continue;
        }
        let (table, key) = match column {
            Column::Plain(key) => (&mut plain, key),
            Column::Candidate(number, key) => (&mut candidates[*number], key),
            Column::Window(key) => (&mut window, key),
            Column::Unknown => continue,
        };
        let at = place(file, line, Some(index + 1));
        table.entries.push(Entry {
            key: key.clone(),
            place: at.clone(),
            node: Node {
                place: at,
                value: Value::Cell(cell.to_owned()),
            },
        });
    }
    let at = place(file, line, None);
    for (key, tables) in [("candidate", candidates), ("window", vec![window])] {
        let filled: Vec<Node> = tables
            .into_iter()
            .filter(|table| !table.entries.is_empty())
            .map(|table| Node {
                place: at.clone(),
                value: Value::Table(table),
            })
            .collect();
        if !filled.is_empty() {
            plain.entries.push(Entry {
                key: key.to_owned(),
                place: at.clone(),
                node: Node {
                    place: at.clone(),
                    value: Value::List(filled),
                },
            });
        }
    }
    Node {
        place: at,
        value: Value::Table(plain),
    }
}
