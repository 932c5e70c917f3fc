//! The keeper: the one thread that owns the night.

use std::path::PathBuf;
use std::sync::Arc;
use std::sync::mpsc::{Receiver, RecvTimeoutError, SyncSender};
use std::time::Duration;

use super::InventedClock;
use super::board::{Board, StarView, mode_label, status_of};
use super::files::Folders;
use super::message::{Answer, Message};
use super::planner::Job;
use crate::devices::chain;
use crate::devices::{PushedVisits, Webhook};
use crate::ephemeris::{Observer, darkness};
use crate::ledger::SqliteLedger;
use crate::night::{
    Action, Event, Fact, FoldError, HandOut, Machine, NightBounds, NightReport, NightRules, Notice,
    PlanRequest, Refusal, RunMode, Stamp, VisitReport,
};
use crate::ports::{Clock, Ledger, LedgerFault, Notifier, Observatory, WeatherSource};
use crate::record::{EntryKind, Outcome, QueueEntry, VisitId};
use crate::report::{Heading, render};
use crate::settings::Settings;
use crate::sim::NightWeather;
use crate::time::{MonotonicMs, Night, NightDate};

/// The keeper looks round at least so often, milliseconds of real time.
const ROUND_MS: u64 = 500;
/// Invented weather is asked so often, milliseconds of invented time.
const INVENTED_POLL_MS: i64 = 30_000;
/// More turns than this in one go round, and the keeper lets others speak first.
const MOST_FOLLOW_UPS: usize = 64;

/// What the keeper works with.
pub(super) struct Keeper {
    pub machine: Machine,
    pub ledger: SqliteLedger,
    pub clock: Arc<dyn Clock + Send + Sync>,
    /// Invented seconds in a real one.
    pub speed: f64,
    pub mode: RunMode,
    pub settings: Arc<Settings>,
    pub observer: Observer,
    pub edition: u64,
    pub board: Arc<Board>,
    pub folders: Folders,
    pub jobs: SyncSender<Job>,
    pub push: Option<PushedVisits>,
    pub webhook: Option<Webhook>,
    pub invented: Option<InventedWeather>,
    pub settings_refused: Option<String>,
    /// Told once round the loop, so that the service manager hears from the loop itself.
    pub beat: Box<dyn FnMut() + Send>,
}

/// Weather that is drawn, night by night, for invented time.
pub(super) struct InventedWeather {
    seed: u64,
    night: Option<(NightDate, NightWeather)>,
    clear_before: Option<bool>,
    next_poll: MonotonicMs,
}

impl InventedWeather {
    pub(super) fn new(seed: u64) -> Self {
        InventedWeather {
            seed,
            night: None,
            clear_before: None,
            next_poll: MonotonicMs(0),
        }
    }
}

/// The rules of the night that the settings ask for.
pub(super) fn rules_of(settings: &Settings) -> NightRules {
    let mut rules = NightRules::for_survey(settings.weather.clone(), &settings.survey);
    rules.lease_margin_s = settings.daemon.lease_margin_s;
    if let Some(push) = &settings.daemon.push {
        rules.hand_out = HandOut::Push;
        rules.lease_margin_s = crate::devices::lease_margin_s(push);
    }
    rules
}

/// Why the record cannot be taken up.
#[derive(Debug, thiserror::Error)]
pub enum TakeUpError {
    /// The ledger cannot be read.
    #[error(transparent)]
    Ledger(#[from] LedgerFault),
    /// Its last night makes no sense.
    #[error("the record of the night {night} cannot be followed")]
    Record {
        /// The night.
        night: NightDate,
        /// What is wrong.
        #[source]
        cause: FoldError,
    },
}

/// The machine as the ledger left it, and whether it comes back within a night.
pub(super) fn take_up(
    ledger: &SqliteLedger,
    rules: NightRules,
    now: Stamp,
) -> Result<(Machine, bool), TakeUpError> {
    let Some(night) = ledger.last_opened_night()? else {
        return Ok((Machine::new(rules, now), false));
    };
    let facts = ledger.facts(night)?;
    if facts.is_empty() {
        return Ok((Machine::new(rules, now), false));
    }
    let machine = Machine::recover(rules, &facts, now)
        .map_err(|cause| TakeUpError::Record { night, cause })?;
    Ok((machine, true))
}

impl Keeper {
    /// Keeps nights until it is told to stop or nobody is left to tell it.
    pub(super) fn keep(mut self, inbox: Receiver<Message>, restarted: bool) {
        self.name_targets();
        if restarted {
            let _ = self.happen(Event::Restarted);
        }
        loop {
            self.open_night();
            self.poll_invented_weather();
            self.show();
            (self.beat)();
            self.board.beat();
            match inbox.recv_timeout(self.patience()) {
                Ok(Message::Stop) | Err(RecvTimeoutError::Disconnected) => break,
                Ok(message) => self.hear(message),
                Err(RecvTimeoutError::Timeout) => {}
            }
            if self.is_due() {
                let _ = self.happen(Event::Tick);
            }
        }
        self.show();
        tracing::info!("stopped; the record is closed");
    }

    fn is_due(&self) -> bool {
        let now = self.clock.now();
        self.machine
            .next_deadline()
            .is_some_and(|due| due <= now.mono)
    }

    /// How long nothing is due, in real time.
    fn patience(&self) -> Duration {
        let now = self.clock.now().mono;
        let polls = self.invented.as_ref().map(|weather| weather.next_poll);
        let next = [self.machine.next_deadline(), polls]
            .into_iter()
            .flatten()
            .min();
        let round = Duration::from_millis(ROUND_MS);
        let Some(next) = next else { return round };
        let wait_ms = (next.0 - now.0).max(0) as f64 / self.speed;
        Duration::try_from_secs_f64(wait_ms / 1000.0).map_or(round, |wait| wait.min(round))
    }

    fn hear(&mut self, message: Message) {
        match message {
            Message::Event(event) => {
                let _ = self.happen(event);
            }
            Message::Ask(event, answer) => {
                let reply = self.ask(event);
                self.show();
                // Who asked may have hung up; what was done is done all the same.
                let _ = answer.send(reply);
            }
            Message::Settings(Ok(settings)) => self.change_settings(*settings),
            Message::Settings(Err(fault)) => {
                tracing::error!(%fault, "the new settings are refused; the old ones stay");
                self.settings_refused = Some(fault);
            }
            Message::Stop => {}
        }
    }

    /// An event that somebody waits for. A report for a night before this one is settled with that
    /// night's record.
    fn ask(&mut self, event: Event) -> Answer {
        if let Event::Report { visit, .. } = &event
            && let Some(night) = night_of(visit)
            && self
                .machine
                .state()
                .bounds()
                .is_none_or(|b| b.night != night)
        {
            return self.settle_earlier(night, event);
        }
        self.happen(event)
    }

    fn settle_earlier(&mut self, night: NightDate, event: Event) -> Answer {
        let Event::Report { visit, .. } = &event else {
            return Err(Refusal::NoNight);
        };
        let unknown = Refusal::UnknownVisit(visit.clone());
        let facts = self.ledger.facts(night).map_err(|fault| {
            tracing::error!(fault = chain(&fault), "the ledger cannot be read");
            Refusal::LedgerDown
        })?;
        if facts.is_empty() {
            return Err(unknown);
        }
        let now = self.clock.now();
        let rules = self.machine.rules().clone();
        let mut earlier = Machine::recover(rules, &facts, now).map_err(Refusal::Broken)?;
        let (done, _) = turn(&mut earlier, &mut self.ledger, event, now);
        for action in done.actions {
            // Of an earlier night only its report is still of interest.
            if let Action::CloseNight(_) = action {
                self.write_report(night);
            }
        }
        done.reply
    }

    /// Turns the machine by an event and does what it says, and what follows from that.
    fn happen(&mut self, event: Event) -> Answer {
        let mut follow = Vec::new();
        let answer = self.turn(event, &mut follow);
        let mut count = 0;
        while let Some(next) = follow.pop() {
            count += 1;
            if count > MOST_FOLLOW_UPS {
                tracing::error!(
                    ?next,
                    "too much follows from one event; the rest is dropped"
                );
                break;
            }
            // Their answers concern nobody.
            let _ = self.turn(next, &mut follow);
        }
        answer
    }

    fn turn(&mut self, event: Event, follow: &mut Vec<Event>) -> Answer {
        let now = self.clock.now();
        let (done, fault) = turn(&mut self.machine, &mut self.ledger, event, now);
        if let Some(fault) = fault {
            tracing::error!(fault = chain(&fault), "nothing was kept");
        }
        for fact in &done.facts {
            log(fact);
        }
        for action in done.actions {
            self.perform(action, follow);
        }
        done.reply
    }

    fn perform(&mut self, action: Action, follow: &mut Vec<Event>) {
        match action {
            Action::AskForPlan(request) => self.ask_for_plan(request, follow),
            Action::StartVisit(lease) => {
                let started = match &mut self.push {
                    Some(push) => push.start(&lease),
                    None => return,
                };
                if let Err(fault) = started {
                    follow.push(refused(&lease.visit, &fault.to_string()));
                }
            }
            Action::StopVisit { visit, cause } => {
                if let Some(push) = &mut self.push {
                    push.stop(&visit, cause);
                }
            }
            Action::Notify(notice) => self.tell(&notice),
            Action::PublishQueue(revision) => {
                let mode = mode_label(self.mode);
                if let Err(error) = self.folders.publish(&revision, mode) {
                    tracing::warn!(%error, "the queue cannot be published as files");
                }
            }
            Action::CloseNight(summary) => {
                self.write_report(summary.night);
            }
        }
    }

    fn ask_for_plan(&mut self, request: Box<PlanRequest>, follow: &mut Vec<Event>) {
        let job = Job {
            request,
            settings: Arc::clone(&self.settings),
            edition: self.edition,
        };
        if self.jobs.try_send(job).is_err() {
            follow.push(Event::PlanFailed {
                detail: "the planner is busy or gone".to_owned(),
            });
        }
    }

    fn tell(&mut self, notice: &Notice) {
        tracing::info!(?notice, "notice");
        if let Some(webhook) = &mut self.webhook {
            webhook.tell(notice);
        }
    }

    fn write_report(&mut self, night: NightDate) {
        let facts = match self.ledger.facts(night) {
            Ok(facts) => facts,
            Err(fault) => {
                tracing::error!(fault = chain(&fault), "no report of the night {night}");
                return;
            }
        };
        let blocked = &self.settings.survey.allocation.blocked;
        let Some(report) = NightReport::from_facts(&facts, blocked) else {
            return;
        };
        let heading = Heading {
            survey: &self.settings.survey.name,
            site: &self.settings.survey.site.name,
        };
        let rendered = render(&report, &heading);
        let written = self.clock.now().utc;
        if let Err(fault) = self.ledger.keep_report(night, written, &rendered) {
            tracing::error!(
                fault = chain(&fault),
                "the report of the night {night} is not in the ledger"
            );
        }
        if let Err(error) = self.folders.report(night, &rendered) {
            tracing::warn!(%error, "the report of the night {night} cannot be written");
        }
    }

    /// Opens the night that the clock stands in once the one before is closed.
    fn open_night(&mut self) {
        let now = self.clock.now();
        let survey = &self.settings.survey;
        let date = NightDate::at(now.utc, survey.site.longitude);
        let state = self.machine.state();
        let known = state.bounds().map(|bounds| bounds.night);
        if state.is_open() || known.is_some_and(|night| night >= date) {
            return;
        }
        let night = Night::of(date, survey.site.longitude);
        let limit = survey.planning.darkness_sun_altitude;
        let dark = match darkness(&self.observer, night, limit) {
            Ok(dark) => dark,
            Err(error) => {
                tracing::error!(
                    error = chain(&error),
                    "the night {date} cannot be worked out"
                );
                return;
            }
        };
        let bounds = NightBounds {
            night: date,
            span: night.span,
            darkness: dark,
            ours: survey.allocation.is_ours(date),
            mode: self.mode,
        };
        if let Err(fault) = self.ledger.keep_targets(date, survey) {
            tracing::warn!(fault = chain(&fault), "the targets' settings are not kept");
        }
        if let Err(refusal) = self.happen(Event::NightBegins(bounds)) {
            tracing::warn!(%refusal, "the night {date} is not opened yet");
        }
    }

    fn poll_invented_weather(&mut self) {
        let now = self.clock.now();
        let Some(weather) = &mut self.invented else {
            return;
        };
        let bounds = self.machine.state().bounds().copied();
        let Some(bounds) = bounds.filter(|_| weather.next_poll <= now.mono) else {
            return;
        };
        weather.next_poll = now.mono.plus_ms(INVENTED_POLL_MS);
        if weather
            .night
            .as_ref()
            .is_none_or(|(night, _)| *night != bounds.night)
        {
            let (drawn, clear) = NightWeather::draw(
                &self.settings.climate,
                &self.machine.rules().weather,
                &bounds,
                weather.clear_before,
                (weather.seed, 0),
            );
            weather.clear_before = Some(clear);
            weather.night = Some((bounds.night, drawn));
        }
        let polled = weather.night.as_mut().map(|(_, source)| source.poll(now));
        match polled {
            Some(Ok(sample)) => self.happen(Event::WeatherArrived(sample)),
            Some(Err(fault)) => self.happen(Event::FeedFailed(fault)),
            None => return,
        }
        .ok();
    }

    fn change_settings(&mut self, settings: Settings) {
        let rules = rules_of(&settings);
        self.observer = settings.observer();
        self.settings = Arc::new(settings);
        self.edition += 1;
        self.settings_refused = None;
        if let Some(push) = &mut self.push {
            push.set_survey(Arc::new(self.settings.survey.clone()));
        }
        self.name_targets();
        tracing::info!("the new settings are in force");
        if let Err(refusal) = self.happen(Event::SettingsChanged(Box::new(rules))) {
            tracing::warn!(%refusal, "the night does not take the new settings yet");
        }
    }

    fn name_targets(&self) {
        let targets = self.settings.survey.targets.iter();
        self.board
            .set_targets(targets.map(|t| t.id.as_str().to_owned()));
    }

    fn show(&self) {
        let now = self.clock.now();
        let mut status = status_of(&self.machine, now, self.mode, |entry| self.star(entry));
        status.settings_refused = self.settings_refused.clone();
        self.board
            .show(status, self.machine.state().queue().cloned());
    }

    /// The star of an entry.
    fn star(&self, entry: &QueueEntry) -> Option<StarView> {
        star_of(&self.settings, entry)
    }
}

/// The star of an entry, where it looks at one.
pub(super) fn star_of(settings: &Settings, entry: &QueueEntry) -> Option<StarView> {
    if entry.kind == EntryKind::Calibration {
        return None;
    }
    let targets = &settings.survey.targets;
    let star = &targets.iter().find(|t| t.id == entry.subject)?.star;
    // As the settings wrote it: radians and back leave a rest in the last digits.
    let written = |degrees: f64| (degrees * 1e9).round() / 1e9;
    Some(StarView {
        ra_deg: written(star.ra.deg()),
        dec_deg: written(star.dec.deg()),
        epoch: star.epoch_jyear,
        pm_ra_mas_yr: star.pm_ra_cosdec_mas_yr,
        pm_dec_mas_yr: star.pm_dec_mas_yr,
        parallax_mas: star.parallax_mas,
        radial_velocity_km_s: star.radial_velocity_km_s,
    })
}

fn turn(
    machine: &mut Machine,
    ledger: &mut SqliteLedger,
    event: Event,
    now: Stamp,
) -> (crate::night::Performed, Option<LedgerFault>) {
    machine.turn(event, now, |night, facts| ledger.append(night, facts))
}

/// The observatory did not take a visit.
fn refused(visit: &VisitId, why: &str) -> Event {
    Event::Report {
        visit: visit.clone(),
        key: format!("{visit}-not-started"),
        report: VisitReport {
            outcome: Outcome::Refused,
            exposing: None,
            exposed_s: None,
            snr: None,
            rv_error_m_s: None,
            note: why.to_owned(),
        },
    }
}

/// The night that a visit's name begins with.
fn night_of(visit: &VisitId) -> Option<NightDate> {
    NightDate::parse(visit.0.get(..10)?).ok()
}

/// A line in the log for what people look for there.
fn log(fact: &Fact) {
    match fact {
        Fact::WeatherNoted(_) => {}
        Fact::PlanPublished(plan) => tracing::info!(
            night = %plan.night,
            revision = plan.number,
            visits = plan.entries.len(),
            "queue published"
        ),
        Fact::VisitEnded { visit, .. } => tracing::info!(
            visit = %visit.id,
            target = %visit.subject,
            outcome = ?visit.outcome,
            "visit ended"
        ),
        other => tracing::info!(fact = ?other, "night"),
    }
}

/// Where an invented clock starts when the record goes beyond the instant that was asked for.
pub(super) fn resumed_clock(
    ledger: &SqliteLedger,
    asked: crate::time::Utc,
    speed: f64,
) -> Result<InventedClock, LedgerFault> {
    let last = match ledger.last_opened_night()? {
        Some(night) => ledger.facts(night)?.iter().filter_map(Fact::at).max(),
        None => None,
    };
    let start = last.map_or(asked, |last| last.max(asked));
    Ok(InventedClock::start(start, speed))
}

/// The ledger's folder is made when it is not there, as for a first start.
pub(super) fn make_folder_of(ledger: &std::path::Path) -> std::io::Result<()> {
    match ledger.parent().filter(|p| *p != PathBuf::new().as_path()) {
        Some(folder) => std::fs::create_dir_all(folder),
        None => Ok(()),
    }
}
