//! What each event does, reports and claims apart.

use std::sync::Arc;

use super::draft::Draft;
use super::outdated::PlannedFor;
use super::{Action, Event, Fact, NightBounds, Notice, Phase, Refusal, Reply, State};
use crate::catalogue::TargetId;
use crate::record::{HoldCause, PlanCause, PlanRevision};
use crate::time::Utc;
use crate::weather::WeatherSample;

/// Causes of holds that outlive a night: those that a person or the instrument began.
const LASTING_HOLDS: [HoldCause; 2] = [HoldCause::Instrument, HoldCause::Operator];

impl Draft<'_> {
    /// Takes the event in.
    pub(super) fn take(&mut self, event: Event) -> Result<Reply, Refusal> {
        match event {
            Event::Tick => Ok(Reply::Taken),
            Event::NightBegins(bounds) => self.begin_night(bounds),
            Event::Restarted => self.restarted(),
            Event::WeatherArrived(sample) => self.weather_arrived(sample),
            Event::FeedFailed(fault) => {
                self.senses.gate.fail(fault);
                Ok(Reply::Taken)
            }
            Event::Planned(revision) => self.planned(revision),
            Event::PlanFailed { detail } => self.plan_failed(detail),
            Event::Claim { key, holder } => {
                self.heed_weather()?;
                self.claim(key, holder)
            }
            Event::Extend { visit, seconds } => self.extend(visit, seconds),
            Event::Report { visit, key, report } => self.report(visit, key, report),
            Event::SettingsChanged(rules) => {
                self.adopt_rules(rules);
                self.want_plan(PlanCause::SettingsChanged);
                Ok(Reply::Taken)
            }
            Event::InstrumentFault { detail } => {
                self.in_a_night()?;
                self.begin_hold(HoldCause::Instrument, detail)
                    .map(|()| Reply::Taken)
            }
            Event::InstrumentMended => self.end_hold(HoldCause::Instrument).map(|()| Reply::Taken),
            Event::LedgerTrouble { detail } => {
                self.in_a_night()?;
                self.begin_hold(HoldCause::Ledger, detail)
                    .map(|()| Reply::Taken)
            }
            Event::LedgerBack => self.end_hold(HoldCause::Ledger).map(|()| Reply::Taken),
            Event::Hold { by, reason } => self.hold(&by, &reason),
            Event::Release { by } => self.release(by),
            Event::Pause { target, by, reason } => self.pause(target, by, reason),
            Event::Resume { target, by } => self.resume(target, by),
            Event::Urgent {
                target,
                until,
                by,
                reason,
            } => self.urgent(target, until, by, reason),
            Event::Skip { by } => self.skip(by),
            Event::Note { by, text } => self.note(by, text),
        }
    }

    fn in_a_night(&self) -> Result<(), Refusal> {
        match self.state.bounds() {
            Some(_) => Ok(()),
            None => Err(Refusal::NoNight),
        }
    }

    /// Opens the night. What persons and instrument began in the one before is told again, so that
    /// the facts of a night are enough to know it by.
    fn begin_night(&mut self, bounds: NightBounds) -> Result<Reply, Refusal> {
        if let Some(known) = self.state.bounds().map(|b| b.night) {
            if self.state.is_open() {
                return Err(Refusal::NightStillOpen(known));
            }
            if known == bounds.night {
                return Err(Refusal::NightDone(known));
            }
        }
        let before = self.state.clone().into_owned();
        self.emit(Fact::NightOpened {
            night: bounds.night,
            span: bounds.span,
            darkness: bounds.darkness,
            ours: bounds.ours,
            mode: bounds.mode,
        })?;
        self.carry_over(&before)?;
        let now = self.now.utc;
        self.absent_since = bounds.darkness.map(|d| d.start).filter(|dusk| *dusk < now);
        self.want_plan(PlanCause::Evening);
        Ok(Reply::Taken)
    }

    fn carry_over(&mut self, before: &State) -> Result<(), Refusal> {
        let at = self.now.utc;
        for hold in before.holds().filter(|h| LASTING_HOLDS.contains(&h.cause)) {
            self.begin_hold(hold.cause, hold.detail.to_string())?;
        }
        for (target, pause) in before.paused() {
            self.emit(Fact::TargetPaused {
                at,
                target: target.clone(),
                by: pause.by.clone(),
                reason: pause.reason.clone(),
            })?;
        }
        for (target, urgency) in before.urgent().iter().filter(|(_, u)| at < u.until) {
            self.emit(Fact::TargetUrgent {
                at,
                target: target.clone(),
                until: urgency.until,
                by: urgency.by.clone(),
                reason: urgency.reason.clone(),
            })?;
        }
        Ok(())
    }

    fn restarted(&mut self) -> Result<Reply, Refusal> {
        if self.state.is_open() {
            let at = self.now.utc;
            self.emit(Fact::Resumed { at })?;
            self.want_plan(PlanCause::Recovered);
        }
        Ok(Reply::Taken)
    }

    fn weather_arrived(&mut self, sample: WeatherSample) -> Result<Reply, Refusal> {
        let (now, is_open) = (self.now, self.state.is_open());
        let (gate, rules) = self.gate_and_rules();
        let before = std::mem::discriminant(&gate.verdict(rules));
        gate.take(sample, now, rules);
        let changed = before != std::mem::discriminant(&gate.verdict(rules));
        if is_open
            && let Some(sample) = gate.latest().cloned()
            && gate.note(now.mono, rules, changed)
        {
            self.emit(Fact::WeatherNoted(sample))?;
        }
        self.heed_conditions();
        Ok(Reply::Taken)
    }

    /// Wants a plan when the one in force was made for another wind or seeing. A sample is needed to
    /// say so: while the feed is lost, nothing is known to have changed.
    fn heed_conditions(&mut self) {
        let in_use = matches!(self.state.phase(), Phase::Ready | Phase::Observing);
        let (Some(planned_for), Some(latest), true) =
            (self.senses.planned_for, self.senses.gate.latest(), in_use)
        else {
            return;
        };
        let now = PlannedFor::of(Some(latest), self.now.mono);
        if planned_for.is_outdated_by(&now, self.rules()) {
            self.want_plan(PlanCause::WeatherChanged);
        }
    }

    fn planned(&mut self, revision: PlanRevision) -> Result<Reply, Refusal> {
        if self.senses.pending != Some(revision.number) {
            return Err(Refusal::BadPlan(format!(
                "revision {} was not asked for",
                revision.number
            )));
        }
        self.senses.pending = None;
        if let Err(words) = self.check_plan(&revision) {
            self.plan_failed(words.clone())?;
            return Err(Refusal::BadPlan(words));
        }
        self.emit(Fact::PlanPublished(revision))?;
        if let Some(queue) = self.state.queue() {
            self.actions.push(Action::PublishQueue(Arc::clone(queue)));
        }
        Ok(Reply::Taken)
    }

    fn check_plan(&self, revision: &PlanRevision) -> Result<(), String> {
        let night = self.state.bounds().map(|b| b.night);
        if night != Some(revision.night) || !self.state.is_open() {
            return Err(format!("night {} is not open", revision.night));
        }
        if self.state.phase() == Phase::Closing {
            return Err("darkness is over".to_owned());
        }
        if !revision.value.is_finite() {
            return Err(format!("its value is {}", revision.value));
        }
        for entry in &revision.entries {
            if entry.end < entry.start || !(entry.setup_s >= 0.0 && entry.setup_s.is_finite()) {
                return Err(format!("the times of '{}' are impossible", entry.subject));
            }
        }
        for pair in revision.entries.windows(2) {
            if pair[1].start < pair[0].end {
                return Err(format!(
                    "'{}' and '{}' overlap",
                    pair[0].subject, pair[1].subject
                ));
            }
        }
        Ok(())
    }

    /// The queue in force stays; the next try comes later.
    fn plan_failed(&mut self, detail: String) -> Result<Reply, Refusal> {
        self.senses.pending = None;
        self.senses.wanted = None;
        let retry_ms = super::accounting::seconds_ms(self.rules().plan_retry_s);
        let retry = self.now.mono.plus_ms(retry_ms);
        self.senses
            .timers
            .set(super::timers::Timer::PlanRetry, retry);
        self.notify(Notice::Trouble(format!("planning failed: {detail}")));
        Ok(Reply::Taken)
    }

    fn hold(&mut self, by: &str, reason: &str) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        if self.state.is_held_by(HoldCause::Operator) {
            // The hold that is on stays as it was; the second word is kept beside it.
            return self.note(by.to_owned(), format!("hold: {reason}"));
        }
        self.begin_hold(HoldCause::Operator, format!("{by}: {reason}"))?;
        Ok(Reply::Taken)
    }

    /// Ends the operator's hold and no other: an unsafe feed stays a hold.
    fn release(&mut self, by: String) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        if !self.state.is_held_by(HoldCause::Operator) {
            let causes = self.state.holds().map(|h| h.cause).collect();
            return Err(Refusal::NotHeld(causes));
        }
        self.note(by, "released the operator's hold".to_owned())?;
        self.end_hold(HoldCause::Operator)?;
        self.heed_weather()?;
        let still = self.state.holds().map(|h| h.cause).collect();
        Ok(Reply::Released(still))
    }

    fn pause(&mut self, target: TargetId, by: String, reason: String) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        let at = self.now.utc;
        self.want_plan(PlanCause::Request(format!("{by} paused {target}")));
        self.emit(Fact::TargetPaused {
            at,
            target,
            by,
            reason,
        })?;
        Ok(Reply::Taken)
    }

    fn resume(&mut self, target: TargetId, by: String) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        if !self.state.paused().contains_key(&target) {
            return Err(Refusal::NotPaused(target));
        }
        let at = self.now.utc;
        self.want_plan(PlanCause::Request(format!("{by} resumed {target}")));
        self.emit(Fact::TargetResumed { at, target, by })?;
        Ok(Reply::Taken)
    }

    fn urgent(
        &mut self,
        target: TargetId,
        until: Utc,
        by: String,
        reason: String,
    ) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        let at = self.now.utc;
        if until <= at {
            return Err(Refusal::BadRequest(format!(
                "urgent until {until} is over already: it is {at}"
            )));
        }
        self.want_plan(PlanCause::Request(format!("{by} wants {target}: {reason}")));
        self.emit(Fact::TargetUrgent {
            at,
            target,
            until,
            by,
            reason,
        })?;
        Ok(Reply::Taken)
    }

    fn skip(&mut self, by: String) -> Result<Reply, Refusal> {
        let Some(visit) = self.state.lease().map(|l| l.visit.clone()) else {
            return Err(Refusal::NoVisit);
        };
        let cause = crate::record::LossCause::Operator;
        self.emit(Fact::VisitSkipped {
            at: self.now.utc,
            visit: visit.clone(),
            cause,
            by,
        })?;
        self.actions.push(Action::StopVisit {
            visit: visit.clone(),
            cause,
        });
        Ok(Reply::Skipped(visit))
    }

    fn note(&mut self, by: String, text: String) -> Result<Reply, Refusal> {
        self.in_a_night()?;
        let at = self.now.utc;
        self.emit(Fact::Note { at, by, text })?;
        Ok(Reply::Taken)
    }
}
