//! What can be said to the keeper, and what it answers.

use tokio::sync::oneshot;

use crate::night::{Event, Refusal, Reply};
use crate::settings::Settings;

/// What the keeper answers.
pub type Answer = Result<Reply, Refusal>;

/// What can be said to the keeper.
#[derive(Debug)]
pub enum Message {
    /// Something happened; nobody waits for the answer.
    Event(Event),
    /// Somebody asks, and waits.
    Ask(Event, oneshot::Sender<Answer>),
    /// The settings on disk changed and were checked; or what was wrong with them.
    Settings(Result<Box<Settings>, String>),
    /// Finish: nothing is handed out any more, the ledger is closed.
    Stop,
}
