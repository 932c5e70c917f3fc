//! One turn of the machine in the making.

use std::borrow::Cow;
use std::sync::Arc;

use super::accounting::{opens, seconds_ms, summary};
use super::handout::Offer;
use super::machine::{Done, DraftState, Machine, Senses};
use super::outdated::PlannedFor;
use super::timers::Timer;
use super::{
    Action, Event, Fact, Gate, Lease, NightRules, Notice, Phase, PlanRequest, Refusal, Reply,
    Stamp, Verdict, state,
};
use crate::record::{EntryKind, HoldCause, NightSummary, PlanCause};
use crate::time::{Span, Utc};

/// Deadlines that a broken step would meet again at once are moved on by this much.
const BROKEN_PAUSE_MS: i64 = 1000;

/// A turn in the making: the state as it will be, and what was decided so far.
pub(super) struct Draft<'a> {
    machine: &'a Machine,
    pub(super) now: Stamp,
    pub(super) state: DraftState<'a>,
    pub(super) senses: Senses,
    new_rules: Option<Box<NightRules>>,
    facts: Vec<Fact>,
    pub(super) actions: Vec<Action>,
    /// When a night is opened after its dusk, its first holds began at dusk: nobody was there.
    pub(super) absent_since: Option<Utc>,
}

impl<'a> Draft<'a> {
    pub(super) fn new(machine: &'a Machine, now: Stamp) -> Self {
        Draft {
            machine,
            now,
            state: Cow::Borrowed(&machine.state),
            senses: machine.senses.clone(),
            new_rules: None,
            facts: Vec::new(),
            actions: Vec::new(),
            absent_since: None,
        }
    }

    /// Lets time pass, takes the event in, and draws what follows.
    pub(super) fn live_through(mut self, event: Event) -> Done {
        let reply = self.turn(event);
        let broken = matches!(reply, Err(Refusal::Broken(_)));
        if broken {
            self.senses = self.machine.senses.clone();
            self.senses
                .timers
                .postpone_due(self.now.mono, BROKEN_PAUSE_MS);
            let trouble = reply.as_ref().err().map(ToString::to_string);
            self.actions = vec![Action::Notify(Notice::Trouble(trouble.unwrap_or_default()))];
            self.facts.clear();
        }
        self.senses.last = self.now;
        Done {
            facts: self.facts,
            actions: self.actions,
            reply,
            state: match self.state {
                Cow::Owned(state) if !broken => Some(state),
                _ => None,
            },
            senses: self.senses,
            rules: self.new_rules.filter(|_| !broken),
        }
    }

    fn turn(&mut self, event: Event) -> Result<Reply, Refusal> {
        self.notice_clock_step()?;
        self.pass_deadlines()?;
        let reply = self.take(event);
        if let Err(broken @ Refusal::Broken(_)) = reply {
            return Err(broken);
        }
        self.reconcile()?;
        reply
    }

    pub(super) fn rules(&self) -> &NightRules {
        self.new_rules.as_deref().unwrap_or(&self.machine.rules)
    }

    /// The gate to change, with the rules to change it by.
    pub(super) fn gate_and_rules(&mut self) -> (&mut Gate, &NightRules) {
        let rules = self.new_rules.as_deref().unwrap_or(&self.machine.rules);
        (&mut self.senses.gate, rules)
    }

    pub(super) fn adopt_rules(&mut self, rules: Box<NightRules>) {
        self.senses.gate.adopt(&rules);
        self.new_rules = Some(rules);
    }

    /// Adds a fact and moves the state on by it.
    pub(super) fn emit(&mut self, fact: Fact) -> Result<(), Refusal> {
        self.state.to_mut().fold(&fact)?;
        self.follow(&fact);
        self.facts.push(fact);
        Ok(())
    }

    /// Sets and clears the deadlines that the fact brings with it.
    fn follow(&mut self, fact: &Fact) {
        let now = self.now;
        let closing_limit_ms = seconds_ms(self.rules().closing_limit_s);
        let ledger_retry_ms = seconds_ms(self.rules().ledger_retry_s);
        let timers = &mut self.senses.timers;
        match fact {
            Fact::NightOpened {
                span,
                darkness,
                ours,
                ..
            } => match darkness {
                Some(darkness) => {
                    timers.set_utc(Timer::Dawn, darkness.end, now);
                    if *ours {
                        timers.set_utc(Timer::Dusk, darkness.start, now);
                    }
                }
                None => timers.set_utc(Timer::Noon, span.end, now),
            },
            Fact::DarknessBegan { .. } => timers.clear(Timer::Dusk),
            Fact::DarknessEnded { .. } => {
                timers.clear(Timer::Dusk);
                timers.clear(Timer::Dawn);
                if let Some(darkness) = self.state.bounds().and_then(|b| b.darkness) {
                    let limit = darkness.end.plus_ms(closing_limit_ms);
                    timers.set_utc(Timer::ClosingLimit, limit, now);
                }
            }
            Fact::LeaseGranted(Lease { expires, .. }) | Fact::LeaseExtended { expires, .. } => {
                timers.set_utc(Timer::LeaseExpiry, *expires, now);
            }
            Fact::VisitEnded { .. } if self.state.lease().is_none() => {
                timers.clear(Timer::LeaseExpiry);
            }
            Fact::HoldBegan {
                cause: HoldCause::Ledger,
                ..
            } => timers.set(Timer::LedgerRetry, now.mono.plus_ms(ledger_retry_ms)),
            Fact::HoldEnded {
                cause: HoldCause::Ledger,
                ..
            } => timers.clear(Timer::LedgerRetry),
            Fact::PlanPublished(_) => timers.clear(Timer::PlanRetry),
            Fact::NightClosed(_) => {
                for timer in [
                    Timer::Dusk,
                    Timer::Dawn,
                    Timer::Noon,
                    Timer::ClosingLimit,
                    Timer::NextEntry,
                    Timer::PlanRetry,
                ] {
                    timers.clear(timer);
                }
                self.senses.pending = None;
                self.senses.wanted = None;
            }
            _ => {}
        }
    }

    /// A wall clock that moved otherwise than the monotonic one has stepped. The new reading is
    /// believed: a time service has set it.
    fn notice_clock_step(&mut self) -> Result<(), Refusal> {
        let last = self.senses.last;
        let by_ms = (self.now.utc - last.utc) - (self.now.mono.0 - last.mono.0);
        if by_ms.abs() < self.rules().clock_step_ms {
            return Ok(());
        }
        self.senses.timers.step(by_ms);
        self.senses.gate.clock_stepped();
        self.notify(Notice::ClockStepped { by_ms });
        if self.state.is_open() {
            let at = self.now.utc;
            self.emit(Fact::ClockStepped { at, by_ms })?;
            self.want_plan(PlanCause::Request(format!(
                "the clock stepped by {:.1} s",
                by_ms as f64 / 1000.0
            )));
        }
        Ok(())
    }

    fn pass_deadlines(&mut self) -> Result<(), Refusal> {
        let (at, mono) = (self.now.utc, self.now.mono);
        let is_due = |draft: &Self, timer| draft.senses.timers.is_due(timer, mono);
        if is_due(self, Timer::Dusk) {
            self.senses.timers.clear(Timer::Dusk);
            if matches!(self.state.phase(), Phase::Daylight | Phase::Ready) {
                self.emit(Fact::DarknessBegan { at })?;
                self.tell_of_holds();
            }
        }
        if is_due(self, Timer::WeatherStale) {
            self.senses.timers.clear(Timer::WeatherStale);
            let (gate, rules) = self.gate_and_rules();
            gate.expire(mono, rules);
        }
        if is_due(self, Timer::LeaseExpiry) {
            self.senses.timers.clear(Timer::LeaseExpiry);
            self.expire_lease()?;
        }
        if is_due(self, Timer::Dawn) {
            self.emit(Fact::DarknessEnded { at })?;
        }
        if is_due(self, Timer::ClosingLimit) {
            self.expire_lease()?;
        }
        if is_due(self, Timer::Noon) {
            self.close_night()?;
        }
        if is_due(self, Timer::PlanRetry) {
            self.senses.timers.clear(Timer::PlanRetry);
            self.want_plan(PlanCause::Request("the plan before failed".to_owned()));
        }
        if is_due(self, Timer::LedgerRetry) {
            self.senses.timers.clear(Timer::LedgerRetry);
            self.end_hold(HoldCause::Ledger)?;
        }
        if is_due(self, Timer::NextEntry) {
            self.senses.timers.clear(Timer::NextEntry);
        }
        Ok(())
    }

    /// Draws what follows from the state and the senses, whatever the event was.
    fn reconcile(&mut self) -> Result<(), Refusal> {
        if self.state.is_open() {
            self.heed_weather()?;
            self.push_next()?;
            self.close_when_done()?;
            self.ask_for_plan();
        }
        match self.senses.gate.stale_at() {
            Some(at) => self.senses.timers.set(Timer::WeatherStale, at),
            None => self.senses.timers.clear(Timer::WeatherStale),
        }
        Ok(())
    }

    /// Begins and ends the weather's holds by what its gate says now.
    pub(super) fn heed_weather(&mut self) -> Result<(), Refusal> {
        if !self.state.is_open() {
            return Ok(());
        }
        match self.senses.gate.verdict(self.rules()) {
            Verdict::Unheard => Ok(()),
            Verdict::Lost(fault) => self.begin_hold(HoldCause::FeedLost, fault.to_string()),
            Verdict::Bad(detail) => {
                // The new hold begins before the old one ends, so that the night is not open
                // between the two.
                self.begin_hold(HoldCause::Weather, detail)?;
                self.end_hold(HoldCause::FeedLost)
            }
            Verdict::Open => {
                self.end_hold(HoldCause::FeedLost)?;
                self.end_hold(HoldCause::Weather)
            }
        }
    }

    /// Begins a hold unless its cause holds already, and has the running visit stopped.
    pub(super) fn begin_hold(&mut self, cause: HoldCause, detail: String) -> Result<(), Refusal> {
        if self.state.is_held_by(cause) {
            return Ok(());
        }
        let ran_on = self.state.stopping().is_none();
        let at = self.absent_since.unwrap_or(self.now.utc);
        let words = detail.clone();
        self.emit(Fact::HoldBegan { at, cause, detail })?;
        if let (Some(lease), Some(cause), true) =
            (self.state.lease(), state::loss_by(cause), ran_on)
        {
            let visit = lease.visit.clone();
            self.actions.push(Action::StopVisit { visit, cause });
        }
        if self.state.phase() == Phase::Held {
            self.notify(Notice::Held {
                cause,
                detail: words,
            });
        }
        Ok(())
    }

    /// Ends a hold if it is on; when it was the last one of the dark, plans afresh.
    pub(super) fn end_hold(&mut self, cause: HoldCause) -> Result<(), Refusal> {
        if !self.state.is_held_by(cause) {
            return Ok(());
        }
        let was_held = self.state.phase() == Phase::Held;
        let at = self.now.utc;
        self.emit(Fact::HoldEnded { at, cause })?;
        if was_held && self.state.phase() == Phase::Observing {
            self.notify(Notice::Released);
            self.want_plan(PlanCause::HoldEnded);
        }
        Ok(())
    }

    fn tell_of_holds(&mut self) {
        let notices: Vec<Notice> = self
            .state
            .holds()
            .map(|hold| Notice::Held {
                cause: hold.cause,
                detail: hold.detail.to_string(),
            })
            .collect();
        notices.into_iter().for_each(|notice| self.notify(notice));
    }

    pub(super) fn notify(&mut self, notice: Notice) {
        self.actions.push(Action::Notify(notice));
    }

    /// In push, starts the next visit when its setup may begin, and watches for that instant.
    fn push_next(&mut self) -> Result<(), Refusal> {
        if self.rules().hand_out == super::HandOut::Pull || self.state.lease().is_some() {
            self.senses.timers.clear(Timer::NextEntry);
            return Ok(());
        }
        match self.offer() {
            Offer::Now(entry) => {
                let lease = self.grant(*entry, None)?;
                self.actions.push(Action::StartVisit(lease));
            }
            Offer::Later(opens) => {
                let now = self.now;
                self.senses.timers.set_utc(Timer::NextEntry, opens, now);
            }
            Offer::Slipped => self.want_plan(PlanCause::VisitDeviated),
            Offer::Nothing | Offer::Closed(_) => self.senses.timers.clear(Timer::NextEntry),
        }
        Ok(())
    }

    fn close_when_done(&mut self) -> Result<(), Refusal> {
        let done = self.state.phase() == Phase::Closing
            && self.state.lease().is_none()
            && !self.lamps_left();
        if done { self.close_night() } else { Ok(()) }
    }

    /// Whether a lamp calibration of the queue can still be handed out before the closing limit.
    fn lamps_left(&self) -> bool {
        let rules = self.rules();
        let Some(darkness) = self.state.bounds().and_then(|b| b.darkness) else {
            return false;
        };
        let limit = darkness.end.plus_ms(seconds_ms(rules.closing_limit_s));
        let slip_ms = seconds_ms(rules.slip_tolerance_s);
        self.state.holds().next().is_none()
            && self.state.entries_left().any(|entry| {
                entry.kind == EntryKind::Calibration
                    && entry.end <= limit
                    && self.now.utc <= opens(entry).plus_ms(slip_ms)
            })
    }

    /// Accounts for the night and closes it; again when a late report changed the account.
    pub(super) fn close_night(&mut self) -> Result<(), Refusal> {
        let Some(summary) = self.account() else {
            return Ok(());
        };
        self.emit(Fact::NightClosed(summary.clone()))?;
        self.notify(Notice::NightClosed(Box::new(summary.clone())));
        self.actions.push(Action::CloseNight(Box::new(summary)));
        Ok(())
    }

    fn account(&self) -> Option<NightSummary> {
        let log = self.state.log()?;
        Some(summary(log, &self.rules().blocked))
    }

    /// Notes that the rest of the night wants a plan; the first cause of a turn is told.
    pub(super) fn want_plan(&mut self, cause: PlanCause) {
        self.senses.wanted.get_or_insert(cause);
    }

    fn ask_for_plan(&mut self) {
        // With the ledger down no queue could be published: the wish waits.
        if self.senses.pending.is_some() || self.state.is_held_by(HoldCause::Ledger) {
            return;
        }
        let Some(cause) = self.senses.wanted.take() else {
            return;
        };
        // While held nobody needs a queue: the end of the hold asks for one.
        let wanted = matches!(
            self.state.phase(),
            Phase::Daylight | Phase::Ready | Phase::Observing
        );
        let Some(darkness) = self.darkness_to_fill().filter(|_| wanted) else {
            return;
        };
        let request = self.plan_request(cause, darkness);
        if let Some(request) = request {
            self.senses.pending = Some(request.number);
            let planned_for = PlannedFor::of(request.weather.as_ref(), self.now.mono);
            self.senses.planned_for = Some(planned_for);
            self.actions.push(Action::AskForPlan(Box::new(request)));
        }
    }

    fn darkness_to_fill(&self) -> Option<Span> {
        let bounds = self.state.bounds()?;
        let darkness = bounds.darkness.filter(|_| bounds.ours)?;
        (self.now.utc < darkness.end).then_some(darkness)
    }

    fn plan_request(&self, cause: PlanCause, darkness: Span) -> Option<PlanRequest> {
        let now = self.now.utc;
        let night = self.state.bounds()?.night;
        let fixed = self.state.lease().cloned();
        let busy_until = fixed.as_ref().map_or(now, |lease| {
            let running_late = now.max(lease.entry.end);
            if self.state.stopping().is_some() {
                now
            } else {
                running_late
            }
        });
        let limit = self.rules().failed_starts_limit;
        let urgent = self.state.urgent().iter();
        Some(PlanRequest {
            night,
            number: self.state.next_revision(),
            asked: now,
            from: busy_until.max(darkness.start),
            cause,
            darkness,
            fixed,
            paused: self.state.paused().keys().cloned().collect(),
            urgent: urgent
                .filter(|(_, urgency)| now < urgency.until)
                .map(|(target, urgency)| (target.clone(), urgency.until))
                .collect(),
            avoid: self
                .state
                .failed_starts()
                .iter()
                .filter(|(_, times)| **times >= limit)
                .map(|(subject, _)| subject.clone())
                .collect(),
            tonight: self
                .state
                .log()
                .map(|log| log.visits().map(Arc::clone).collect())
                .unwrap_or_default(),
            weather: self.senses.gate.latest().cloned(),
            previous: self.state.queue().cloned(),
        })
    }
}
