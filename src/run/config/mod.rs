//! The run file and the flags: settings as found, checked together with all faults told at once, settled into a run.
//!
//! [`registry`] lists every setting once. [`Given`] holds what was found in a run file and behind flags, each with its place;
//! [`settle`] turns it into a [`RunConfig`](crate::run::catalogue::RunConfig). [`template`] writes a run file with every setting.

mod check;
mod file;
mod given;
mod nearest;
pub mod registry;
mod settle;
pub mod template;
mod values;

pub use file::key_of;
pub use given::{Given, Node, Raw};
pub use settle::{Settled, check as check_settings, settle};
