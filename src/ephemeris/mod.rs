//! Floor 1: where things stand in the sky. A face over the IAU standard routines (ERFA).

mod site;
mod star;

pub use site::{HorizonProfile, Site};
pub use star::Star;
