//! Floor 0: quantities whose mix-up could hurt, and the small numerical kit.

mod angle;
mod chebyshev;
mod circular;
pub mod fast_trig;
mod roots;
mod symmetric;
pub mod vector;

pub use angle::Angle;
pub use chebyshev::Chebyshev;
pub use circular::{largest_gap, wrap_phase};
pub use roots::{Crossing, RootError, Search, bracketed_root, crossings};
pub use symmetric::{Cholesky, Symmetric};
