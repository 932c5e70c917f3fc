//! Floor 2: what a visit is worth, in parts that are each reported.

mod standing;

pub use standing::{CreditedVisit, Standing};
