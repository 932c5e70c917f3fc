//! Floor 4: what the night needs from the world, as traits alone.

mod ledger;

pub use ledger::{Ledger, LedgerFault};
