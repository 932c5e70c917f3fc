//! What is said to the command and by it.

use serde::Deserialize;
use serde_json::json;

use super::process::{Ended, Why};
use crate::ephemeris::Star;
use crate::night::{Lease, VisitReport};
use crate::record::{EntryKind, LossCause, Outcome};
use crate::time::{Span, Utc};

/// The visit as one line of JSON. `star` is absent for a calibration that looks at none.
pub(super) fn visit(lease: &Lease, star: Option<&Star>) -> String {
    let entry = &lease.entry;
    let kind = match entry.kind {
        EntryKind::Science => "science",
        EntryKind::Standard => "standard",
        EntryKind::Calibration => "calibration",
    };
    let star = star.map(|star| {
        json!({
            "ra_deg": written(star.ra.deg()),
            "dec_deg": written(star.dec.deg()),
            "epoch": star.epoch_jyear,
            "pm_ra_mas_yr": star.pm_ra_cosdec_mas_yr,
            "pm_dec_mas_yr": star.pm_dec_mas_yr,
            "parallax_mas": star.parallax_mas,
            "radial_velocity_km_s": star.radial_velocity_km_s,
        })
    });
    let visit = json!({
        "visit": lease.visit.0,
        "kind": kind,
        "subject": entry.subject.as_str(),
        "star": star,
        "start": entry.start.to_string(),
        "end": entry.end.to_string(),
        "expires": lease.expires.to_string(),
        "setup_s": entry.setup_s,
        "exposure_count": entry.exposures.count,
        "exposure_s": entry.exposures.seconds,
        "airmass": entry.airmass,
        "altitude_deg": entry.altitude_deg,
        "azimuth_deg": entry.azimuth_deg,
        "moon_separation_deg": entry.moon_separation_deg,
        "predicted_rv_error_m_s": entry.predicted_rv_error_m_s,
        "because": entry.because,
    });
    format!("{visit}\n")
}

/// As the settings wrote it: radians and back leave a rest in the last digits. A billionth of a
/// degree is four millionths of an arcsecond.
fn written(degrees: f64) -> f64 {
    (degrees * 1e9).round() / 1e9
}

/// What the command answers.
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Told {
    outcome: OutcomeWord,
    cause: Option<CauseWord>,
    exposing_start: Option<String>,
    exposing_end: Option<String>,
    exposed_s: Option<f64>,
    snr: Option<f64>,
    rv_error_m_s: Option<f64>,
    #[serde(default)]
    note: String,
}

#[derive(Clone, Copy, Deserialize)]
#[serde(rename_all = "snake_case")]
enum OutcomeWord {
    Done,
    Short,
    Lost,
    Refused,
}

#[derive(Clone, Copy, Deserialize)]
#[serde(rename_all = "snake_case")]
enum CauseWord {
    Weather,
    Instrument,
    Operator,
    Acquisition,
    Other,
}

/// A longer note is cut: it stands in reports.
const LONGEST_NOTE: usize = 500;

/// A report with nothing but an outcome and a note.
pub(super) fn report_of(outcome: Outcome, note: String) -> VisitReport {
    VisitReport {
        outcome,
        exposing: None,
        exposed_s: None,
        snr: None,
        rv_error_m_s: None,
        note: note.chars().take(LONGEST_NOTE).collect(),
    }
}

/// What the end of the command means for the visit, and whether the command itself failed.
///
/// A word of the command counts, also when it came while it was being stopped. Without one, or when
/// it says that light was gathered and yet ends as failed, the visit is lost: nothing is credited
/// that nobody vouches for.
pub(super) fn judge(ended: &Ended) -> (VisitReport, bool) {
    let told = read(&ended.output, ended.cut);
    let lost = |cause, note| report_of(Outcome::Lost(cause), note);
    match (&ended.why, told) {
        (Why::Exited(status), Ok(report)) if !status.success() => match report.outcome {
            Outcome::Done | Outcome::Short => {
                let note = format!("the command told of light, but ended with {status}");
                (lost(LossCause::Other, note), true)
            }
            _ => (report, false),
        },
        (_, Ok(report)) => (report, false),
        (Why::Exited(status), Err(why)) => {
            let note = format!("the command ended with {status}, and {why}");
            (lost(LossCause::Other, note), true)
        }
        (Why::Stopped(cause), Err(why)) => (
            lost(*cause, format!("the command was stopped, and {why}")),
            false,
        ),
        (Why::OutOfTime, Err(why)) => {
            let note = format!("the command ran too long and was stopped, and {why}");
            (lost(LossCause::Other, note), true)
        }
        (Why::Unknown(error), Err(why)) => {
            let note = format!("the command's end is unknown ({error}), and {why}");
            (lost(LossCause::Other, note), true)
        }
    }
}

fn read(output: &[u8], cut: bool) -> Result<VisitReport, String> {
    if cut {
        return Err("its output is too long".to_owned());
    }
    if output.trim_ascii().is_empty() {
        return Err("it told no outcome".to_owned());
    }
    let told: Told = serde_json::from_slice(output)
        .map_err(|error| format!("its output is no outcome: {error}"))?;
    told.report()
}

impl Told {
    fn report(self) -> Result<VisitReport, String> {
        let outcome = match self.outcome {
            OutcomeWord::Done => Outcome::Done,
            OutcomeWord::Short => Outcome::Short,
            OutcomeWord::Refused => Outcome::Refused,
            OutcomeWord::Lost => Outcome::Lost(match self.cause {
                Some(CauseWord::Weather) => LossCause::Weather,
                Some(CauseWord::Instrument) => LossCause::Instrument,
                Some(CauseWord::Operator) => LossCause::Operator,
                Some(CauseWord::Acquisition) => LossCause::Acquisition,
                Some(CauseWord::Other) | None => LossCause::Other,
            }),
        };
        let exposing = match (self.exposing_start, self.exposing_end) {
            (None, None) => None,
            (Some(start), Some(end)) => Some(span(&start, &end)?),
            _ => return Err("it told one of exposing_start and exposing_end alone".to_owned()),
        };
        Ok(VisitReport {
            exposing,
            exposed_s: not_negative("exposed_s", self.exposed_s)?,
            snr: not_negative("snr", self.snr)?,
            rv_error_m_s: not_negative("rv_error_m_s", self.rv_error_m_s)?,
            ..report_of(outcome, self.note)
        })
    }
}

fn span(start: &str, end: &str) -> Result<Span, String> {
    let read = |text| Utc::parse(text).map_err(|error| error.to_string());
    let (start, end) = (read(start)?, read(end)?);
    if end < start {
        return Err("its exposing_end lies before exposing_start".to_owned());
    }
    Ok(Span::new(start, end))
}

fn not_negative(name: &str, value: Option<f64>) -> Result<Option<f64>, String> {
    match value {
        Some(value) if value < 0.0 => Err(format!("its {name} is {value}, below 0")),
        value => Ok(value),
    }
}
