//! Floor 0: instants with their scale in the type, spans, and the night of a site.

mod night;
mod span;
mod utc;

pub use night::{Night, NightDate, NightDateError};
pub use span::{Span, SpanSet};
pub use utc::{MonotonicMs, Utc, UtcError};

/// Milliseconds in a day without a leap second.
pub const DAY_MS: i64 = 86_400_000;
/// Milliseconds in a minute, the step of a night's grid.
pub const MINUTE_MS: i64 = 60_000;
/// Julian date of the Unix epoch, 1970-01-01T00:00 (Explanatory Supplement to the Astronomical
/// Almanac, 3rd ed., §15.11: JD 2440587.5).
pub const UNIX_EPOCH_JD: f64 = 2_440_587.5;
