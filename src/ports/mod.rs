//! Floor 4: what the night needs from the world, as traits alone.

mod ledger;
mod world;

pub use ledger::{Ledger, LedgerFault};
pub use world::{Clock, Notifier, Observatory, ObservatoryFault, WeatherSource};
