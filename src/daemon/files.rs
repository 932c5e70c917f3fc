//! The queue and the night's report as files, each written whole and renamed into place.

use std::io;
use std::path::PathBuf;

use serde_json::json;

use crate::devices::{write_report, write_whole};
use crate::page::queue::{CSV_HEADER, LeftOutView, VisitView, csv_row, round};
use crate::record::PlanRevision;
use crate::report::Rendered;
use crate::time::NightDate;

/// Where the files go.
#[derive(Clone, Debug)]
pub(super) struct Folders {
    pub queue: PathBuf,
    pub reports: PathBuf,
}

impl Folders {
    /// Publishes the queue of the night as `queue.json` and `queue.csv`.
    ///
    /// # Errors
    /// The disk's; the files of before then stand.
    pub(super) fn publish(&self, revision: &PlanRevision, mode: &str) -> io::Result<()> {
        let json = format!("{:#}\n", queue_json(revision, mode));
        write_whole(&self.queue, "queue.json", json.as_bytes())?;
        write_whole(&self.queue, "queue.csv", &queue_csv(revision)?)
    }

    /// Keeps a night's report in all its faces under its night's name.
    ///
    /// # Errors
    /// The disk's.
    pub(super) fn report(&self, night: NightDate, report: &Rendered) -> io::Result<()> {
        write_report(&self.reports, night, report)
    }
}

/// The queue as JSON.
pub(super) fn queue_json(revision: &PlanRevision, mode: &str) -> serde_json::Value {
    let visits: Vec<VisitView> = revision.entries.iter().map(VisitView::from).collect();
    let left_out: Vec<LeftOutView> = revision.left_out.iter().map(LeftOutView::from).collect();
    json!({
        "night": revision.night.to_string(),
        "mode": mode,
        "revision": revision.number,
        "made_at": revision.made_at.to_string(),
        "from": revision.from.to_string(),
        "value": round(revision.value, 4),
        "bound": revision.bound.map(|bound| round(bound, 4)),
        "visits": visits,
        "left_out": left_out,
    })
}

fn queue_csv(revision: &PlanRevision) -> io::Result<Vec<u8>> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer.write_record(CSV_HEADER)?;
    for entry in &revision.entries {
        writer.write_record(csv_row(entry))?;
    }
    writer.into_inner().map_err(|error| error.into_error())
}
