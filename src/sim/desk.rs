//! A simulated night with the real planner behind it.

use thiserror::Error;

use super::drive::{SimFault, Watch, run_night};
use super::world::World;
use crate::night::{NightBounds, PlanRequest, RunMode, ask_of, revision_of};
use crate::plan::solve::Settings;
use crate::plan::{Desk, PlanError, Planned, SkyTable};
use crate::ports::Ledger;
use crate::record::NightSummary;

/// Why a rehearsed night could not be carried through.
#[derive(Debug, Error)]
pub enum RehearsalError {
    /// The night itself broke.
    #[error(transparent)]
    Night(#[from] SimFault),
    /// The planner refused.
    #[error(transparent)]
    Plan(#[from] PlanError),
}

/// Lets the night of `sky` happen, planned at `desk` with this much search for each queue.
///
/// # Errors
/// [`RehearsalError`].
pub fn rehearse_night(
    world: &mut World,
    (desk, sky): (&Desk<'_>, &SkyTable),
    search: &Settings,
    ledger: &mut dyn Ledger,
    watch: &mut dyn Watch,
) -> Result<NightSummary, RehearsalError> {
    let mut failed = None;
    let mut planner = |request: &PlanRequest| {
        let planned = desk.plan(&ask_of(request), search, &mut || true);
        // The night goes on without a queue; the fault is told at its end.
        let planned = planned.unwrap_or_else(|error| {
            failed = Some(error);
            Planned::default()
        });
        revision_of(request, planned)
    };
    let bounds = NightBounds {
        night: sky.night.date,
        span: sky.night.span,
        darkness: sky.darkness,
        ours: sky.ours,
        mode: RunMode::Rehearsal,
    };
    let summary = run_night(world, bounds, &mut planner, ledger, watch)?;
    match failed {
        Some(error) => Err(error.into()),
        None => Ok(summary),
    }
}
