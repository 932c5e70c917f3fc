//! What a star has had so far, as the scorer needs to know it.

use crate::time::{NightDate, Utc};

/// A visit that counts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct CreditedVisit {
    /// The night it counts for.
    pub night: NightDate,
    /// Middle of the exposure.
    pub mid: Utc,
    /// The same at the solar system's barycentre, BJD_TDB in days.
    pub mid_bjd_tdb: f64,
    /// Velocity error, m/s: the reported one where there is one, else the predicted one.
    pub rv_error_m_s: f64,
    /// Share of a full visit, 0 < credit ≤ 1.
    pub credit: f64,
}

/// A star's standing at the start of a night (or at a re-plan within it).
#[derive(Clone, Debug, PartialEq, Default)]
pub struct Standing {
    /// Credited visits in order of time.
    pub credited: Vec<CreditedVisit>,
    /// Nights since its accrual began on which geometry and allocation let it be observed, tonight
    /// left out: each accrues `visits_per_night / every_nights` visits. Cloudy nights count.
    pub accrued_nights: u32,
    /// Nights, tonight included, on which it can still be observed before its season ends (its
    /// last night, or the first run of thirty nights without a chance).
    pub remaining_nights: u32,
}
