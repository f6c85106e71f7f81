//! limnograph: an instrument that is linked into a galaxy-formation code and records, step by step, what
//! goes on between snapshots.
//!
//! Data flows one way through the rooms of this crate:
//! [`capi`] (the C boundary) → [`lend`] (typed strided views of host arrays) → [`sweep`] (one pass over
//! them) → [`gauges`] (one file a diagnostic) → [`exact`] (sums that do not depend on order) → [`team`]
//! (reductions over processes) → [`series`] (disk) → [`reader`]. Beside them stand [`units`], [`config`]
//! and [`alarms`]. `DEVELOPERS.md` is the map.

#![warn(clippy::unwrap_used, clippy::expect_used)]

pub mod alarms;
pub mod capi;
pub mod config;
pub mod exact;
pub mod gauges;
pub mod lend;
pub mod reader;
pub mod run;
pub mod series;
pub mod sweep;
pub mod team;
pub mod units;
