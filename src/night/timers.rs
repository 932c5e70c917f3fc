//! Every deadline of the night in one table, on the clock that never steps.

use std::collections::BTreeMap;

use super::Stamp;
use crate::time::{MonotonicMs, Utc};

/// What a deadline is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Timer {
    /// Darkness begins. Follows the sky, so it is set again when the wall clock steps.
    Dusk,
    /// Darkness ends. Follows the sky.
    Dawn,
    /// The night's noon, for a night without darkness. Follows the sky.
    Noon,
    /// The last lease and the last lamps must be done. Follows the sky.
    ClosingLimit,
    /// The next entry may be pushed. Follows the sky.
    NextEntry,
    /// The lease runs out.
    LeaseExpiry,
    /// The freshest weather sample becomes stale.
    WeatherStale,
    /// A failed plan is asked for again.
    PlanRetry,
    /// A ledger that could not be written is tried again.
    LedgerRetry,
}

impl Timer {
    /// Whether the deadline is an instant of the sky rather than a length of time.
    const fn follows_the_sky(self) -> bool {
        matches!(
            self,
            Timer::Dusk | Timer::Dawn | Timer::Noon | Timer::ClosingLimit | Timer::NextEntry
        )
    }
}

/// The timer table.
#[derive(Clone, Debug, PartialEq, Eq, Default)]
pub struct Timers(BTreeMap<Timer, MonotonicMs>);

impl Timers {
    /// The earliest deadline.
    pub fn next_deadline(&self) -> Option<MonotonicMs> {
        self.0.values().copied().min()
    }

    /// Whether the deadline has been reached.
    pub fn is_due(&self, timer: Timer, now: MonotonicMs) -> bool {
        self.0.get(&timer).is_some_and(|at| *at <= now)
    }

    /// When the deadline is, if it is set.
    pub fn at(&self, timer: Timer) -> Option<MonotonicMs> {
        self.0.get(&timer).copied()
    }

    /// Moves every deadline that has been reached to so much later.
    pub fn postpone_due(&mut self, now: MonotonicMs, by_ms: i64) {
        for at in self.0.values_mut().filter(|at| **at <= now) {
            *at = now.plus_ms(by_ms);
        }
    }

    /// Sets or moves a deadline.
    pub fn set(&mut self, timer: Timer, at: MonotonicMs) {
        self.0.insert(timer, at);
    }

    /// Sets a deadline to an instant of the wall clock as it reads now.
    pub fn set_utc(&mut self, timer: Timer, at: Utc, now: Stamp) {
        self.set(timer, now.mono.plus_ms(at - now.utc));
    }

    /// Takes a deadline out.
    pub fn clear(&mut self, timer: Timer) {
        self.0.remove(&timer);
    }

    /// The wall clock went forward by so much: instants of the sky are that much nearer.
    pub fn step(&mut self, by_ms: i64) {
        for (timer, at) in &mut self.0 {
            if timer.follows_the_sky() {
                *at = at.plus_ms(-by_ms);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_step_of_the_wall_clock_moves_the_sky_alone() {
        let now = Stamp {
            utc: Utc::from_unix_ms(1_000_000),
            mono: MonotonicMs(500),
        };
        let mut timers = Timers::default();
        timers.set_utc(Timer::Dusk, now.utc.plus_ms(10_000), now);
        timers.set(Timer::LeaseExpiry, MonotonicMs(9_000));
        assert_eq!(timers.next_deadline(), Some(MonotonicMs(9_000)));
        timers.step(8_000);
        assert!(timers.is_due(Timer::Dusk, MonotonicMs(2_500)));
        assert!(!timers.is_due(Timer::LeaseExpiry, MonotonicMs(8_999)));
        timers.clear(Timer::Dusk);
        assert_eq!(timers.next_deadline(), Some(MonotonicMs(9_000)));
    }
}
