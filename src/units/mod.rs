//! Floor 0: quantities whose mix-up could hurt, and the small numerical kit.

mod angle;
mod circular;
mod symmetric;

pub use angle::Angle;
pub use circular::{largest_gap, wrap_phase};
pub use symmetric::{Cholesky, Symmetric};
