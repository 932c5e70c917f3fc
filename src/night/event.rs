//! What can happen to a night, what it makes the shell do, and what it answers.

use std::sync::Arc;

use thiserror::Error;

use super::{FeedFault, FoldError, Lease, NightBounds, NightRules};
use crate::catalogue::TargetId;
use crate::record::{
    HoldCause, LossCause, NightSummary, Outcome, PlanCause, PlanRevision, Visit, VisitId,
};
use crate::time::{NightDate, Span, Utc};
use crate::weather::WeatherSample;

/// Everything that can happen to a night. Closed: what is not here cannot change it.
#[derive(Clone, Debug, PartialEq)]
pub enum Event {
    /// Time has passed: the shell's timer reached [`super::Machine::next_deadline`], or it just
    /// looks round.
    Tick,
    /// A night begins: sent when its noon has passed and the night before is closed; again when
    /// the answer was [`Refusal::LedgerDown`].
    NightBegins(NightBounds),
    /// The night keeper came back within a night; sent once after [`super::Machine::recover`].
    Restarted,
    /// The weather feed gave a sample.
    WeatherArrived(WeatherSample),
    /// The weather feed gave none.
    FeedFailed(FeedFault),
    /// The planner answers [`Action::AskForPlan`].
    Planned(PlanRevision),
    /// The planner could not.
    PlanFailed {
        /// Why.
        detail: String,
    },
    /// The observatory asks for the next visit. The same key gets the same lease.
    Claim {
        /// Chosen by the claimer, new for every visit.
        key: String,
        /// Who claims, for people.
        holder: String,
    },
    /// The observatory needs more time for a visit.
    Extend {
        /// Which visit.
        visit: VisitId,
        /// The time it needs from now on, seconds.
        seconds: f64,
    },
    /// The observatory (or the pushed command) tells how a visit ended.
    Report {
        /// Which visit.
        visit: VisitId,
        /// Chosen by the reporter; the same key again changes nothing.
        key: String,
        /// What it tells.
        report: VisitReport,
    },
    /// A person holds the night.
    Hold {
        /// Who.
        by: String,
        /// Why.
        reason: String,
    },
    /// A person ends their hold. Other causes stay.
    Release {
        /// Who.
        by: String,
    },
    /// A person stops a target.
    Pause {
        /// Which.
        target: TargetId,
        /// Who.
        by: String,
        /// Why.
        reason: String,
    },
    /// A person lets a target go on.
    Resume {
        /// Which.
        target: TargetId,
        /// Who.
        by: String,
    },
    /// A person wants a target observed before an instant.
    Urgent {
        /// Which.
        target: TargetId,
        /// Until when.
        until: Utc,
        /// Who.
        by: String,
        /// Why.
        reason: String,
    },
    /// A person ends the visit that runs.
    Skip {
        /// Who.
        by: String,
    },
    /// A person's remark for the night.
    Note {
        /// Who.
        by: String,
        /// What.
        text: String,
    },
    /// Telescope, dome or spectrograph cannot go on.
    InstrumentFault {
        /// What is wrong.
        detail: String,
    },
    /// They can again.
    InstrumentMended,
    /// The settings changed; the shell has checked them.
    SettingsChanged(Box<NightRules>),
    /// The shell found that the ledger cannot be written.
    LedgerTrouble {
        /// What the storage said.
        detail: String,
    },
    /// The shell found that it can again.
    LedgerBack,
}

/// What the observatory tells of a visit.
#[derive(Clone, Debug, PartialEq)]
pub struct VisitReport {
    /// How it ended; anything but [`Outcome::Unreported`].
    pub outcome: Outcome,
    /// First shutter opening to last read-out, where told.
    pub exposing: Option<Span>,
    /// Open-shutter time, seconds, where told.
    pub exposed_s: Option<f64>,
    /// Signal-to-noise reached.
    pub snr: Option<f64>,
    /// Velocity error, m/s.
    pub rv_error_m_s: Option<f64>,
    /// Anything else.
    pub note: String,
}

/// What a plan is wanted for: everything that the planner needs to know of the night.
#[derive(Clone, Debug, PartialEq)]
pub struct PlanRequest {
    /// The night.
    pub night: NightDate,
    /// Number that the revision must carry.
    pub number: u32,
    /// When it was asked for; the revision's `made_at`.
    pub asked: Utc,
    /// No setup of an entry begins before this (lamps in daylight apart).
    pub from: Utc,
    /// Why.
    pub cause: PlanCause,
    /// The darkness to fill.
    pub darkness: Span,
    /// The visit under way: from where the first slew starts.
    pub fixed: Option<Arc<Lease>>,
    /// Targets that a person stopped.
    pub paused: Vec<TargetId>,
    /// Targets that a person wants, with the instant until which.
    pub urgent: Vec<(TargetId, Utc)>,
    /// Subjects that were refused or not found too often tonight.
    pub avoid: Vec<TargetId>,
    /// Tonight's visits that have ended, as they stand.
    pub tonight: Vec<Arc<Visit>>,
    /// The freshest weather: seeing for the exposure times, wind for the pointing.
    pub weather: Option<WeatherSample>,
    /// The queue that this one replaces.
    pub previous: Option<Arc<PlanRevision>>,
}

/// What the shell must do once the facts of the step are kept.
#[derive(Clone, Debug, PartialEq)]
pub enum Action {
    /// Make a plan and answer with [`Event::Planned`] or [`Event::PlanFailed`].
    AskForPlan(Box<PlanRequest>),
    /// Start this visit (push).
    StartVisit(Arc<Lease>),
    /// End the visit that runs.
    StopVisit {
        /// Which.
        visit: VisitId,
        /// Why.
        cause: LossCause,
    },
    /// Tell the outside world.
    Notify(Notice),
    /// Write the queue out for others to read.
    PublishQueue(Arc<PlanRevision>),
    /// Write the night's report. Comes again when a late report changed the account.
    CloseNight(Box<NightSummary>),
}

/// Something worth telling the outside world.
#[derive(Clone, Debug, PartialEq)]
pub enum Notice {
    /// The night is held.
    Held {
        /// Why.
        cause: HoldCause,
        /// In words.
        detail: String,
    },
    /// Nothing holds the night any more.
    Released,
    /// A lease ran out with no word.
    Unreported(VisitId),
    /// The wall clock stepped.
    ClockStepped {
        /// By how much, milliseconds.
        by_ms: i64,
    },
    /// The night is over.
    NightClosed(Box<NightSummary>),
    /// Something is wrong with the night keeper itself.
    Trouble(String),
}

/// The answer to an event that was accepted.
#[derive(Clone, Debug, PartialEq)]
pub enum Reply {
    /// It was taken in.
    Taken,
    /// The lease that was asked for, new or the same again.
    Lease(Arc<Lease>),
    /// The lease's new end.
    Extended(Utc),
    /// The visit as it stands.
    Reported {
        /// As it stands.
        visit: Arc<Visit>,
        /// It was known already and nothing changed.
        again: bool,
    },
    /// The operator's hold is over; these causes still hold.
    Released(Vec<HoldCause>),
    /// This visit will be ended.
    Skipped(VisitId),
}

/// Why an event was not done.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum Refusal {
    /// No night was opened yet.
    #[error("no night is open")]
    NoNight,
    /// The night before was not closed.
    #[error("the night {0} is still open: close it first")]
    NightStillOpen(NightDate),
    /// The night was closed already.
    #[error("the night {0} is closed already")]
    NightDone(NightDate),
    /// Something holds the night.
    #[error("the night is held: {detail}")]
    Held {
        /// All causes.
        causes: Vec<HoldCause>,
        /// In words.
        detail: String,
    },
    /// The night keeper has just come back and waits for a fresh word on the weather.
    #[error("waiting for the first weather sample after a restart")]
    WaitingForWeather,
    /// The next visit's setup may not begin yet.
    #[error("the next visit opens at {opens}: claim again then")]
    NotYet {
        /// When it may be claimed.
        opens: Utc,
    },
    /// The queue has nothing more for now.
    #[error("the queue has nothing left")]
    NothingLeft,
    /// The rest of the night is being planned.
    #[error("the queue is being planned afresh: claim again in a moment")]
    Replanning,
    /// Somebody holds a lease already.
    #[error("visit {visit} is held by {holder} until {expires}")]
    Leased {
        /// The visit under way.
        visit: VisitId,
        /// Who holds it.
        holder: String,
        /// Until when.
        expires: Utc,
    },
    /// Visits are started by the night keeper itself.
    #[error("visits are started by command here: nothing can be claimed")]
    Pushing,
    /// The claim's key belongs to a visit that has ended.
    #[error("this claim's key got visit {visit}, which has ended: use a new key")]
    ClaimSpent {
        /// That visit.
        visit: VisitId,
    },
    /// The report's key belongs to another visit.
    #[error("this report's key was used for visit {visit}: use a new key")]
    KeyReused {
        /// That visit.
        visit: VisitId,
    },
    /// No such visit in this night.
    #[error("no visit '{0}' was handed out in this night")]
    UnknownVisit(VisitId),
    /// The visit was reported otherwise before.
    #[error("visit {visit} was reported as {outcome:?} before: amend it by hand if that was wrong")]
    AlreadyReported {
        /// The visit.
        visit: VisitId,
        /// As it stands.
        outcome: Outcome,
    },
    /// The lease to extend is over.
    #[error("the lease of visit {0} is over")]
    LeaseOver(VisitId),
    /// The visit to extend must end.
    #[error("visit {visit} must end now ({cause:?})")]
    MustStop {
        /// The visit.
        visit: VisitId,
        /// Why.
        cause: LossCause,
    },
    /// The lease has got all the time that it can get.
    #[error("the lease cannot run beyond {0}")]
    ExtensionLimit(Utc),
    /// A value that cannot be.
    #[error("{0}")]
    BadRequest(String),
    /// The planner's answer is no plan for this night.
    #[error("the plan is unusable: {0}")]
    BadPlan(String),
    /// The operator holds nothing.
    #[error("the operator holds nothing; held by: {0:?}")]
    NotHeld(Vec<HoldCause>),
    /// The target is not paused.
    #[error("target '{0}' is not paused")]
    NotPaused(TargetId),
    /// No visit runs.
    #[error("no visit is under way")]
    NoVisit,
    /// The ledger cannot be written, so nothing was done.
    #[error("the ledger cannot be written: nothing was done, try again later")]
    LedgerDown,
    /// A fault of the night keeper itself: nothing was done.
    #[error("the night keeper stopped itself from an illegal step")]
    Broken(#[from] FoldError),
}
