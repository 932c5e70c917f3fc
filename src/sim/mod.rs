//! Floor 5: an invented world for rehearsals, seasons and tests: clock, weather, faults,
//! observatory, and the driver that lets a night happen in it as fast as it can.

mod chance;
mod clock;
mod desk;
mod drive;
mod ledger;
mod observatory;
mod record;
mod weather;
mod world;

pub use chance::{Purpose, between, exponential, happens, normal, stream};
pub use clock::SimClock;
pub use desk::{RehearsalError, rehearse_night};
pub use drive::{NightRun, Planner, SimFault, Unwatched, Watch, run_night};
pub use ledger::MemoryLedger;
pub use observatory::{Habits, SimObservatory};
pub use record::{Record, RecordFault};
pub use weather::{NightWeather, Recorded, SkyChain};
pub use world::World;
