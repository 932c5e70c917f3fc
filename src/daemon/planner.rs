//! Plans are made on a thread of their own, one after the other.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::mpsc::{Receiver, SyncSender};
use std::time::Instant;

use super::message::Message;
use crate::ephemeris::Observer;
use crate::ledger::SqliteLedger;
use crate::night::{Event, PlanRequest, ask_of, revision_of};
use crate::plan::solve::Settings as Search;
use crate::plan::{Calendar, Desk, History, SkyTable, accrual_first};
use crate::ports::Ledger;
use crate::record::PlanRevision;
use crate::settings::Settings;
use crate::time::NightDate;

/// In darkness an idle telescope waits for the plan, so that it gets this long, milliseconds.
const IN_DARKNESS_MS: u64 = 120;

/// A plan to make.
pub(super) struct Job {
    pub request: Box<PlanRequest>,
    pub settings: Arc<Settings>,
    /// Counts the settings: the night's tables are made anew when it changes.
    pub edition: u64,
}

/// What a night's plans share.
struct Tables {
    night: NightDate,
    edition: u64,
    observer: Observer,
    sky: SkyTable,
    calendar: Calendar,
    history: History,
}

/// Makes plans until there is nobody to ask for one.
pub(super) fn plan_all(ledger: PathBuf, jobs: Receiver<Job>, inbox: SyncSender<Message>) {
    let mut tables: Option<Tables> = None;
    for job in jobs {
        let night = job.request.night;
        let fits = |t: &Tables| t.night == night && t.edition == job.edition;
        let ready = match tables.take().filter(fits) {
            Some(ready) => Ok(ready),
            None => prepare(&ledger, &job),
        };
        let event = match ready {
            Ok(ready) => {
                let event = answer(&job, &ready);
                tables = Some(ready);
                event
            }
            Err(detail) => Event::PlanFailed { detail },
        };
        if inbox.send(Message::Event(event)).is_err() {
            return;
        }
    }
}

fn answer(job: &Job, tables: &Tables) -> Event {
    match plan(job, tables) {
        Ok(revision) => Event::Planned(revision),
        Err(detail) => Event::PlanFailed { detail },
    }
}

/// Reads the visits before the night, on a connection of its own, and works the sky out.
fn prepare(ledger: &std::path::Path, job: &Job) -> Result<Tables, String> {
    let (night, survey) = (job.request.night, &job.settings.survey);
    let observer = job.settings.observer();
    let told = |error: &dyn std::error::Error| crate::devices::chain(error);
    let visits = match SqliteLedger::open_read_only(ledger).map_err(|e| told(&e))? {
        Some(ledger) => ledger
            .visits(Some(night.plus_nights(-1)))
            .map_err(|e| told(&e))?,
        None => Vec::new(),
    };
    let sky = SkyTable::compute(survey, &observer, night).map_err(|e| told(&e))?;
    let history = History::new(survey, &observer, &visits).map_err(|e| told(&e))?;
    let first = accrual_first(survey, history.first_night(), night);
    let calendar = Calendar::compute(survey, &observer, first, night).map_err(|e| told(&e))?;
    Ok(Tables {
        night,
        edition: job.edition,
        observer,
        sky,
        calendar,
        history,
    })
}

fn plan(job: &Job, tables: &Tables) -> Result<PlanRevision, String> {
    let survey = &job.settings.survey;
    let request = &job.request;
    let desk = Desk::new(
        survey,
        &tables.observer,
        &tables.calendar,
        &tables.sky,
        tables.history.clone(),
    );
    let budget_ms = match request.from >= request.darkness.start {
        true => survey.planning.budget_ms.min(IN_DARKNESS_MS),
        false => survey.planning.budget_ms,
    };
    let search = Search {
        seed: survey.planning.seed,
        steps: u64::MAX,
        ..Search::default()
    };
    let begun = Instant::now();
    let mut going = || (begun.elapsed().as_millis() as u64) < budget_ms;
    let planned = desk
        .plan(&ask_of(request), &search, &mut going)
        .map_err(|error| crate::devices::chain(&error))?;
    Ok(revision_of(request, planned))
}
