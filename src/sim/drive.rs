//! Lets a night happen in the invented world, jumping from each instant at which something is due
//! to the next.

use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;

use thiserror::Error;

use super::chance::{Purpose, stream};
use super::clock::SimClock;
use super::observatory::SimObservatory;
use super::weather::NightWeather;
use super::world::World;
use crate::night::{
    Action, Event, Fact, FoldError, Lease, Machine, NightBounds, PlanRequest, Refusal, Reply,
};
use crate::ports::{Clock, Ledger, LedgerFault, Observatory, WeatherSource};
use crate::record::{NightSummary, PlanRevision, VisitId};
use crate::time::{MonotonicMs, NightDate, Utc};

/// More turns than this at one instant, and the night goes round in circles.
const MOST_TURNS_AT_ONE_INSTANT: u32 = 1000;
/// The night keeper is up so long before it could open, milliseconds.
const EARLY_MS: i64 = 3_600_000;

/// Makes the plan that was asked for.
pub type Planner<'a> = dyn FnMut(&PlanRequest) -> PlanRevision + 'a;

/// What can go wrong with a simulated night.
#[derive(Debug, Error)]
pub enum SimFault {
    /// The ledger failed.
    #[error("the simulated night cannot be recorded")]
    Ledger(#[from] LedgerFault),
    /// The record of an interrupted night makes no sense.
    #[error("the record of the night {night} cannot be followed")]
    Record {
        /// The night.
        night: NightDate,
        /// What was wrong.
        #[source]
        cause: FoldError,
    },
    /// That night is in the ledger already.
    #[error("the night {0} is in the ledger already, closed: take another night or ledger")]
    NightDone(NightDate),
    /// The night keeper stopped itself: a fault of the program.
    #[error(
        "the night keeper broke in the night {night}, seed {seed}, realisation {realisation}: {refusal}"
    )]
    Broken {
        /// The night.
        night: NightDate,
        /// The world's seed.
        seed: u64,
        /// The world's realisation.
        realisation: u32,
        /// What it said.
        refusal: Refusal,
    },
    /// The night goes round in circles: a fault of the program.
    #[error("the night {night} stands still at {at}, seed {seed}, realisation {realisation}")]
    Stuck {
        /// The night.
        night: NightDate,
        /// Where.
        at: Utc,
        /// The world's seed.
        seed: u64,
        /// The world's realisation.
        realisation: u32,
    },
    /// The account does not add up to the darkness: a fault of the program.
    #[error(
        "the account of the night {night} is off by {off_ms} ms, seed {seed}, realisation {realisation}"
    )]
    Unbalanced {
        /// The night.
        night: NightDate,
        /// Account minus darkness, milliseconds.
        off_ms: i64,
        /// The world's seed.
        seed: u64,
        /// The world's realisation.
        realisation: u32,
    },
}

/// Looks on while a night happens: to show progress, or to slow it down.
pub trait Watch {
    /// The night is about to go on to that instant.
    fn until(&mut self, at: Utc) {
        let _ = at;
    }

    /// These facts were kept.
    fn kept(&mut self, facts: &[Fact]) {
        let _ = facts;
    }
}

/// Nobody looks on.
#[derive(Clone, Copy, Debug, Default)]
pub struct Unwatched;

impl Watch for Unwatched {}

/// Something due in the world.
#[derive(Clone, Debug)]
enum Due {
    Poll,
    Claim { key: String },
    Extend { visit: VisitId, seconds: f64 },
    Report { visit: VisitId, key: String },
    Fault,
    Mended,
}

/// A night under way in the invented world.
#[derive(Debug)]
pub struct NightRun {
    machine: Machine,
    bounds: NightBounds,
    clock: SimClock,
    weather: NightWeather,
    observatory: SimObservatory,
    due: BTreeMap<(MonotonicMs, u64), Due>,
    inbox: VecDeque<Event>,
    entered: u64,
    claims: u64,
    claim_due: Option<(MonotonicMs, u64)>,
    /// The telescope is busy until then, whatever the night keeper believes.
    busy_until: MonotonicMs,
    turns_here: u32,
    poll_ms: i64,
    key: (u64, u32),
    bears_ledger_faults: bool,
}

impl NightRun {
    /// Draws the night's world and begins it; goes on with it when the ledger holds its beginning.
    ///
    /// # Errors
    /// [`SimFault`] when the ledger cannot be read, or has that night closed.
    pub fn begin(
        world: &mut World,
        bounds: NightBounds,
        ledger: &dyn Ledger,
    ) -> Result<Self, SimFault> {
        let weather = world.draw_weather(&bounds);
        let faults = world.draw_faults(&bounds);
        let facts = ledger.facts(bounds.night)?;
        let clock = SimClock::at(starts_at(world, &bounds, &facts));
        let (machine, first) = open_machine(world, bounds, &facts, clock)?;
        let key = (world.seed, world.realisation);
        let rng = stream(key.0, key.1, bounds.night, Purpose::Observatory);
        let mut run = NightRun {
            machine,
            bounds,
            clock,
            weather,
            observatory: SimObservatory::new(world.habits, rng, clock),
            due: BTreeMap::new(),
            inbox: VecDeque::from([first]),
            entered: 0,
            claims: facts.len() as u64,
            claim_due: None,
            busy_until: clock.now().mono,
            turns_here: 0,
            poll_ms: world.poll_ms.max(1000),
            key,
            bears_ledger_faults: false,
        };
        if bounds.ours && bounds.darkness.is_some() {
            run.enter(clock.now().mono, Due::Poll);
            for fault in faults.spans().iter().filter(|f| f.end > clock.now().utc) {
                run.enter(clock.mono_at(fault.start), Due::Fault);
                run.enter(clock.mono_at(fault.end), Due::Mended);
            }
        }
        Ok(run)
    }

    /// The night keeper.
    pub fn machine(&self) -> &Machine {
        &self.machine
    }

    /// What the clocks read.
    pub fn clock(&self) -> &SimClock {
        &self.clock
    }

    /// Steps the wall clock alone; the world goes on by the other.
    pub fn step_wall_clock(&mut self, by_ms: i64) {
        self.clock.step_wall(by_ms);
    }

    /// Lets the night go on, held, while the ledger cannot be written, instead of giving up.
    pub fn bear_ledger_faults(&mut self) {
        self.bears_ledger_faults = true;
    }

    /// Hands the night keeper an event of the caller's, before anything else happens.
    pub fn hand_in(&mut self, event: Event) {
        self.inbox.push_back(event);
    }

    /// The night keeper dies and comes back from its record; the world goes on.
    ///
    /// # Errors
    /// [`SimFault`] when the record cannot be read or followed.
    pub fn crash(&mut self, ledger: &dyn Ledger) -> Result<(), SimFault> {
        let facts = ledger.facts(self.bounds.night)?;
        self.inbox.clear();
        let rules = self.machine.rules().clone();
        if facts.is_empty() {
            self.machine = Machine::new(rules, self.clock.now());
            self.inbox.push_back(Event::NightBegins(self.bounds));
            return Ok(());
        }
        let recovered = Machine::recover(rules, &facts, self.clock.now());
        self.machine = recovered.map_err(|cause| SimFault::Record {
            night: self.bounds.night,
            cause,
        })?;
        self.inbox.push_back(Event::Restarted);
        self.schedule_claim(0);
        Ok(())
    }

    /// Takes one turn; `false` once the night is closed and nothing more will come.
    ///
    /// # Errors
    /// [`SimFault`].
    pub fn step(
        &mut self,
        planner: &mut Planner<'_>,
        ledger: &mut dyn Ledger,
        watch: &mut dyn Watch,
    ) -> Result<bool, SimFault> {
        if let Some(event) = self.inbox.pop_front() {
            self.turn(event, None, planner, ledger, watch)?;
            return Ok(true);
        }
        if self.is_over() {
            return Ok(false);
        }
        let next_due = self.due.first_key_value().map(|((at, _), _)| *at);
        let next = match (self.machine.next_deadline(), next_due) {
            (Some(deadline), Some(due)) => deadline.min(due),
            (Some(one), None) | (None, Some(one)) => one,
            (None, None) => return Ok(false),
        };
        if next > self.clock.now().mono {
            self.turns_here = 0;
            watch.until(self.clock.utc_at(next));
            self.clock.advance_to(next);
        }
        self.observatory.set_clock(self.clock);
        match self.due.first_entry().filter(|e| e.key().0 <= next) {
            Some(entry) => {
                let (slot, due) = entry.remove_entry();
                self.happen(slot, due, planner, ledger, watch)?;
            }
            None => {
                self.turn(Event::Tick, None, planner, ledger, watch)?;
            }
        }
        Ok(true)
    }

    /// The night's account, checked: it sums to the darkness. `None` while the night is open.
    ///
    /// # Errors
    /// [`SimFault::Unbalanced`].
    pub fn account(&self) -> Result<Option<NightSummary>, SimFault> {
        let Some(summary) = self.machine.state().closed() else {
            return Ok(None);
        };
        let darkness_ms = summary.darkness.map_or(0, |d| d.length_ms());
        let off_ms = summary.split.total_ms() - darkness_ms;
        if off_ms != 0 {
            return Err(SimFault::Unbalanced {
                night: self.bounds.night,
                off_ms,
                seed: self.key.0,
                realisation: self.key.1,
            });
        }
        Ok(Some(summary.clone()))
    }

    /// Closed, and no report is still on its way.
    fn is_over(&self) -> bool {
        let reports = |due: &Due| matches!(due, Due::Report { .. });
        self.machine.state().closed().is_some() && !self.due.values().any(reports)
    }

    fn enter(&mut self, at: MonotonicMs, due: Due) -> (MonotonicMs, u64) {
        let slot = (at.max(self.clock.now().mono), self.entered);
        self.entered += 1;
        self.due.insert(slot, due);
        slot
    }

    /// Has the observatory claim so much later; the earlier of two claims is made.
    fn schedule_claim(&mut self, in_ms: i64) {
        let at = self.clock.now().mono.plus_ms(in_ms).max(self.busy_until);
        if let Some(slot) = self.claim_due {
            if slot.0 <= at {
                return;
            }
            self.due.remove(&slot);
        }
        self.claims += 1;
        let key = format!("claim-{}", self.claims);
        self.claim_due = Some(self.enter(at, Due::Claim { key }));
    }

    fn happen(
        &mut self,
        slot: (MonotonicMs, u64),
        due: Due,
        planner: &mut Planner<'_>,
        ledger: &mut dyn Ledger,
        watch: &mut dyn Watch,
    ) -> Result<(), SimFault> {
        if self.claim_due == Some(slot) {
            self.claim_due = None;
        }
        let event = match &due {
            Due::Poll => {
                let again = self.clock.now().mono.plus_ms(self.poll_ms);
                if self.machine.state().closed().is_none() {
                    self.enter(again, Due::Poll);
                }
                match self.weather.poll(self.clock.now()) {
                    Ok(sample) => Event::WeatherArrived(sample),
                    Err(fault) => Event::FeedFailed(fault),
                }
            }
            Due::Claim { key } => Event::Claim {
                key: key.clone(),
                holder: "simulated observatory".to_owned(),
            },
            Due::Extend { visit, seconds } => Event::Extend {
                visit: visit.clone(),
                seconds: *seconds,
            },
            Due::Report { visit, key } => match self.observatory.report(visit) {
                Some(report) => Event::Report {
                    visit: visit.clone(),
                    key: key.clone(),
                    report,
                },
                None => return Ok(()),
            },
            Due::Fault => Event::InstrumentFault {
                detail: "simulated fault".to_owned(),
            },
            Due::Mended => Event::InstrumentMended,
        };
        self.turn(event, Some(due), planner, ledger, watch)
    }

    /// Turns the night keeper by an event and lets the world answer.
    fn turn(
        &mut self,
        event: Event,
        due: Option<Due>,
        planner: &mut Planner<'_>,
        ledger: &mut dyn Ledger,
        watch: &mut dyn Watch,
    ) -> Result<(), SimFault> {
        self.turns_here += 1;
        let now = self.clock.now();
        let (seed, realisation) = self.key;
        let night = self.bounds.night;
        if self.turns_here > MOST_TURNS_AT_ONE_INSTANT {
            return Err(SimFault::Stuck {
                night,
                at: now.utc,
                seed,
                realisation,
            });
        }
        self.observatory.set_clock(self.clock);
        let keep = |night, facts: &[Fact]| ledger.append(night, facts);
        let (done, fault) = self.machine.turn(event, now, keep);
        if let Some(fault) = fault.filter(|_| !self.bears_ledger_faults) {
            return Err(fault.into());
        }
        if let Err(refusal @ Refusal::Broken(_)) = done.reply {
            return Err(SimFault::Broken {
                night,
                seed,
                realisation,
                refusal,
            });
        }
        watch.kept(&done.facts);
        for action in done.actions {
            self.perform(action, planner);
        }
        self.poke(&done.facts);
        self.heed(due, done.reply);
        Ok(())
    }

    fn perform(&mut self, action: Action, planner: &mut Planner<'_>) {
        match action {
            Action::AskForPlan(request) => {
                self.inbox.push_back(Event::Planned(planner(&request)));
            }
            Action::StartVisit(lease) => self.begin_visit(&lease),
            Action::StopVisit { visit, cause } => {
                self.observatory.stop(&visit, cause);
                self.busy_until = self.clock.now().mono;
                if let Some(at) = self.observatory.promise(&visit).and_then(|p| p.reports_at) {
                    let key = format!("{visit}-stopped");
                    self.enter(at, Due::Report { visit, key });
                }
            }
            Action::Notify(_) | Action::PublishQueue(_) | Action::CloseNight(_) => {}
        }
    }

    /// What makes a free observatory try again.
    fn poke(&mut self, facts: &[Fact]) {
        let wakes = |fact: &Fact| {
            matches!(
                fact,
                Fact::PlanPublished(_)
                    | Fact::HoldEnded { .. }
                    | Fact::DarknessBegan { .. }
                    | Fact::DarknessEnded { .. }
                    | Fact::VisitEnded { .. }
            )
        };
        if facts.iter().any(wakes) && self.machine.state().closed().is_none() {
            let delay_ms = self.observatory.claim_delay_ms();
            self.schedule_claim(delay_ms);
        }
    }

    /// What the observatory makes of an answer.
    fn heed(&mut self, due: Option<Due>, reply: Result<Reply, Refusal>) {
        match (due, reply) {
            (Some(Due::Claim { key }), Ok(Reply::Lease(lease))) => {
                if self.observatory.promise(&lease.visit).is_some() {
                    return;
                }
                self.begin_visit(&lease);
                if self.observatory.sends_twice() {
                    self.enter(self.clock.now().mono.plus_ms(1000), Due::Claim { key });
                }
            }
            (Some(Due::Claim { .. }), Err(Refusal::NotYet { opens: at }))
            | (Some(Due::Claim { .. }), Err(Refusal::Leased { expires: at, .. })) => {
                let wait_ms = (at - self.clock.now().utc).max(1);
                let delay_ms = self.observatory.claim_delay_ms();
                self.schedule_claim(wait_ms + delay_ms);
            }
            (Some(Due::Claim { .. }), Err(Refusal::WaitingForWeather)) => {
                self.schedule_claim(self.poll_ms);
            }
            (Some(Due::Report { visit, key }), Err(Refusal::LedgerDown)) => {
                let again = self.clock.now().mono.plus_ms(10_000);
                self.enter(again, Due::Report { visit, key });
            }
            _ => {}
        }
    }

    fn begin_visit(&mut self, lease: &Arc<Lease>) {
        if self.observatory.start(lease).is_err() {
            return;
        }
        let Some(promise) = self.observatory.promise(&lease.visit) else {
            return;
        };
        self.busy_until = promise.free_at;
        if let Some(seconds) = promise.extension_s {
            let visit = lease.visit.clone();
            self.enter(self.clock.now().mono, Due::Extend { visit, seconds });
        }
        if let Some(at) = promise.reports_at {
            let report = |key: &str| Due::Report {
                visit: lease.visit.clone(),
                key: format!("{}-{key}", lease.visit),
            };
            self.enter(at, report("report"));
            if promise.twice {
                self.enter(at.plus_ms(5000), report("report"));
            }
        }
        // A silent observatory comes for its next visit all the same.
        let wait_ms = promise.free_at.0 - self.clock.now().mono.0;
        let delay_ms = self.observatory.claim_delay_ms();
        self.schedule_claim(wait_ms + delay_ms + 10_000);
    }
}

/// Lets one night happen, as fast as it can, and gives its account.
///
/// # Errors
/// [`SimFault`].
pub fn run_night(
    world: &mut World,
    bounds: NightBounds,
    planner: &mut Planner<'_>,
    ledger: &mut dyn Ledger,
    watch: &mut dyn Watch,
) -> Result<NightSummary, SimFault> {
    let mut run = NightRun::begin(world, bounds, ledger)?;
    while run.step(planner, ledger, watch)? {}
    let (seed, realisation) = (world.seed, world.realisation);
    run.account()?.ok_or(SimFault::Stuck {
        night: bounds.night,
        at: run.clock().now().utc,
        seed,
        realisation,
    })
}

/// When the night keeper is there: early enough to have seen good weather long enough at dusk, and
/// after whatever the record holds already.
fn starts_at(world: &World, bounds: &NightBounds, facts: &[Fact]) -> Utc {
    let dwell_ms = (world.rules.weather.opening_dwell_s * 1000.0) as i64;
    let early_ms = EARLY_MS + dwell_ms + 2 * world.poll_ms;
    let fresh = match bounds.darkness {
        Some(darkness) => darkness.start.plus_ms(-early_ms).max(bounds.span.start),
        None => bounds.span.start,
    };
    let recorded = facts.iter().filter_map(Fact::at).max();
    recorded.map_or(fresh, |last| last.max(fresh))
}

fn open_machine(
    world: &World,
    bounds: NightBounds,
    facts: &[Fact],
    clock: SimClock,
) -> Result<(Machine, Event), SimFault> {
    let rules = world.rules.clone();
    if facts.is_empty() {
        let machine = Machine::new(rules, clock.now());
        return Ok((machine, Event::NightBegins(bounds)));
    }
    let night = bounds.night;
    let machine = Machine::recover(rules, facts, clock.now())
        .map_err(|cause| SimFault::Record { night, cause })?;
    if machine.state().closed().is_some() {
        return Err(SimFault::NightDone(night));
    }
    Ok((machine, Event::Restarted))
}
