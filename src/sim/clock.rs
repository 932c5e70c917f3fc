//! A clock that goes where it is told.

use crate::night::Stamp;
use crate::ports::Clock;
use crate::time::{MonotonicMs, Utc};

/// Invented time. The monotonic reading starts at zero.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SimClock {
    now: Stamp,
}

impl SimClock {
    /// A clock that reads this.
    pub fn at(utc: Utc) -> Self {
        SimClock {
            now: Stamp {
                utc,
                mono: MonotonicMs(0),
            },
        }
    }

    /// Goes forward to that monotonic reading; one in the past changes nothing.
    pub fn advance_to(&mut self, mono: MonotonicMs) {
        let by_ms = (mono.0 - self.now.mono.0).max(0);
        self.now.mono = self.now.mono.plus_ms(by_ms);
        self.now.utc = self.now.utc.plus_ms(by_ms);
    }

    /// Steps the wall clock alone.
    pub fn step_wall(&mut self, by_ms: i64) {
        self.now.utc = self.now.utc.plus_ms(by_ms);
    }

    /// The monotonic reading at an instant of the wall clock as it reads now.
    pub fn mono_at(&self, utc: Utc) -> MonotonicMs {
        self.now.mono.plus_ms(utc - self.now.utc)
    }

    /// The wall clock at a monotonic reading, as it reads now.
    pub fn utc_at(&self, mono: MonotonicMs) -> Utc {
        self.now.utc.plus_ms(mono.0 - self.now.mono.0)
    }
}

impl Clock for SimClock {
    fn now(&self) -> Stamp {
        self.now
    }
}
