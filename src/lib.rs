//! nightwright decides, night after night, which star a small robotic spectroscopic telescope
//! observes, and keeps the record of what was done and what was lost.
//!
//! The house has floors; imports run downwards only (`tests/house.rs` sees to it):
//!
//! | floor | folders |
//! | --- | --- |
//! | 7 | [`cli`] |
//! | 6 | [`daemon`], [`season`] |
//! | 5 | [`ledger`], [`devices`], [`sim`] |
//! | 4 | [`ports`], [`report`] |
//! | 3 | [`night`], [`settings`] |
//! | 2 | [`score`], [`plan`], [`audit`] |
//! | 1 | [`ephemeris`], [`catalogue`], [`weather`], [`record`], [`page`] |
//! | 0 | [`units`], [`time`] |
//!
//! Floors 0 to 3 are pure: no file, socket, clock, log, print or environment; `now` is an argument.

#![forbid(unsafe_code)]
#![deny(missing_docs)]

pub mod audit;
pub mod catalogue;
pub mod cli;
pub mod daemon;
pub mod devices;
pub mod ephemeris;
pub mod ledger;
pub mod night;
pub mod page;
pub mod plan;
pub mod ports;
pub mod record;
pub mod report;
pub mod score;
pub mod season;
pub mod settings;
pub mod sim;
pub mod time;
pub mod units;
pub mod weather;
