//! Floor 6: the daemon. A small shell around the pure night keeper.
//!
//! ```text
//!  HTTP (tokio) ──┐                        ┌──► ledger (on disk before any answer)
//!  weather feed ──┼─► inbox ─► keeper ─────┼──► planner thread ─► inbox
//!  push command ──┘  (bounded)  one thread └──► status, queue files, webhook, reports
//! ```
//!
//! - **One owner.** The keeper's thread alone holds the machine and the ledger; everybody else
//!   sends it a [`Message`] and waits for the answer, or reads the [`board`] that it writes after
//!   each turn.
//! - **Nothing waits for the network.** Feeds, commands and webhooks run in tasks of their own and
//!   speak through the inbox.
//! - **Planning never stops the loop**: it has a thread of its own and a limit of time.

pub mod board;
mod clock;
mod files;
pub mod http;
mod keeper;
mod message;
mod planner;
mod shell;
mod token;

pub use clock::InventedClock;
pub use message::{Answer, Message};
pub use shell::{DaemonError, Options, Weather, run};
pub use token::{Token, TokenError};
