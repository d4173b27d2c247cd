//! The built program run as a user would run it.

mod demo;
mod exits;
mod gather;
mod help;
mod inputs;
mod outputs;
mod place;
mod same;
mod talk;
