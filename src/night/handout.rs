//! Handing visits out and taking their outcomes in.

use std::sync::Arc;

use super::accounting::{may_hand_out, opens, seconds_ms};
use super::draft::Draft;
use super::{Action, Fact, HandOut, Lease, Notice, Phase, Refusal, Reply, Verdict, VisitReport};
use crate::record::{HoldCause, LossCause, Outcome, PlanCause, QueueEntry, Visit, VisitId};
use crate::time::{NightDate, Span, Utc};

/// What could be handed out now.
pub(super) enum Offer {
    /// This entry: its setup may begin.
    Now(Box<QueueEntry>),
    /// Nothing before that instant.
    Later(Utc),
    /// The next entry's setup should have begun too long ago: the rest wants a plan.
    Slipped,
    /// The queue has nothing left.
    Nothing,
    /// Nothing may be handed out at all.
    Closed(Refusal),
}

impl Draft<'_> {
    /// What could be handed out now. Never an entry whose start lies more than its setup ahead.
    pub(super) fn offer(&self) -> Offer {
        if let Some(refusal) = self.forbidden() {
            return Offer::Closed(refusal);
        }
        let now = self.now.utc;
        let slip_ms = seconds_ms(self.rules().slip_tolerance_s);
        let phase = self.state.phase();
        for entry in self.state.entries_left() {
            let opens = opens(entry);
            let slipped = now - opens > slip_ms;
            match (may_hand_out(phase, entry.kind), slipped) {
                (true, _) if now < opens => return Offer::Later(opens),
                (true, false) => return Offer::Now(Box::new(entry.clone())),
                (true, true) if phase == Phase::Observing => return Offer::Slipped,
                // Lamps that nobody wanted in time are let go; they are no reason for a new plan.
                (true, true) => {}
                (false, _) if phase == Phase::Ready => {
                    let dusk = self.state.bounds().and_then(|b| b.darkness);
                    return Offer::Later(dusk.map_or(opens, |d| opens.max(d.start)));
                }
                (false, _) => {}
            }
        }
        Offer::Nothing
    }

    /// Why nothing may be handed out, if so.
    fn forbidden(&self) -> Option<Refusal> {
        if self.state.bounds().is_none() {
            return Some(Refusal::NoNight);
        }
        let causes: Vec<HoldCause> = self.state.holds().map(|hold| hold.cause).collect();
        if !causes.is_empty() {
            let words: Vec<&str> = self.state.holds().map(|hold| &*hold.detail).collect();
            let detail = words.join("; ");
            return Some(Refusal::Held { causes, detail });
        }
        if self.senses.gate.verdict(self.rules()) == Verdict::Unheard {
            return Some(Refusal::WaitingForWeather);
        }
        let waits_for_queue = self.senses.pending.is_some() || self.senses.wanted.is_some();
        match self.state.phase() {
            Phase::Daylight => Some(Refusal::NothingLeft),
            Phase::Observing | Phase::Ready if waits_for_queue => Some(Refusal::Replanning),
            _ => None,
        }
    }

    /// Grants the entry to a claimer, or to the night keeper's own command when there is none.
    pub(super) fn grant(
        &mut self,
        entry: QueueEntry,
        claimer: Option<(String, String)>,
    ) -> Result<Arc<Lease>, Refusal> {
        let (Some(visit), Some(queue)) = (self.state.next_visit(), self.state.queue()) else {
            return Err(Refusal::NoNight);
        };
        let now = self.now.utc;
        let late_ms = (now - opens(&entry)).max(0);
        let margin_ms = seconds_ms(self.rules().lease_margin_s);
        let (claim_key, holder) =
            claimer.unwrap_or_else(|| (format!("push:{visit}"), "command".to_owned()));
        let lease = Lease {
            expires: self.capped(entry.end.plus_ms(late_ms + margin_ms)),
            revision: queue.number,
            visit,
            entry,
            claim_key,
            holder,
            granted: now,
        };
        self.emit(Fact::LeaseGranted(lease.clone()))?;
        Ok(Arc::new(lease))
    }

    /// No lease runs beyond the closing limit.
    fn capped(&self, expires: Utc) -> Utc {
        let closing_ms = seconds_ms(self.rules().closing_limit_s);
        match self.state.bounds().and_then(|b| b.darkness) {
            Some(darkness) => expires.min(darkness.end.plus_ms(closing_ms)),
            None => expires,
        }
    }

    pub(super) fn claim(&mut self, key: String, holder: String) -> Result<Reply, Refusal> {
        if let Some(visit) = self.state.claimed_as(&key).cloned() {
            return match self.state.lease() {
                Some(lease) if lease.visit == visit => Ok(Reply::Lease(Arc::clone(lease))),
                _ => Err(Refusal::ClaimSpent { visit }),
            };
        }
        if self.rules().hand_out == HandOut::Push {
            return Err(Refusal::Pushing);
        }
        if let Some(lease) = self.state.lease() {
            return Err(Refusal::Leased {
                visit: lease.visit.clone(),
                holder: lease.holder.clone(),
                expires: lease.expires,
            });
        }
        // The weather may have changed in this very turn; what it says comes first.
        match self.offer() {
            Offer::Now(entry) => self.grant(*entry, Some((key, holder))).map(Reply::Lease),
            Offer::Later(opens) => Err(Refusal::NotYet { opens }),
            Offer::Nothing => Err(Refusal::NothingLeft),
            Offer::Closed(refusal) => Err(refusal),
            Offer::Slipped => {
                self.want_plan(PlanCause::VisitDeviated);
                Err(Refusal::Replanning)
            }
        }
    }

    pub(super) fn extend(&mut self, visit: VisitId, seconds: f64) -> Result<Reply, Refusal> {
        let limit_s = self.rules().extension_limit_s;
        if !(seconds > 0.0 && seconds <= limit_s) {
            return Err(Refusal::BadRequest(format!(
                "an extension of {seconds} s: ask for more than 0 and at most {limit_s} s"
            )));
        }
        let lease = match self.state.lease() {
            Some(lease) if lease.visit == visit => Arc::clone(lease),
            _ if self.state.ended(&visit).is_some() => return Err(Refusal::LeaseOver(visit)),
            _ => return Err(Refusal::UnknownVisit(visit)),
        };
        if let Some(cause) = self.state.stopping() {
            return Err(Refusal::MustStop { visit, cause });
        }
        let (at, now) = (self.now.utc, self.now.utc);
        let latest = self.capped(lease.entry.end.plus_ms(seconds_ms(limit_s)));
        let expires = now.plus_ms(seconds_ms(seconds)).min(latest);
        if expires <= lease.expires {
            // What was asked for is granted already, unless the limit cut it off.
            return if now.plus_ms(seconds_ms(seconds)) <= lease.expires {
                Ok(Reply::Extended(lease.expires))
            } else {
                Err(Refusal::ExtensionLimit(latest))
            };
        }
        self.emit(Fact::LeaseExtended { visit, at, expires })?;
        Ok(Reply::Extended(expires))
    }

    pub(super) fn report(
        &mut self,
        id: VisitId,
        key: String,
        report: VisitReport,
    ) -> Result<Reply, Refusal> {
        if let Some(visit) = self.state.reported_as(&key).cloned() {
            return match self.state.ended(&visit) {
                Some(known) if visit == id => Ok(Reply::Reported {
                    visit: Arc::clone(known),
                    again: true,
                }),
                _ => Err(Refusal::KeyReused { visit }),
            };
        }
        let record = self.state.log().and_then(|log| log.leases.get(&id));
        let (lease, night) = match (record, self.night()) {
            (Some(record), Some(night)) => (Arc::clone(&record.lease), night),
            _ => return Err(Refusal::UnknownVisit(id)),
        };
        let running = self.state.lease().is_some_and(|l| l.visit == id);
        let stopping = self.state.stopping().filter(|_| running);
        let blank = blank_visit(&lease, night, report.outcome);
        let visit = filled_in(blank, &lease, &report, stopping, self.now.utc)?;
        if let Some(known) = self.state.ended(&id).cloned()
            && known.outcome != Outcome::Unreported
        {
            return if tells_the_same(&known, &visit) {
                Ok(Reply::Reported {
                    visit: known,
                    again: true,
                })
            } else {
                Err(Refusal::AlreadyReported {
                    visit: id,
                    outcome: known.outcome,
                })
            };
        }
        self.end_visit(key, visit.clone(), &lease)?;
        Ok(Reply::Reported {
            visit: Arc::new(visit),
            again: false,
        })
    }

    /// Ends the running lease with no word: never done, never lost, to be settled later. Whoever
    /// still carries it out is told to end it, since the telescope goes to the next.
    pub(super) fn expire_lease(&mut self) -> Result<(), Refusal> {
        let (Some(lease), Some(night)) = (self.state.lease().cloned(), self.night()) else {
            return Ok(());
        };
        let visit = blank_visit(&lease, night, Outcome::Unreported);
        self.notify(Notice::Unreported(lease.visit.clone()));
        self.actions.push(Action::StopVisit {
            visit: lease.visit.clone(),
            cause: LossCause::Other,
        });
        self.end_visit(format!("expired:{}", lease.visit), visit, &lease)
    }

    fn night(&self) -> Option<NightDate> {
        self.state.bounds().map(|bounds| bounds.night)
    }

    fn end_visit(
        &mut self,
        report_key: String,
        visit: Visit,
        lease: &Lease,
    ) -> Result<(), Refusal> {
        let at = self.now.utc;
        let was_running = self.state.lease().is_some_and(|l| l.visit == visit.id);
        let late_ms = at - lease.entry.end;
        let deviated = visit.outcome != Outcome::Done
            || late_ms.abs() > seconds_ms(self.rules().replan_after_s);
        self.emit(Fact::VisitEnded {
            at,
            report_key,
            visit,
        })?;
        if self.state.closed().is_some() {
            return self.close_night();
        }
        if deviated || !was_running {
            self.want_plan(PlanCause::VisitDeviated);
        }
        Ok(())
    }
}

/// The visit of a lease before anything is known of it.
fn blank_visit(lease: &Lease, night: NightDate, outcome: Outcome) -> Visit {
    let entry = &lease.entry;
    Visit {
        id: lease.visit.clone(),
        night,
        kind: entry.kind,
        subject: entry.subject.clone(),
        began: lease.granted,
        exposing: Span::new(lease.granted, lease.granted),
        exposed_s: 0.0,
        planned: entry.exposures,
        outcome,
        credit: 0.0,
        airmass: entry.airmass,
        snr: None,
        rv_error_m_s: None,
        predicted_rv_error_m_s: entry.predicted_rv_error_m_s,
        mid_bjd_tdb: None,
        note: String::new(),
    }
}

/// The visit as the report tells it, with what it leaves out filled in and what cannot be cut off:
/// nothing was exposed before the lease began or after the report came, nor longer than the span
/// in which it was.
fn filled_in(
    blank: Visit,
    lease: &Lease,
    report: &VisitReport,
    stopping: Option<LossCause>,
    now: Utc,
) -> Result<Visit, Refusal> {
    check_numbers(report)?;
    let within = Span::new(lease.granted, now);
    let told = report
        .exposing
        .unwrap_or_else(|| assumed_span(lease, report, now));
    let exposing = told.intersect(&within);
    let planned_s = lease.entry.exposures.total_s();
    let longest_s = exposing.length_ms() as f64 / 1000.0;
    let gathers = matches!(report.outcome, Outcome::Done | Outcome::Short);
    let default_s = if gathers { planned_s } else { 0.0 };
    let exposed_s = report.exposed_s.unwrap_or(default_s).min(longest_s);
    let outcome = settled_outcome(
        report.outcome,
        stopping,
        exposed_s > 0.0 || planned_s <= 0.0,
    )?;
    let credit = match outcome {
        Outcome::Done => 1.0,
        Outcome::Short if planned_s > 0.0 => (exposed_s / planned_s).clamp(0.0, 1.0),
        _ => 0.0,
    };
    let cut = report.exposing.is_some_and(|told| told != exposing);
    let note = if cut {
        format!(
            "{} [told times {} to {} were cut to the lease]",
            report.note, told.start, told.end
        )
    } else {
        report.note.clone()
    };
    Ok(Visit {
        exposing,
        exposed_s,
        outcome,
        credit,
        snr: report.snr,
        rv_error_m_s: report.rv_error_m_s,
        note: note.trim().to_owned(),
        ..blank
    })
}

fn check_numbers(report: &VisitReport) -> Result<(), Refusal> {
    let told = [
        ("exposed_s", report.exposed_s),
        ("snr", report.snr),
        ("rv_error_m_s", report.rv_error_m_s),
    ];
    for (name, value) in told {
        if let Some(value) = value.filter(|v| !(v.is_finite() && *v >= 0.0)) {
            return Err(Refusal::BadRequest(format!(
                "{name} = {value}: give a finite number of 0 or more"
            )));
        }
    }
    Ok(())
}

/// Where a report tells no times: the planned length (or what was exposed) up to now.
fn assumed_span(lease: &Lease, report: &VisitReport, now: Utc) -> Span {
    let planned_ms = lease.entry.end - lease.entry.start;
    let length_ms = match (report.outcome, report.exposed_s) {
        (Outcome::Done, _) => planned_ms,
        (Outcome::Short, Some(exposed_s)) => seconds_ms(exposed_s).min(planned_ms),
        _ => 0,
    };
    Span::new(now.plus_ms(-length_ms), now)
}

/// The outcome that counts: a visit with nothing gathered is lost, and one that was told to stop
/// is lost to what stopped it unless the observatory knows better.
fn settled_outcome(
    told: Outcome,
    stopping: Option<LossCause>,
    gathered: bool,
) -> Result<Outcome, Refusal> {
    let unknown = || Outcome::Lost(stopping.unwrap_or(LossCause::Other));
    match told {
        Outcome::Unreported => Err(Refusal::BadRequest(
            "'unreported' cannot be reported: tell done, short, lost or refused".to_owned(),
        )),
        Outcome::Done | Outcome::Short if !gathered => Ok(unknown()),
        Outcome::Lost(LossCause::Other) => Ok(unknown()),
        told => Ok(told),
    }
}

/// Whether two reports of one visit tell the same, times apart (they may have been filled in).
fn tells_the_same(known: &Visit, told: &Visit) -> bool {
    known.outcome == told.outcome
        && known.snr == told.snr
        && known.rv_error_m_s == told.rv_error_m_s
        && (known.exposed_s - told.exposed_s).abs() < 1.0
}
