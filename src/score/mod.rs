//! Floor 2: what a visit is worth, in parts that are each reported.
//!
//! A [`Photometer`] turns conditions into exposures; a [`Scorer`] turns both into
//! [`crate::record::ValueParts`].

mod cadence;
mod coverage;
mod orbit;
mod photon;
mod scorer;
mod standing;
mod weights;
mod window;

pub use cadence::{CADENCE_CAP, CadenceTerm, NotWanted, balance, overdue, owed};
pub use coverage::{Coverage, CoverageTable};
pub use orbit::Phase;
pub use photon::{
    CannotExpose, Conditions, Exposing, LIGHT_M_S, LONGEST_OPEN_S, Photometer, fibre_coupling,
    photon_rv_error_m_s, quality_factor,
};
pub use scorer::{Scorer, Tonight};
pub use standing::{CreditedVisit, Standing};
pub use weights::{SHARE_BOUNDS, season_factor, share_factors};
pub use window::{EDGE_SIGMAS, WindowVerdict, judge};

#[cfg(test)]
pub(crate) mod fixtures;
