//! Floor 6: the season ahead, many times over.
//!
//! Every realisation is a run of real nights: the planner, the night keeper and the accounting are
//! those of the daemon, in a world that is drawn. What the sky decides is the same in all of them,
//! so they go through the season in step, night by night, and share it.

mod ensemble;
mod realisation;
mod results;

pub use ensemble::{Ensemble, SeasonAsk, SeasonError};
pub use realisation::{Realisation, Tally};
pub use results::{SeasonResults, TargetResult};
