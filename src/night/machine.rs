//! The night keeper: one owner of the state, turned by events.
//!
//! A turn has three parts, and its types do not let them be taken in another order:
//!
//! 1. [`Machine::decide`] makes a [`Step`], of which the shell sees the facts alone;
//! 2. the shell keeps those facts in the ledger;
//! 3. [`Machine::kept`] takes the step in and only then gives out the reply and the actions. When
//!    the ledger failed, [`Machine::not_kept`] does instead: the night is held, nothing is handed
//!    out or acknowledged, and what must be stopped is still stopped.
//!
//! [`Machine::turn`] does all three.

use std::borrow::Cow;

use super::draft::Draft;
use super::gate::Gate;
use super::outdated::PlannedFor;
use super::timers::{Timer, Timers};
use super::{Action, Event, Fact, FoldError, NightRules, Notice, Refusal, Reply, Stamp, State};
use super::{Verdict, accounting::seconds_ms};
use crate::record::{HoldCause, PlanCause};
use crate::time::{MonotonicMs, NightDate};
use crate::weather::WeatherSample;

/// What the machine knows beside the facts, and may forget in a crash: deadlines, the weather's
/// gate, a plan that was asked for.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Senses {
    pub(super) gate: Gate,
    pub(super) timers: Timers,
    pub(super) last: Stamp,
    /// Number of the revision that was asked for.
    pub(super) pending: Option<u32>,
    /// A plan that is wanted once the pending one has come.
    pub(super) wanted: Option<PlanCause>,
    /// The weather that the last plan was asked for with; `None` until there is one.
    pub(super) planned_for: Option<PlannedFor>,
}

/// The night keeper.
#[derive(Clone, Debug)]
pub struct Machine {
    pub(super) state: State,
    pub(super) senses: Senses,
    pub(super) rules: NightRules,
    /// Facts that hold the night although the ledger could not take them yet.
    pub(super) arrears: Vec<Fact>,
    turns: u64,
}

/// A turn whose facts are not kept yet.
#[derive(Debug)]
#[must_use = "keep the facts, then call Machine::kept or Machine::not_kept"]
pub struct Step {
    facts: Vec<Fact>,
    fresh_from: usize,
    state: Option<Box<State>>,
    senses: Box<Senses>,
    rules: Option<Box<NightRules>>,
    night: Option<NightDate>,
    actions: Vec<Action>,
    reply: Result<Reply, Refusal>,
    now: Stamp,
    turn: u64,
}

impl Step {
    /// The night that the facts belong to and the facts to keep, all or none; `None` when there is
    /// nothing to keep.
    pub fn to_keep(&self) -> Option<(NightDate, &[Fact])> {
        match self.night {
            Some(night) if !self.facts.is_empty() => Some((night, &self.facts)),
            _ => None,
        }
    }
}

/// A turn that is done: what the shell may now say and must now do.
#[derive(Debug)]
pub struct Performed {
    /// The facts that were kept.
    pub facts: Vec<Fact>,
    /// What to do, in this order.
    pub actions: Vec<Action>,
    /// What to answer.
    pub reply: Result<Reply, Refusal>,
}

impl Machine {
    /// A machine that knows of no night yet.
    pub fn new(rules: NightRules, now: Stamp) -> Self {
        Machine {
            state: State::default(),
            senses: Senses {
                gate: Gate::closed(&rules),
                timers: Timers::default(),
                last: now,
                pending: None,
                wanted: None,
                planned_for: None,
            },
            rules,
            arrears: Vec::new(),
            turns: 0,
        }
    }

    /// The machine as it was after these facts of one night (the latest that the ledger knows,
    /// closed or not). Send [`Event::Restarted`] next. The lease under way keeps its end by the
    /// wall clock: the monotonic one did not live through the restart.
    ///
    /// A report for a night before the present one is settled by a machine recovered from that
    /// night's facts and turned by that one [`Event::Report`].
    ///
    /// # Errors
    /// [`FoldError`] when the facts are no night's.
    pub fn recover(rules: NightRules, facts: &[Fact], now: Stamp) -> Result<Self, FoldError> {
        let state = State::replay(facts)?;
        let was_open =
            !state.is_held_by(HoldCause::Weather) && !state.is_held_by(HoldCause::FeedLost);
        let mut machine = Machine::new(rules, now);
        machine.senses.gate = Gate::resumed(&machine.rules, was_open, now.mono);
        machine.senses.timers = timers_of(&state, &machine.rules, now);
        machine.state = state;
        Ok(machine)
    }

    /// The state.
    pub fn state(&self) -> &State {
        &self.state
    }

    /// The rules in force.
    pub fn rules(&self) -> &NightRules {
        &self.rules
    }

    /// When [`Event::Tick`] is due at the latest, on the monotonic clock; `None`: nothing is.
    pub fn next_deadline(&self) -> Option<MonotonicMs> {
        let next = self.senses.timers.next_deadline()?;
        // While the ledger is down nothing but its retry can get anything done; overdue deadlines
        // would only make the shell spin.
        match self.senses.timers.at(Timer::LedgerRetry) {
            Some(retry) if self.state.is_held_by(HoldCause::Ledger) => Some(retry.max(next)),
            _ => Some(next),
        }
    }

    /// What the weather's gate says.
    pub fn weather(&self) -> Verdict {
        self.senses.gate.verdict(&self.rules)
    }

    /// The freshest weather sample, while the feed is sound.
    pub fn latest_weather(&self) -> Option<&WeatherSample> {
        self.senses.gate.latest()
    }

    /// A plan was asked for and has not come.
    pub fn is_planning(&self) -> bool {
        self.senses.pending.is_some()
    }

    /// Facts that hold the night in memory and wait for the ledger to take them.
    pub fn arrears(&self) -> &[Fact] {
        &self.arrears
    }

    /// What the event makes of the night now. Changes nothing: the step must be kept first.
    pub fn decide(&self, event: Event, now: Stamp) -> Step {
        let draft = Draft::new(self, now);
        let done = draft.live_through(event);
        let mut facts = Vec::new();
        if !done.facts.is_empty() {
            facts.extend(self.arrears.iter().cloned());
        }
        let fresh_from = facts.len();
        facts.extend(done.facts);
        let night = match &done.state {
            Some(state) => state.bounds().map(|b| b.night),
            None => self.state.bounds().map(|b| b.night),
        };
        Step {
            facts,
            fresh_from,
            state: done.state.map(Box::new),
            senses: Box::new(done.senses),
            rules: done.rules,
            night,
            actions: done.actions,
            reply: done.reply,
            now,
            turn: self.turns,
        }
    }

    /// The step's facts are on disk (or there were none): takes it in and gives out what to say
    /// and do.
    pub fn kept(&mut self, step: Step) -> Performed {
        debug_assert_eq!(self.turns, step.turn, "a step is kept before the next");
        self.turns += 1;
        if !step.facts.is_empty() {
            self.arrears.clear();
        }
        if let Some(state) = step.state {
            self.state = *state;
        }
        self.senses = *step.senses;
        if let Some(rules) = step.rules {
            self.rules = *rules;
        }
        Performed {
            facts: step.facts,
            actions: step.actions,
            reply: step.reply,
        }
    }

    /// The ledger could not take the step's facts: the night is held, nothing is handed out or
    /// acknowledged. Holds that the step began do hold, and visits are stopped: what is safe needs
    /// no disk.
    pub fn not_kept(&mut self, step: Step, detail: &str) -> Performed {
        debug_assert_eq!(self.turns, step.turn, "a step is kept before the next");
        self.turns += 1;
        let now = step.now;
        self.senses.gate = step.senses.gate;
        self.senses.last = step.senses.last;
        // A queue that could not be kept, or a plan that was asked for in this step, is gone: the
        // rest wants a new one once the ledger is back.
        self.senses.pending = None;
        self.senses.wanted = step.senses.wanted.or(Some(PlanCause::Recovered));
        let trouble = Fact::HoldBegan {
            at: now.utc,
            cause: HoldCause::Ledger,
            detail: detail.to_owned(),
        };
        let begun = step.facts[step.fresh_from..].iter();
        let holds = begun.filter(|f| matches!(f, Fact::HoldBegan { .. }));
        for fact in holds.chain([&trouble]) {
            if self.state.is_open() && self.state.fold(fact).is_ok() {
                self.arrears.push(fact.clone());
            }
        }
        let retry = now.mono.plus_ms(seconds_ms(self.rules.ledger_retry_s));
        self.senses.timers.set(Timer::LedgerRetry, retry);
        let mut actions: Vec<Action> = step
            .actions
            .into_iter()
            .filter(|action| matches!(action, Action::StopVisit { .. }))
            .collect();
        actions.push(Action::Notify(Notice::Trouble(format!(
            "the ledger cannot be written: {detail}"
        ))));
        Performed {
            facts: Vec::new(),
            actions,
            reply: Err(Refusal::LedgerDown),
        }
    }

    /// A whole turn: decides, keeps the facts with `keep`, takes the step in. The second value is
    /// the ledger's error, when it had one.
    pub fn turn<E: std::fmt::Display>(
        &mut self,
        event: Event,
        now: Stamp,
        keep: impl FnOnce(NightDate, &[Fact]) -> Result<(), E>,
    ) -> (Performed, Option<E>) {
        let step = self.decide(event, now);
        let outcome = match step.to_keep() {
            Some((night, facts)) => keep(night, facts),
            None => Ok(()),
        };
        match outcome {
            Ok(()) => (self.kept(step), None),
            Err(error) => (self.not_kept(step, &error.to_string()), Some(error)),
        }
    }
}

/// What a draft has become.
pub(super) struct Done {
    pub(super) facts: Vec<Fact>,
    pub(super) actions: Vec<Action>,
    pub(super) reply: Result<Reply, Refusal>,
    pub(super) state: Option<State>,
    pub(super) senses: Senses,
    pub(super) rules: Option<Box<NightRules>>,
}

/// The state of a draft: the machine's own until the first fact.
pub(super) type DraftState<'a> = Cow<'a, State>;

/// The timer table that a state wants, for one that was had back from its facts.
fn timers_of(state: &State, rules: &NightRules, now: Stamp) -> Timers {
    use super::Phase;
    let mut timers = Timers::default();
    let (Some(bounds), true) = (state.bounds(), state.is_open()) else {
        return timers;
    };
    match (bounds.darkness, state.phase()) {
        (None, _) => timers.set_utc(Timer::Noon, bounds.span.end, now),
        (Some(darkness), Phase::Closing) => {
            let limit = darkness.end.plus_ms(seconds_ms(rules.closing_limit_s));
            timers.set_utc(Timer::ClosingLimit, limit, now);
        }
        (Some(darkness), phase) => {
            timers.set_utc(Timer::Dawn, darkness.end, now);
            if bounds.ours && matches!(phase, Phase::Daylight | Phase::Ready) {
                timers.set_utc(Timer::Dusk, darkness.start, now);
            }
        }
    }
    if let Some(lease) = state.lease() {
        timers.set_utc(Timer::LeaseExpiry, lease.expires, now);
    }
    if state.is_held_by(HoldCause::Ledger) {
        timers.set(Timer::LedgerRetry, now.mono);
    }
    timers
}
