//! Floor 5: the real world behind the traits of `ports`: the system's clock, weather feeds, visits
//! carried out by a command, and a webhook. Whatever a device does, it ends as a typed fault or a
//! plain word to the night keeper, never as a panic and never as an endless wait.
//!
//! Nothing here protects people, dome or optics: the interlocks of the observatory do.

mod clock;
mod folder;
mod http;
mod push;
mod weather;
mod webhook;

pub use clock::SystemClock;
pub use folder::{write_report, write_whole};
pub use http::{ClientFault, chain, client};
pub use push::{PushedVisits, lease_margin_s};
pub use weather::{LiveFeed, Pacing};
pub use webhook::Webhook;
