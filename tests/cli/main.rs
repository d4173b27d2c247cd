//! The built program run as a user would run it.

mod demo;
mod dry_run;
mod exits;
mod gather;
mod help;
mod inputs;
mod inspect;
mod memory;
mod outputs;
mod place;
mod progress;
mod run_file;
mod same;
mod talk;
