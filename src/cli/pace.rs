//! Looking on while nights are rehearsed: a line of progress, and the pace of `--speed`.

use std::thread::sleep;
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressStyle};

use crate::night::Fact;
use crate::sim::Watch;
use crate::time::{NightDate, Utc};

/// Shows how far a rehearsal is, and slows it down to a multiple of real time.
pub struct Pace {
    bar: ProgressBar,
    /// Invented seconds in a real one; `None`: as fast as it goes.
    speed: Option<f64>,
    /// The real and the invented instant that the pace is counted from.
    began: Option<(Instant, Utc)>,
    visits: u32,
}

impl Pace {
    /// For so many nights. Nothing is shown where standard error is no terminal.
    pub fn new(nights: u32, speed: Option<f64>) -> Self {
        let bar = ProgressBar::new(u64::from(nights));
        let style = ProgressStyle::with_template("{spinner} night {pos} of {len}  {msg}");
        if let Ok(style) = style {
            bar.set_style(style);
        }
        Pace {
            bar,
            speed,
            began: None,
            visits: 0,
        }
    }

    /// A night begins: the days between nights are not waited for.
    pub fn begin(&mut self, date: NightDate) {
        self.bar.inc(1);
        self.bar.set_message(format!("{date}  planning"));
        self.began = None;
        self.visits = 0;
    }

    /// Prints above the line of progress.
    pub fn aside<T>(&self, print: impl FnOnce() -> T) -> T {
        self.bar.suspend(print)
    }
}

impl Watch for Pace {
    fn until(&mut self, at: Utc) {
        let done = self.visits;
        self.bar.set_message(format!("{at}  {done} visits ended"));
        let Some(speed) = self.speed else { return };
        let (real, invented) = *self.began.get_or_insert((Instant::now(), at));
        let due_s = (at - invented).max(0) as f64 / 1000.0 / speed;
        // Seconds beyond the range of a duration are longer than anybody waits.
        let due = Duration::try_from_secs_f64(due_s).unwrap_or(Duration::MAX);
        sleep(due.saturating_sub(real.elapsed()));
    }

    fn kept(&mut self, facts: &[Fact]) {
        let ended = |fact: &&Fact| matches!(fact, Fact::VisitEnded { .. });
        self.visits += facts.iter().filter(ended).count() as u32;
    }
}
