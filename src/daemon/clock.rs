//! A clock that starts when it is told and runs as fast as it is told.

use std::time::Instant;

use crate::night::Stamp;
use crate::ports::Clock;
use crate::time::{MonotonicMs, Utc};

/// Invented time on real sockets: both readings run `speed` times as fast as the real ones.
#[derive(Clone, Copy, Debug)]
pub struct InventedClock {
    began: Instant,
    start: Utc,
    speed: f64,
}

impl InventedClock {
    /// Starts now, at `start`. `speed`: invented seconds in a real one, above 0.
    pub fn start(start: Utc, speed: f64) -> Self {
        InventedClock {
            began: Instant::now(),
            start,
            speed,
        }
    }
}

impl Clock for InventedClock {
    fn now(&self) -> Stamp {
        // Float to integer conversion saturates: a far future stays one.
        let elapsed_ms = (self.began.elapsed().as_secs_f64() * 1000.0 * self.speed) as i64;
        Stamp {
            utc: self.start.plus_ms(elapsed_ms),
            mono: MonotonicMs(elapsed_ms),
        }
    }
}
