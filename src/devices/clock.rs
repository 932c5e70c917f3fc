//! The system's clock.

use std::time::Instant;

use crate::night::Stamp;
use crate::ports::Clock;
use crate::time::{MonotonicMs, Utc};

/// The system's wall clock with its monotonic one, which counts from when this was made.
#[derive(Clone, Copy, Debug)]
pub struct SystemClock {
    began: Instant,
}

impl SystemClock {
    /// Starts counting.
    pub fn start() -> Self {
        SystemClock {
            began: Instant::now(),
        }
    }
}

impl Clock for SystemClock {
    fn now(&self) -> Stamp {
        let elapsed_ms = self.began.elapsed().as_millis();
        Stamp {
            utc: Utc::from_unix_ms(chrono::Utc::now().timestamp_millis()),
            mono: MonotonicMs(i64::try_from(elapsed_ms).unwrap_or(i64::MAX)),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_readings_go_on_together() {
        let clock = SystemClock::start();
        let first = clock.now();
        std::thread::sleep(std::time::Duration::from_millis(30));
        let second = clock.now();
        assert!(second.mono.0 - first.mono.0 >= 30);
        assert!(second.utc > first.utc);
    }
}
