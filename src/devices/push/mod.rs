//! Visits carried out by a command: a program per visit, the visit as JSON on its input, the
//! outcome as JSON on its output, its standard error in the log.

mod process;
#[cfg(test)]
mod tests;
mod words;

use std::collections::BTreeMap;
use std::sync::Arc;
use std::time::Duration;

use tokio::sync::{Mutex, mpsc, oneshot};
use tokio::time;

use crate::catalogue::Survey;
use crate::night::{Event, Lease, VisitReport};
use crate::ports::{Observatory, ObservatoryFault};
use crate::record::{EntryKind, LossCause, Outcome, VisitId};
use crate::settings::Push;

/// After so many visits in a row in which the command itself failed, the night is held: a broken
/// command would burn the whole queue, one visit after the other.
const FAILURES_TO_HOLD: u32 = 3;
/// The command gets another try so long after that, seconds.
const REST_S: f64 = 300.0;
/// Time for the report to be taken in once the command was killed, seconds.
const REPORT_S: f64 = 30.0;

/// The least `lease_margin_s` under which the lease of a pushed visit outlasts its command: the
/// command's own margin, its grace, and time to report.
pub fn lease_margin_s(push: &Push) -> f64 {
    push.margin_s + push.grace_s + REPORT_S
}

/// Runs the command for each visit, one at a time. What becomes of a visit comes as
/// [`Event::Report`] through the channel; a command that keeps failing as
/// [`Event::InstrumentFault`], and as [`Event::InstrumentMended`] when it gets another try. The
/// receiver offers a report again for as long as the ledger cannot be written.
///
/// Calls must come from within a tokio runtime. When this is dropped, the command that runs is
/// asked to end.
pub struct PushedVisits {
    shared: Arc<Shared>,
    survey: Arc<Survey>,
    running: BTreeMap<VisitId, oneshot::Sender<LossCause>>,
}

struct Shared {
    push: Push,
    /// Kept from the command: the name of the variable that may hold the bearer token.
    hidden_variable: String,
    /// Invented seconds in a real one; 1 on a real clock.
    speed: f64,
    told: mpsc::Sender<Event>,
    /// Held while a command runs, with its failures in a row: the telescope has one master.
    telescope: Mutex<u32>,
}

impl Shared {
    fn real(&self, seconds: f64) -> Duration {
        Duration::try_from_secs_f64(seconds.max(0.0) / self.speed).unwrap_or(Duration::MAX)
    }
}

/// A visit to carry out.
struct Order {
    visit: VisitId,
    input: String,
    /// Setup and visit as planned, seconds.
    planned_s: f64,
}

impl PushedVisits {
    /// Nothing runs yet. `hidden_variable` is an environment variable that the command does not get
    /// to see; `speed` the invented seconds in a real one (1 on a real clock).
    pub fn new(
        push: Push,
        hidden_variable: &str,
        survey: Arc<Survey>,
        speed: f64,
        told: mpsc::Sender<Event>,
    ) -> Self {
        PushedVisits {
            shared: Arc::new(Shared {
                push,
                hidden_variable: hidden_variable.to_owned(),
                speed,
                told,
                telescope: Mutex::new(0),
            }),
            survey,
            running: BTreeMap::new(),
        }
    }

    /// Takes places of stars from these settings from now on.
    pub fn set_survey(&mut self, survey: Arc<Survey>) {
        self.survey = survey;
    }
}

impl Observatory for PushedVisits {
    fn start(&mut self, lease: &Lease) -> Result<(), ObservatoryFault> {
        self.running.retain(|_, stop| !stop.is_closed());
        let entry = &lease.entry;
        let star = match entry.kind {
            EntryKind::Calibration => None,
            EntryKind::Science | EntryKind::Standard => {
                let id = &entry.subject;
                let target = self.survey.targets.iter().find(|t| t.id == *id);
                Some(
                    &target
                        .ok_or_else(|| ObservatoryFault {
                            visit: lease.visit.clone(),
                            detail: format!("'{id}' is no longer on the target list"),
                        })?
                        .star,
                )
            }
        };
        let order = Order {
            visit: lease.visit.clone(),
            input: words::visit(lease, star),
            planned_s: entry.setup_s + (entry.end - entry.start) as f64 / 1000.0,
        };
        let (stop, stopped) = oneshot::channel();
        self.running.insert(lease.visit.clone(), stop);
        tokio::spawn(carry_out(Arc::clone(&self.shared), order, stopped));
        Ok(())
    }

    fn stop(&mut self, visit: &VisitId, cause: LossCause) {
        if let Some(stop) = self.running.remove(visit) {
            // An error: it has ended already.
            let _ = stop.send(cause);
        }
    }
}

async fn carry_out(shared: Arc<Shared>, order: Order, mut stop: oneshot::Receiver<LossCause>) {
    // The command of the visit before may still be on its way out.
    let mut failures = tokio::select! {
        biased;
        free = shared.telescope.lock() => free,
        cause = &mut stop => {
            let cause = cause.unwrap_or(LossCause::Other);
            tell(&shared, &order.visit, lost(cause, "stopped before the command began")).await;
            return;
        }
    };
    let limits = process::Limits {
        run: shared.real(order.planned_s + shared.push.margin_s),
        grace: shared.real(shared.push.grace_s),
    };
    let spawned = process::Running::start(
        &shared.push.command,
        &shared.hidden_variable,
        order.visit.0.clone(),
        order.input,
    );
    let (report, failed) = match spawned {
        Ok(running) => {
            let ended = running.until_end(limits, &mut stop).await;
            words::judge(&ended)
        }
        Err(error) => {
            let program = shared.push.command.first().map_or("", String::as_str);
            let note = format!("the command {program} cannot be run: {error}");
            (words::report_of(Outcome::Refused, note), true)
        }
    };
    *failures = if failed { *failures + 1 } else { 0 };
    let hold = (*failures >= FAILURES_TO_HOLD).then(|| report.note.clone());
    if failed {
        tracing::warn!(visit = %order.visit, note = %report.note, "the command failed");
    }
    drop(failures);
    if let Some(note) = hold {
        let detail = format!("the command of visits keeps failing; last: {note}");
        let _ = shared.told.send(Event::InstrumentFault { detail }).await;
        tell(&shared, &order.visit, report).await;
        time::sleep(shared.real(REST_S)).await;
        let _ = shared.told.send(Event::InstrumentMended).await;
    } else {
        tell(&shared, &order.visit, report).await;
    }
}

fn lost(cause: LossCause, note: &str) -> VisitReport {
    words::report_of(Outcome::Lost(cause), note.to_owned())
}

async fn tell(shared: &Shared, visit: &VisitId, report: VisitReport) {
    let event = Event::Report {
        visit: visit.clone(),
        key: format!("push:{visit}"),
        report,
    };
    // An error: the night keeper is gone, and the lease will run out.
    let _ = shared.told.send(event).await;
}
