//! What the night reaches the world through.

use thiserror::Error;

use crate::night::{FeedFault, Lease, Notice, Stamp};
use crate::record::{LossCause, VisitId};
use crate::weather::WeatherSample;

/// Tells the time.
pub trait Clock {
    /// Both clocks, read together. The monotonic one never goes back between two calls.
    fn now(&self) -> Stamp;
}

/// Gives the weather.
pub trait WeatherSource {
    /// The newest sample. Returns within the source's own time limit; keeps nothing.
    ///
    /// # Errors
    /// [`FeedFault`], whatever went wrong.
    fn poll(&mut self, now: Stamp) -> Result<WeatherSample, FeedFault>;
}

/// Why a visit could not be started or stopped.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("the observatory did not take visit {visit}: {detail}")]
pub struct ObservatoryFault {
    /// Which visit.
    pub visit: VisitId,
    /// What went wrong.
    pub detail: String,
}

/// Carries visits out on the night keeper's word (push). Both calls return at once; how the visit
/// ended comes back as [`crate::night::Event::Report`].
pub trait Observatory {
    /// Starts a visit. When it returns `Ok`, a report will follow, or the lease runs out.
    ///
    /// # Errors
    /// [`ObservatoryFault`] when it was not started; nothing will follow, so the caller reports it
    /// as refused.
    fn start(&mut self, lease: &Lease) -> Result<(), ObservatoryFault>;

    /// Has a visit end now. When it returns, the word is on its way; one that has ended already is
    /// no fault.
    fn stop(&mut self, visit: &VisitId, cause: LossCause);
}

/// Tells the outside world. Best effort: returns at once and has no error, since a dead listener
/// must never delay a night.
pub trait Notifier {
    /// Takes the notice on its way; whether it arrives is not known.
    fn tell(&mut self, notice: &Notice);
}
