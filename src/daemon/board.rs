//! What the keeper shows after each turn: read by anybody, at once, without asking it.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::atomic::{AtomicBool, AtomicI64, Ordering};
use std::sync::{Arc, PoisonError, RwLock};
use std::time::Instant;

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use crate::night::{Lease, Machine, RunMode, Stamp, Verdict};
use crate::page::queue::{kind_label, round};
use crate::record::{HoldCause, PlanRevision, QueueEntry, VisitCounts};
use crate::time::NightDate;

/// The loop is stalled when it has not come round for so long, milliseconds of real time.
const STALLED_MS: i64 = 10_000;

/// A hold that is on.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct HoldView {
    /// `weather`, `feed_lost`, `instrument`, `operator` or `ledger`.
    pub cause: String,
    /// In words, with the values that decided.
    pub detail: String,
    /// Since when, UTC.
    pub since: String,
}

/// The darkness of the night.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct DarknessView {
    /// Its start, UTC.
    pub start: String,
    /// Its end, UTC.
    pub end: String,
}

/// Exposures of a visit.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct ExposuresView {
    /// How many.
    pub count: u32,
    /// Of how many seconds each.
    pub seconds: f64,
}

/// Where the star of a visit is to be found.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct StarView {
    /// ICRS right ascension at the epoch, degrees.
    pub ra_deg: f64,
    /// ICRS declination at the epoch, degrees.
    pub dec_deg: f64,
    /// Epoch of place and motion, Julian year.
    pub epoch: f64,
    /// Proper motion in right ascension with cos δ, milliarcseconds a year.
    pub pm_ra_mas_yr: f64,
    /// Proper motion in declination, milliarcseconds a year.
    pub pm_dec_mas_yr: f64,
    /// Parallax, milliarcseconds.
    pub parallax_mas: f64,
    /// Systemic velocity, km/s.
    pub radial_velocity_km_s: f64,
}

/// A visit that was handed out.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct LeaseView {
    /// Its name: extend and report under it.
    pub visit: String,
    /// `science`, `standard` or `calibration`.
    pub kind: String,
    /// The target, or the calibration's name.
    pub target: String,
    /// The star; `null` for a calibration that looks at none.
    pub star: Option<StarView>,
    /// When the first exposure is to start, UTC.
    pub start: String,
    /// When the last read-out is to end, UTC.
    pub end: String,
    /// Slew, settling and acquisition before the first exposure, seconds.
    pub setup_s: f64,
    /// How to expose.
    pub exposures: ExposuresView,
    /// Airmass foreseen.
    pub airmass: Option<f64>,
    /// Who holds it.
    pub holder: String,
    /// When it was handed out, UTC.
    pub granted: String,
    /// When it runs out unless extended or reported, UTC.
    pub expires: String,
    /// Why it is in the queue.
    pub because: String,
}

/// The next visit of the queue.
#[derive(Clone, Debug, Serialize, Deserialize, ToSchema)]
pub struct NextView {
    /// The target, or the calibration's name.
    pub target: String,
    /// When its first exposure is to start, UTC.
    pub start: String,
}

/// Visits of the night by outcome.
#[derive(Clone, Copy, Debug, Default, Serialize, Deserialize, ToSchema)]
pub struct CountsView {
    /// As planned.
    pub done: u32,
    /// Stopped early.
    pub short: u32,
    /// Lost.
    pub lost: u32,
    /// Refused.
    pub refused: u32,
    /// No word.
    pub unreported: u32,
}

/// How the daemon stands.
#[derive(Clone, Debug, Default, Serialize, Deserialize, ToSchema)]
pub struct StatusView {
    /// `real`, or `invented_clock` for a rehearsal in invented time.
    pub mode: String,
    /// The program's version.
    pub version: String,
    /// The time by its clock, UTC.
    pub now: String,
    /// The night, named by the date of its evening; `null` before the first.
    pub night: Option<String>,
    /// `daylight`, `ready`, `observing`, `held` or `closing`.
    pub state: String,
    /// The night's darkness; `null` when there is none.
    pub darkness: Option<DarknessView>,
    /// Every hold that is on.
    pub holds: Vec<HoldView>,
    /// What the weather says: `open`, `bad`, `lost` or `unheard`.
    pub weather: String,
    /// The same in words.
    pub weather_detail: String,
    /// The freshest weather, by quantity.
    pub weather_values: BTreeMap<String, f64>,
    /// The visit under way.
    pub lease: Option<LeaseView>,
    /// The visit after it.
    pub next: Option<NextView>,
    /// Number of the queue's revision; `null` before the first.
    pub revision: Option<u32>,
    /// Visits of the queue still to be handed out.
    pub left: usize,
    /// The rest of the night is being planned.
    pub planning: bool,
    /// Visits of the night so far.
    pub visits: CountsView,
    /// Targets that a person stopped.
    pub paused: Vec<String>,
    /// Targets that a person wants soon.
    pub urgent: Vec<String>,
    /// The ledger takes what it is given.
    pub ledger_writable: bool,
    /// What is wrong with the settings on disk, which are not in force then.
    pub settings_refused: Option<String>,
    /// This program is never the safety system.
    pub caution: String,
}

/// The board.
#[derive(Debug)]
pub struct Board {
    began: Instant,
    beat_ms: AtomicI64,
    stopping: AtomicBool,
    status: RwLock<Arc<StatusView>>,
    queue: RwLock<Option<Arc<PlanRevision>>>,
    targets: RwLock<BTreeSet<String>>,
}

impl Default for Board {
    fn default() -> Self {
        Board {
            began: Instant::now(),
            beat_ms: AtomicI64::new(0),
            stopping: AtomicBool::new(false),
            status: RwLock::new(Arc::new(StatusView::default())),
            queue: RwLock::new(None),
            targets: RwLock::new(BTreeSet::new()),
        }
    }
}

impl Board {
    /// How it stands.
    pub fn status(&self) -> Arc<StatusView> {
        let status = self.status.read().unwrap_or_else(PoisonError::into_inner);
        Arc::clone(&status)
    }

    /// The queue in force.
    pub fn queue(&self) -> Option<Arc<PlanRevision>> {
        let queue = self.queue.read().unwrap_or_else(PoisonError::into_inner);
        queue.clone()
    }

    /// Whether a target of that name is on the list in force.
    pub fn knows(&self, target: &str) -> bool {
        let targets = self.targets.read().unwrap_or_else(PoisonError::into_inner);
        targets.contains(target)
    }

    /// The list in force.
    pub(super) fn set_targets(&self, targets: impl Iterator<Item = String>) {
        *self.targets.write().unwrap_or_else(PoisonError::into_inner) = targets.collect();
    }

    /// What is wrong with the daemon itself, if anything is.
    pub fn ill(&self) -> Option<String> {
        let age_ms = self.elapsed_ms() - self.beat_ms.load(Ordering::Relaxed);
        if age_ms > STALLED_MS {
            return Some(format!(
                "the loop has not come round for {} s",
                age_ms / 1000
            ));
        }
        if !self.status().ledger_writable {
            return Some("the ledger cannot be written".to_owned());
        }
        None
    }

    /// The daemon is on its way out.
    pub fn is_stopping(&self) -> bool {
        self.stopping.load(Ordering::Relaxed)
    }

    pub(super) fn stop(&self) {
        self.stopping.store(true, Ordering::Relaxed);
    }

    pub(super) fn beat(&self) {
        self.beat_ms.store(self.elapsed_ms(), Ordering::Relaxed);
    }

    pub(super) fn show(&self, status: StatusView, queue: Option<Arc<PlanRevision>>) {
        *self.status.write().unwrap_or_else(PoisonError::into_inner) = Arc::new(status);
        *self.queue.write().unwrap_or_else(PoisonError::into_inner) = queue;
    }

    fn elapsed_ms(&self) -> i64 {
        i64::try_from(self.began.elapsed().as_millis()).unwrap_or(i64::MAX)
    }
}

/// What status and page always say.
pub const CAUTION: &str = "This program chooses observations. It does not protect people, the dome \
or the optics: rain, wind, sun and motion interlocks are the observatory's own, and they win.";

/// The label of a mode.
pub fn mode_label(mode: RunMode) -> &'static str {
    match mode {
        RunMode::Real => "real",
        RunMode::Rehearsal => "rehearsal",
        RunMode::InventedClock => "invented_clock",
    }
}

/// How the machine stands, for the board.
pub(super) fn status_of(
    machine: &Machine,
    now: Stamp,
    mode: RunMode,
    star: impl Fn(&QueueEntry) -> Option<StarView>,
) -> StatusView {
    let state = machine.state();
    let bounds = state.bounds();
    let (weather, weather_detail) = match machine.weather() {
        Verdict::Open => ("open", String::new()),
        Verdict::Bad(why) => ("bad", why),
        Verdict::Lost(fault) => ("lost", fault.to_string()),
        Verdict::Unheard => ("unheard", "waiting for the first sample".to_owned()),
    };
    let night: Option<NightDate> = bounds.map(|bounds| bounds.night);
    StatusView {
        mode: mode_label(mode).to_owned(),
        version: env!("CARGO_PKG_VERSION").to_owned(),
        now: now.utc.to_string(),
        night: night.map(|night| night.to_string()),
        state: state.phase().label().to_owned(),
        darkness: bounds.and_then(|b| b.darkness).map(|span| DarknessView {
            start: span.start.to_string(),
            end: span.end.to_string(),
        }),
        holds: state
            .holds()
            .map(|hold| HoldView {
                cause: hold.cause.label().to_owned(),
                detail: hold.detail.to_string(),
                since: hold.began.to_string(),
            })
            .collect(),
        weather: weather.to_owned(),
        weather_detail,
        weather_values: machine
            .latest_weather()
            .map_or_else(BTreeMap::new, |sample| {
                let values = sample.values.iter();
                values.map(|(q, v)| (q.label().to_owned(), *v)).collect()
            }),
        lease: state
            .lease()
            .map(|lease| lease_view(lease, star(&lease.entry))),
        next: state.entries_left().next().map(|entry| NextView {
            target: entry.subject.to_string(),
            start: entry.start.to_string(),
        }),
        revision: state.queue().map(|queue| queue.number),
        left: state.entries_left().count(),
        planning: machine.is_planning(),
        visits: state.log().map_or_else(CountsView::default, |log| {
            counts_view(&crate::night::count(log))
        }),
        paused: state.paused().keys().map(ToString::to_string).collect(),
        urgent: state
            .urgent()
            .iter()
            .filter(|(_, urgency)| urgency.until > now.utc)
            .map(|(target, _)| target.to_string())
            .collect(),
        ledger_writable: !state.is_held_by(HoldCause::Ledger) && machine.arrears().is_empty(),
        settings_refused: None,
        caution: CAUTION.to_owned(),
    }
}

fn counts_view(counts: &VisitCounts) -> CountsView {
    CountsView {
        done: counts.done,
        short: counts.short,
        lost: counts.lost,
        refused: counts.refused,
        unreported: counts.unreported,
    }
}

/// A lease as the observatory sees it.
pub(super) fn lease_view(lease: &Lease, star: Option<StarView>) -> LeaseView {
    let entry = &lease.entry;
    LeaseView {
        visit: lease.visit.0.clone(),
        kind: kind_label(entry.kind).to_owned(),
        target: entry.subject.to_string(),
        star,
        start: entry.start.to_string(),
        end: entry.end.to_string(),
        setup_s: round(entry.setup_s, 1),
        exposures: ExposuresView {
            count: entry.exposures.count,
            seconds: round(entry.exposures.seconds, 1),
        },
        airmass: entry.airmass.map(|airmass| round(airmass, 4)),
        holder: lease.holder.clone(),
        granted: lease.granted.to_string(),
        expires: lease.expires.to_string(),
        because: entry.because.clone(),
    }
}
