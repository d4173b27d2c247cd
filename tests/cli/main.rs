//! The built program run as a user would run it.

mod demo;
mod exits;
mod help;
mod inputs;
mod place;
mod same;
mod talk;
