//! Settings: every fault of a run file and of flags, also behind others, run file and flags the same, relative paths.

mod faults;
mod flags;
mod same;
mod together;
