//! Floor 0: quantities whose mix-up could hurt, and the small numerical kit.

mod angle;

pub use angle::Angle;
