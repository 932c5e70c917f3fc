//! Floor 6: the season ahead, many times over.
//!
//! Every realisation is a run of real nights: the planner, the night keeper and the accounting are
//! those of the daemon, in a world that is drawn. What the sky decides is the same in all of them,
//! so they go through the season in step, night by night, and share it. A realisation that has come
//! to its end is a [`Realised`]; all figures ([`SeasonResults`], [`Difference`]) are made of these
//! and of the [`Frame`] that they have in common, so that a season can be kept on disk ([`Store`]),
//! gone on with and put together from shards.

mod check;
mod ensemble;
mod frame;
mod realisation;
mod realised;
mod replay;
mod results;
mod store;

pub use ensemble::{Effort, Ensemble, SeasonAsk, SeasonError};
pub use frame::{Frame, FrameProgramme, FrameTarget, LAYOUT, MonthWanted, month_of};
pub use realised::{NightRealised, PriceSample, Realised, StarRealised, VisitRow};
pub use results::{
    Difference, Estimate, MonthUse, NightUse, PriceOfTime, ProgrammeResult, SeasonResults,
    TargetDifference, TargetResult,
};
pub use store::{Store, StoreError, shard};
